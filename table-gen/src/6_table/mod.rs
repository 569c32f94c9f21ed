//! From rest states to the bytes the firmware reads, and the errors it will make with them.

#[path = "7_crossings.rs"]
pub mod crossings;
#[path = "3_knots.rs"]
mod knots;
#[path = "2_labels.rs"]
mod labels;
#[path = "1_parameter.rs"]
mod parameter;
#[path = "6_readable.rs"]
pub mod readable;
#[path = "4_stretches.rs"]
mod stretches;
#[path = "5_worst_errors.rs"]
mod worst_errors;

use crate::arm_file::Arm;
use crate::margins::corners::{CornerArm, Corners, Levels};
use crate::margins::requirements::Assessor;
use crate::margins::usable::Usable;
use crate::rest_states::curve::Solver;
use crate::rest_states::wells::wells;
use crate::rest_states::{RestStates, RestStatesError};
use crate::rod::{Held, Rod};
use firmware_core::format::MOST_BRANCHES;
use firmware_core::format::write::{
    BranchContents, Contents, SliceContents, StretchContents, WriteError, buffer_len, write,
};
use firmware_core::{
    BranchEntry, Deducted, Drive, Header, SurveyBand, Table, TableError, Units, WorstError,
};
use knots::{Knot, Quantities, Sampler};
use std::fmt;
use stretches::{StoredStretch, stored_stretch};
use worst_errors::Measured;

/// A finished table with what it was made from.
#[derive(Clone, Debug)]
pub struct Tabulation {
    /// The arm.
    pub arm: Arm,
    /// The corners of its tolerances with their rest states; branch numbers are positions in `corners.nominal.branches`.
    pub corners: Corners,
    /// What is usable, and everything that was assessed on the way.
    pub usable: Usable,
    /// Worst differences between the firmware's answers and fresh solves.
    pub worst_error: WorstError,
    /// Answers that were compared.
    pub compared: usize,
    /// The table.
    pub bytes: Vec<u8>,
}

/// Why no table came about.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum TabulationError {
    /// The rest states could not be certified.
    RestStates(RestStatesError),
    /// More branches than a table holds.
    TooManyBranches {
        /// Branches found.
        found: usize,
    },
    /// The firmware's answers are further from fresh solves than the arm file allows.
    NotAccurate {
        /// Quantity.
        quantity: &'static str,
        /// Worst error, SI.
        found: f64,
        /// Error allowed, SI.
        allowed: f64,
    },
    /// The format cannot hold the table.
    Write(WriteError),
    /// The firmware's own checks refuse the table.
    Refused(TableError),
}

impl fmt::Display for TabulationError {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        match self {
            Self::RestStates(error) => error.fmt(f),
            Self::TooManyBranches { found } => {
                write!(
                    f,
                    "{found} branches of rest states; a table holds {MOST_BRANCHES}. Narrow the setpoint range"
                )
            }
            Self::NotAccurate {
                quantity,
                found,
                allowed,
            } => write!(
                f,
                "the table would be off by {found:.3e} in {quantity}, {allowed:.3e} is allowed. Ask for less accuracy: the table \
                 stores single-precision numbers"
            ),
            Self::Write(error) => error.fmt(f),
            Self::Refused(error) => error.fmt(f),
        }
    }
}

impl std::error::Error for TabulationError {}

impl From<RestStatesError> for TabulationError {
    fn from(error: RestStatesError) -> Self {
        Self::RestStates(error)
    }
}

/// Share of the progress that finding the corners' rest states, assessing them, and the knots take.
const SHARES: [f64; 3] = [0.15, 0.65, 0.2];

