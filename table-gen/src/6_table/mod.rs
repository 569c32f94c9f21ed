//! From rest states to the bytes the firmware reads, and the errors it will make with them.

#[path = "2_knots.rs"]
mod knots;
#[path = "1_parameter.rs"]
mod parameter;
#[path = "5_readable.rs"]
pub mod readable;
#[path = "3_stretches.rs"]
mod stretches;
#[path = "4_worst_errors.rs"]
mod worst_errors;

use crate::arm_file::Arm;
use crate::margins::corners::{Corners, Levels};
use crate::margins::requirements::Assessor;
use crate::margins::usable::Usable;
use crate::rest_states::curve::Solver;
use crate::rest_states::wells::wells;
use crate::rest_states::{RestStates, RestStatesError};
use crate::rod::{Held, Rod};
use firmware_core::format::write::{
    BranchContents, Contents, SliceContents, WriteError, buffer_len, write,
};
use firmware_core::{
    BranchEntry, Deducted, Drive, Header, Stretch, Table, TableError, Units, WorstError,
};
use knots::{Quantities, Sampler};
use std::fmt;

/// Branches a slice can hold: the firmware keeps the passes out of a well in 32 bits.
const MOST_BRANCHES: usize = 32;

/// A finished table with what it was made from.
#[derive(Clone, Debug)]
pub struct Tabulation {
    /// The arm.
    pub arm: Arm,
    /// Its certified rest states; branch numbers are positions in `rest.branches`.
    pub rest: RestStates,
    /// The corners of its tolerances with their rest states.
    pub corners: Corners,
    /// What is usable, and everything that was assessed on the way.
    pub usable: Usable,
    /// Stretches that may be commanded, by branch and setpoint.
    pub stretches: Vec<Stretch>,
    /// Worst differences between the firmware's answers and fresh solves.
    pub worst_error: WorstError,
    /// The same of the barriers (J).
    pub worst_barrier_error_j: f64,
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

/// Makes the table of `arm`. `progress` is called with the fraction done, 0 to 1.
///
/// # Errors
/// See [`TabulationError`].
pub fn tabulate(arm: &Arm, progress: &mut dyn FnMut(f64)) -> Result<Tabulation, TabulationError> {
    let rod = Rod::new(arm);
    progress(0.0);
    let corners = Corners::find(arm, Levels::EndsAndMiddle, &|_| {})?;
    let usable = Usable::find(&Assessor::new(arm, &corners), &mut |_| {})?;
    let rest = corners.nominal.clone();
    progress(0.3);
    if rest.branches.len() > MOST_BRANCHES {
        return Err(TabulationError::TooManyBranches {
            found: rest.branches.len(),
        });
    }
    let mut samplers: Vec<Sampler> = rest
        .branches
        .iter()
        .map(|branch| Sampler::new(&rest, branch))
        .collect();
    let allowed = allowed_errors(arm, &rod);
    let mut knots = Vec::new();
    for sampler in &mut samplers {
        let lost = RestStatesError::CurveLost {
            setpoint: sampler.cover()[0],
        };
        knots.push(sampler.knots(&allowed).ok_or(lost)?);
        progress(0.3 + 0.2 * knots.len() as f64 / rest.branches.len() as f64);
    }
    let setpoints: Vec<f64> = samplers
        .iter()
        .zip(&knots)
        .flat_map(|(sampler, knots)| knots.iter().map(|knot| sampler.map().setpoint(knot.t())))
        .collect();
    let exits = exits(&rest, &setpoints)?;
    progress(0.6);
    let branches: Vec<(BranchEntry, Vec<f32>)> = samplers
        .iter()
        .zip(&knots)
        .zip(&exits)
        .map(|((sampler, knots), &exits)| sampler.stored(knots, exits))
        .collect();

    // First without stretches, to measure the errors that shorten them.
    let draft = assemble(
        arm,
        &rest,
        &branches,
        &[],
        WorstError::default(),
        Deducted::default(),
    )?;
    let table = Table::new(&draft).map_err(TabulationError::Refused)?;
    let measured = worst_errors::measure(&table, &rest, &mut samplers, &knots, &mut |done| {
        progress(0.6 + 0.3 * done)
    })?;
    measured.within(&allowed)?;
    let deducted = Deducted {
        setpoint: fold_uncertainty(&rest) as f32,
        tension_n: (f64::from(measured.worst.couple_n_m) / arm.tendons.offset_m) as f32,
    };
    let mut stretches = Vec::new();
    for (number, sampler) in samplers.iter_mut().enumerate() {
        if rest.branches[number].index == 0 {
            let lost = RestStatesError::CurveLost {
                setpoint: sampler.cover()[0],
            };
            let mut search = stretches::Search {
                sampler,
                tendons: &arm.tendons,
                energy_scale_j: rod.energy_scale_j,
                deducted,
            };
            stretches.extend(search.run(number as u8).ok_or(lost)?);
        }
    }
    let bytes = assemble(arm, &rest, &branches, &stretches, measured.worst, deducted)?;
    Table::new(&bytes).map_err(TabulationError::Refused)?;
    progress(1.0);
    drop(samplers);
    Ok(Tabulation {
        arm: arm.clone(),
        rest,
        corners,
        usable,
        stretches,
        worst_error: measured.worst,
        worst_barrier_error_j: measured.barrier_j,
        compared: measured.compared,
        bytes,
    })
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

/// How far a stored fold may be from the exact one, in units of the setpoint: the modes' part and f32 rounding.
fn fold_uncertainty(rest: &RestStates) -> f64 {
    let largest = rest
        .rod
        .setpoints
        .iter()
        .map(|s| rest.rod.setpoint_si(*s).abs())
        .fold(0.0, f64::max);
    let modes = match rest.rod.held {
        Held::TipAngle => rest.distance.angle_rad,
        Held::TipCouple => rest.distance.couple * rest.rod.energy_scale_j,
    };
    modes + 2.0 * largest * f64::from(f32::EPSILON)
}

/// For each branch, the bits of the passes that lead out of it at any of `setpoints` (SI). Every one of them is also a
/// check that the list of rest states there is complete.
fn exits(rest: &RestStates, setpoints: &[f64]) -> Result<Vec<u32>, RestStatesError> {
    let mut solver = Solver::new(&rest.modal);
    let mut exits = vec![0; rest.branches.len()];
    for &setpoint in setpoints {
        let at = rest.rod.setpoint_from_si(setpoint);
        // At a fold itself two states are one, and there is no telling pass from well.
        if rest
            .folds
            .iter()
            .any(|fold| (fold.point.setpoint - at).abs() < 1e-9)
        {
            continue;
        }
        let states = rest.at(&mut solver, at)?;
        let (numbers, points): (Vec<usize>, Vec<_>) = states.into_iter().unzip();
        let wells = wells(&rest.modal, &points)
            .map_err(|_| RestStatesError::PassWithoutWells { setpoint })?;
        for (pass, joined) in wells.joins.iter().enumerate() {
            if let Some([a, b]) = joined.filter(|[a, b]| a != b) {
                exits[numbers[a]] |= 1 << numbers[pass];
                exits[numbers[b]] |= 1 << numbers[pass];
            }
        }
    }
    Ok(exits)
}

/// Writes the table.
fn assemble(
    arm: &Arm,
    rest: &RestStates,
    branches: &[(BranchEntry, Vec<f32>)],
    stretches: &[Stretch],
    worst_error: WorstError,
    deducted: Deducted,
) -> Result<Vec<u8>, TabulationError> {
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
        worst_error,
        deducted,
    };
    let branches: Vec<BranchContents> = branches
        .iter()
        .map(|(entry, knots)| BranchContents {
            entry: *entry,
            knots,
        })
        .collect();
    let slice = SliceContents {
        payload_kg: arm.payload.mass_kg as f32,
        branches: &branches,
        stretches,
    };
    let contents = Contents {
        header,
        slices: &[slice],
    };
    let mut bytes = vec![0; buffer_len(&contents)];
    let len = write(&contents, &mut bytes).map_err(TabulationError::Write)?;
    bytes.truncate(len);
    Ok(bytes)
}
