//! Walking the directory and the values beside it. Records are decoded when they are asked for; the checks of [`super::Table::new`] make every
//! decode succeed, and if the memory under a table should change all the same, the walks end early.

use crate::bytes::float;
use crate::format::{BranchEntry, Crossing, Reserves, SliceEntry, Stretch, SurveyBand, take};

use super::{Limits, Usable};

/// The arm with one payload: its branches, stretches and crossings.
#[derive(Clone, Copy, Debug)]
pub struct Slice<'a> {
    /// Payload at the tip (kg).
    pub payload_kg: f32,
    /// Stiffness for which its crossings were tried.
    pub survey: SurveyBand,
    limits: Limits,
    branch_count: u8,
    stretch_count: u8,
    crossing_count: u8,
    branches: &'a [u8],
    stretches: &'a [u8],
    crossings: &'a [u8],
    knots: &'a [u8],
    reserves: &'a [u8],
}

impl<'a> Slice<'a> {
    /// The constants of the arm.
    pub const fn limits(&self) -> Limits {
        self.limits
    }

    /// How many branches there are. Their numbers need not be consecutive.
    pub const fn branch_count(&self) -> u8 {
        self.branch_count
    }

    /// How many stretches there are, of all branches.
    pub const fn stretch_count(&self) -> u8 {
        self.stretch_count
    }

    /// The planned crossings, in the order of the table.
    pub const fn crossings(&self) -> Crossings<'a> {
        Crossings {
            left: self.crossing_count,
            directory: self.crossings,
        }
    }

    /// The branches, numbers increasing.
    pub const fn branches(&self) -> Branches<'a> {
        Branches {
            left: self.branch_count,
            directory: self.branches,
            knots: self.knots,
        }
    }

    /// The branch with this number, `None` when there is none.
    pub fn branch(&self, number: u8) -> Option<Branch<'a>> {
        self.branches().find(|branch| branch.number == number)
    }

    /// The stretches of one branch, setpoint increasing; none for a branch that is unstable or does not exist.
    pub const fn stretches(&self, branch: u8) -> Stretches<'a> {
        Stretches {
            branch,
            left: self.stretch_count,
            directory: self.stretches,
            reserves: self.reserves,
        }
    }

    /// The stretch of `branch` that contains `setpoint`; none when it is not finite.
    pub fn stretch_at(&self, branch: u8, setpoint: f32) -> Option<Usable<'a>> {
        self.stretches(branch)
            .find(|usable| usable.contains(setpoint))
    }

    /// Worst-case reserves with this payload; `None` when `setpoint` is in no stretch of `branch`.
    pub fn reserves(&self, branch: u8, setpoint: f32) -> Option<Reserves> {
        self.stretch_at(branch, setpoint)?.reserves(setpoint)
    }
}

/// One branch of a slice.
#[derive(Clone, Copy, Debug)]
pub struct Branch<'a> {
    /// Its number, the same with every payload.
    pub number: u8,
    /// Its entry in the directory.
    pub entry: BranchEntry,
    knots: &'a [u8],
}

impl<'a> Branch<'a> {
    /// The `place`-th value of the `knot`-th knot: 0 is t, then value and slope of each quantity in turn. `None`
    /// beyond either end.
    pub fn knot_value(&self, knot: u16, place: usize) -> Option<f32> {
        let width = self.entry.floats_per_knot();
        if place >= width {
            return None;
        }
        float(
            self.knots,
            usize::from(knot).checked_mul(width)?.checked_add(place)?,
        )
    }

    /// All knot values in the order of the format.
    pub fn knot_values(&self) -> impl Iterator<Item = f32> + use<'a> {
        let knots = self.knots;
        (0..knots.len() / 4).map_while(move |number| float(knots, number))
    }
}

/// The slices of a table.
#[derive(Clone, Debug)]
pub struct Slices<'a> {
    limits: Limits,
    directory: &'a [u8],
    values: &'a [u8],
}

impl<'a> Slices<'a> {
    pub(super) const fn new(limits: Limits, directory: &'a [u8], values: &'a [u8]) -> Self {
        Self {
            limits,
            directory,
            values,
        }
    }
}

impl<'a> Iterator for Slices<'a> {
    type Item = Slice<'a>;

    fn next(&mut self) -> Option<Slice<'a>> {
        let (entry, directory) = take::<SliceEntry>(self.directory)?;
        let mut walk = Branches {
            left: entry.branches,
            directory,
            knots: self.values,
        };
        for _ in walk.by_ref() {}
        let mut slice = Slice {
            payload_kg: entry.payload_kg,
            survey: entry.survey,
            limits: self.limits,
            branch_count: entry.branches,
            stretch_count: entry.stretches,
            crossing_count: entry.crossings,
            branches: directory,
            stretches: walk.directory,
            crossings: &[],
            knots: self.values,
            reserves: walk.knots,
        };
        (self.directory, self.values) = (walk.directory, walk.knots);
        for _ in 0..entry.stretches {
            (_, self.directory, self.values) = stretch(self.directory, self.values)?;
        }
        slice.crossings = self.directory;
        for _ in 0..entry.crossings {
            (_, self.directory) = take::<Crossing>(self.directory)?;
        }
        Some(slice)
    }
}

/// The stretch at the front of a directory, with its reserves at the front of `values`, and what follows both.
fn stretch<'a>(directory: &'a [u8], values: &'a [u8]) -> Option<(Usable<'a>, &'a [u8], &'a [u8])> {
    let (entry, directory) = take::<Stretch>(directory)?;
    let (reserves, values) = values.split_at_checked(entry.reserve_values().checked_mul(4)?)?;
    Some((Usable::new(entry, reserves), directory, values))
}

/// The branches of a slice.
#[derive(Clone, Debug)]
pub struct Branches<'a> {
    left: u8,
    directory: &'a [u8],
    knots: &'a [u8],
}

impl<'a> Iterator for Branches<'a> {
    type Item = Branch<'a>;

    fn next(&mut self) -> Option<Branch<'a>> {
        self.left = self.left.checked_sub(1)?;
        let (entry, directory) = take::<BranchEntry>(self.directory)?;
        let values = usize::from(entry.knots).checked_mul(entry.floats_per_knot())?;
        let (knots, rest) = self.knots.split_at_checked(values.checked_mul(4)?)?;
        self.directory = directory;
        self.knots = rest;
        Some(Branch {
            number: entry.number,
            entry,
            knots,
        })
    }
}

/// The stretches of a branch.
#[derive(Clone, Debug)]
pub struct Stretches<'a> {
    branch: u8,
    left: u8,
    directory: &'a [u8],
    reserves: &'a [u8],
}

impl<'a> Iterator for Stretches<'a> {
    type Item = Usable<'a>;

    fn next(&mut self) -> Option<Usable<'a>> {
        loop {
            self.left = self.left.checked_sub(1)?;
            let (usable, directory, reserves) = stretch(self.directory, self.reserves)?;
            (self.directory, self.reserves) = (directory, reserves);
            if usable.entry.branch == self.branch {
                return Some(usable);
            }
        }
    }
}

/// The crossings of a slice.
#[derive(Clone, Debug)]
pub struct Crossings<'a> {
    left: u8,
    directory: &'a [u8],
}

impl Iterator for Crossings<'_> {
    type Item = Crossing;

    fn next(&mut self) -> Option<Crossing> {
        self.left = self.left.checked_sub(1)?;
        let (crossing, directory) = take::<Crossing>(self.directory)?;
        self.directory = directory;
        Some(crossing)
    }
}