/// Makes the table of `arm`. `progress` is called with the fraction done, 0 to 1.
///
/// # Errors
/// See [`TabulationError`].
pub fn tabulate(arm: &Arm, progress: &(dyn Fn(f64) + Sync)) -> Result<Tabulation, TabulationError> {
    let corners = Corners::find(arm, Levels::EndsAndMiddle, &|done| {
        progress(SHARES[0] * done)
    })?;
    let usable = Usable::find(&Assessor::new(arm, &corners), &mut |done| {
        progress(SHARES[0] + SHARES[1] * done)
    })?;
    let rod = &corners.nominal.rod;
    let allowed = allowed_errors(arm, rod);
    let mut spare = corners.nominal.branches.len();
    let mut slices = (0..corners.payloads_kg.len())
        .map(|slice| SliceTable::new(&corners, &usable, slice, &allowed, &mut spare))
        .collect::<Result<Vec<_>, TabulationError>>()?;
    progress(SHARES[0] + SHARES[1] + 0.5 * SHARES[2]);

    // First without stretches, to measure the errors that the header states.
    let draft = assemble(
        arm,
        &corners,
        &slices,
        None,
        WorstError::default(),
        Deducted::default(),
    )?;
    let table = Table::new(&draft).map_err(TabulationError::Refused)?;
    let mut measured = Measured::default();
    for (slice, made) in table.slices().zip(&mut slices) {
        measured.slice(&slice, made)?;
    }
    measured.within(&allowed)?;
    let worst_error = measured.worst(rod.held);
    let deducted = Deducted {
        setpoint: corners.nominal.fold_uncertainty_si() as f32,
        tension_n: (f64::from(worst_error.couple_n_m) / arm.tendons.offset_m) as f32,
    };
    let bytes = assemble(arm, &corners, &slices, Some(&usable), worst_error, deducted)?;
    Table::new(&bytes).map_err(TabulationError::Refused)?;
    progress(1.0);
    drop(slices);
    Ok(Tabulation {
        arm: arm.clone(),
        corners,
        usable,
        worst_error,
        compared: measured.compared,
        bytes,
    })
}

/// What is stored of the arm with one payload.
struct SliceTable<'a> {
    payload_kg: f64,
    rest: &'a RestStates,
    samplers: Vec<Sampler<'a>>,
    knots: Vec<Vec<Knot>>,
    /// By branch in the order of `samplers`: the directory entry and the stored knots.
    stored: Vec<(BranchEntry, Vec<f32>)>,
}

impl<'a> SliceTable<'a> {
    fn new(
        corners: &'a Corners,
        usable: &Usable,
        slice: usize,
        allowed: &Quantities,
        spare: &mut usize,
    ) -> Result<Self, TabulationError> {
        let own = |corner: &CornerArm| {
            corner.slice == slice
                && corner.corner.stiffness_percent == 0.0
                && corner.corner.tilt_deg == 0.0
        };
        let arm = corners
            .arms
            .iter()
            .position(own)
            .expect("every slice has its own arm among the corners");
        let rest = &corners.arms[arm].rest;
        let numbered = labels::numbered(corners, usable, arm, spare);
        if let Some(beyond) = numbered
            .iter()
            .find(|n| n.number >= usize::from(MOST_BRANCHES))
        {
            return Err(TabulationError::TooManyBranches {
                found: beyond.number + 1,
            });
        }
        let mut samplers: Vec<Sampler> = numbered.iter().map(|&n| Sampler::new(rest, n)).collect();
        let mut knots = Vec::new();
        for sampler in &mut samplers {
            let lost = RestStatesError::CurveLost {
                setpoint: sampler.cover()[0],
            };
            knots.push(sampler.knots(allowed).ok_or(lost)?);
        }
        let exits = exits(rest, &samplers, &knots)?;
        let stored = samplers
            .iter()
            .zip(&knots)
            .zip(&exits)
            .map(|((s, knots), &exits)| s.stored(knots, exits))
            .collect();
        Ok(Self {
            payload_kg: corners.payloads_kg[slice],
            rest,
            samplers,
            knots,
            stored,
        })
    }
}

/// Errors the arm file allows, in the order of the table's quantities.
fn allowed_errors(arm: &Arm, rod: &Rod) -> Quantities {
    let angle = arm.accuracy.angle_rad;
    let couple = arm.accuracy.couple_fraction * rod.energy_scale_j;
    let conjugate = match rod.held {
        Held::TipAngle => couple,
        Held::TipCouple => angle,
    };
    [
        angle,
        conjugate,
        couple,
        angle * rod.length_m,
        angle * rod.length_m,
        couple,
    ]
}

/// For each of the numbered branches, the bits of the passes that lead out of it at any knot's setpoint. Every one of them
/// is also a check that the list of rest states there is complete.
fn exits(
    rest: &RestStates,
    samplers: &[Sampler],
    knots: &[Vec<Knot>],
) -> Result<Vec<u32>, RestStatesError> {
    let mut solver = Solver::new(&rest.modal);
    let mut exits = vec![0; samplers.len()];
    let each = samplers.iter().zip(knots);
    for setpoint in
        each.flat_map(|(sampler, knots)| knots.iter().map(|knot| sampler.map().setpoint(knot.t())))
    {
        let at = rest
            .rod
            .setpoint_from_si(setpoint)
            .clamp(rest.rod.setpoints[0], rest.rod.setpoints[1]);
        // At a fold itself two states are one, and there is no telling pass from well.
        if rest
            .folds
            .iter()
            .any(|fold| (fold.point.setpoint - at).abs() < 1e-9)
        {
            continue;
        }
        let states = rest.at(&mut solver, at)?;
        let (branches, points): (Vec<usize>, Vec<_>) = states.into_iter().unzip();
        let wells = wells(&rest.modal, &points)
            .map_err(|_| RestStatesError::PassWithoutWells { setpoint })?;
        let numbered = |state: usize| {
            samplers.iter().position(|sampler| {
                let [from, to] = sampler.cover();
                sampler.branch() == branches[state] && (from..=to).contains(&setpoint)
            })
        };
        for (pass, joined) in wells.joins.iter().enumerate() {
            let Some([a, b]) = joined.filter(|[a, b]| a != b) else {
                continue;
            };
            let Some(pass) = numbered(pass) else { continue };
            for well in [a, b].into_iter().filter_map(numbered) {
                exits[well] |= 1 << samplers[pass].number();
            }
        }
    }
    Ok(exits)
}

/// Writes the table; without `usable` it has no stretches.
fn assemble(
    arm: &Arm,
    corners: &Corners,
    slices: &[SliceTable],
    usable: Option<&Usable>,
    worst_error: WorstError,
    deducted: Deducted,
) -> Result<Vec<u8>, TabulationError> {
    let rest = &corners.nominal;
    let rod = &rest.rod;
    let [lo, hi] = rod.setpoints.map(|s| rod.setpoint_si(s) as f32);
    let turn = std::f64::consts::TAU;
    let header = Header {
        name: &arm.name,
        fingerprint: arm.fingerprint(),
        units: Units::SiRadians,
        drive: match rod.held {
            Held::TipAngle => Drive::HeldTip,
            Held::TipCouple => Drive::AppliedCouple,
        },
        modes: rest.modal.modes() as u8,
        gamma: arm.gamma() as f32,
        length_m: rod.length_m as f32,
        mass_kg: arm.total_mass_kg() as f32,
        energy_scale_j: rod.energy_scale_j as f32,
        tilt_rad: (rod.tilt_rad - turn * (rod.tilt_rad / turn).round()) as f32,
        offset_m: arm.tendons.offset_m as f32,
        pretension_n: arm.tendons.pretension_n as f32,
        max_tension_n: arm.tendons.max_tension_n as f32,
        setpoint_lo: lo,
        setpoint_hi: hi,
        nominal_payload_kg: arm.payload.mass_kg as f32,
        worst_error,
        deducted,
    };
    let contents: Vec<(Vec<BranchContents>, Vec<StoredStretch>)> = slices
        .iter()
        .enumerate()
        .map(|(slice, made)| {
            let branches = made
                .stored
                .iter()
                .map(|(entry, knots)| BranchContents {
                    entry: *entry,
                    knots,
                })
                .collect();
            let of_slice = usable
                .into_iter()
                .flat_map(|u| &u.stretches)
                .filter(|s| s.slice == slice);
            let stretches = of_slice
                .filter_map(|stretch| stored_stretch(stretch, &made.stored))
                .collect();
            (branches, stretches)
        })
        .collect();
    let stretches: Vec<Vec<StretchContents>> = contents
        .iter()
        .map(|(_, stretches)| {
            stretches
                .iter()
                .map(|s| StretchContents {
                    entry: s.stretch,
                    reserves: &s.reserves,
                })
                .collect()
        })
        .collect();
    let slices: Vec<SliceContents> = contents
        .iter()
        .zip(&stretches)
        .zip(slices)
        .map(|(((branches, _), stretches), made)| SliceContents {
            payload_kg: made.payload_kg as f32,
            branches,
            stretches,
            survey: SurveyBand::default(),
            crossings: &[],
        })
        .collect();
    let contents = Contents {
        header,
        slices: &slices,
    };
    let mut bytes = vec![0; buffer_len(&contents)];
    let len = write(&contents, &mut bytes).map_err(TabulationError::Write)?;
    bytes.truncate(len);
    Ok(bytes)
}
