//! The firmware's answers against fresh solves of the rod, between all knots.

use super::TabulationError;
use super::knots::{Knot, QUANTITIES, Quantities, Sampler, UNSTABLE_QUANTITIES};
use crate::rest_states::curve::Solver;
use crate::rest_states::wells::wells;
use crate::rest_states::{RestStates, RestStatesError};
use crate::rod::Held;
use firmware_core::{Drive, RestState, Slice, Table, WorstError};

/// Places tried between two knots.
const PLACES: usize = 16;
/// Of these, every so many-th also compares the barrier.
const BARRIER_EVERY: usize = 4;
/// Names of the quantities, in the order of the table.
const NAMES: [&str; QUANTITIES] = [
    "mean angle (rad)",
    "couple or tip angle (N m or rad)",
    "energy (J)",
    "tip x (m)",
    "tip y (m)",
    "restoring stiffness (N m/rad)",
];

/// The worst of all comparisons.
#[derive(Clone, Copy, Debug)]
pub(super) struct Measured {
    pub(super) worst: WorstError,
    pub(super) barrier_j: f64,
    pub(super) compared: usize,
    by_quantity: Quantities,
}

impl Measured {
    /// Whether every quantity is as accurate as asked.
    pub(super) fn within(&self, allowed: &Quantities) -> Result<(), TabulationError> {
        // A barrier is the difference of two energies.
        let barrier = ("barrier (J)", self.barrier_j, 2.0 * allowed[2]);
        let each = (0..QUANTITIES).map(|q| (NAMES[q], self.by_quantity[q], allowed[q]));
        for (quantity, found, allowed) in each.chain([barrier]) {
            let is_within = found <= allowed;
            if !is_within {
                return Err(TabulationError::NotAccurate {
                    quantity,
                    found,
                    allowed,
                });
            }
        }
        Ok(())
    }
}

/// Compares at [`PLACES`] places between all neighbouring knots.
pub(super) fn measure(
    table: &Table,
    rest: &RestStates,
    samplers: &mut [Sampler],
    knots: &[Vec<Knot>],
    progress: &mut dyn FnMut(f64),
) -> Result<Measured, TabulationError> {
    let slice = table.slices().next().expect("a checked table has a slice");
    let mut by_quantity = [0.0; QUANTITIES];
    let (mut barrier_j, mut compared): (f64, usize) = (0.0, 0);
    for (number, (sampler, knots)) in samplers.iter_mut().zip(knots).enumerate() {
        progress(number as f64 / rest.branches.len() as f64);
        let [from, to] = sampler.cover().map(|setpoint| setpoint as f32);
        for pair in knots.windows(2) {
            for place in 0..PLACES {
                let x = (place as f64 + 0.5) / PLACES as f64;
                let setpoint = sampler
                    .map()
                    .setpoint(pair[0].t() + x * (pair[1].t() - pair[0].t()))
                    as f32;
                let setpoint = setpoint.clamp(from, to);
                let lost = RestStatesError::CurveLost {
                    setpoint: f64::from(setpoint),
                };
                let answer = slice.at(number as u8, setpoint).map_err(|_| lost)?;
                let truth = sampler.quantities(f64::from(setpoint)).ok_or(lost)?;
                for (worst, error) in by_quantity.iter_mut().zip(errors(&slice, &answer, &truth)) {
                    *worst = error.max(*worst);
                }
                if answer.index == 0 && place % BARRIER_EVERY == 1 {
                    barrier_j = barrier_j.max(barrier_error(rest, &answer, setpoint)?);
                }
                compared += 1;
            }
        }
    }
    let [mean_angle, conjugate, energy, tip_x, tip_y, restoring] =
        by_quantity.map(|error| (error as f32).next_up());
    let (tip_angle_rad, couple_n_m) = match rest.rod.held {
        Held::TipAngle => (0.0, conjugate),
        Held::TipCouple => (conjugate, 0.0),
    };
    let worst = WorstError {
        mean_angle_rad: mean_angle,
        tip_angle_rad,
        couple_n_m,
        energy_j: energy,
        tip_m: tip_x.max(tip_y),
        restoring_n_m_per_rad: restoring,
    };
    Ok(Measured {
        worst,
        barrier_j,
        compared,
        by_quantity,
    })
}

/// Differences in the order of the table's quantities; zero for those that an unstable branch does not keep.
fn errors(slice: &Slice, answer: &RestState, truth: &Quantities) -> Quantities {
    let conjugate = match slice.limits().drive {
        Drive::HeldTip => answer.couple_n_m,
        Drive::AppliedCouple => answer.tip_angle_rad,
    };
    let mut found = *truth;
    found[..UNSTABLE_QUANTITIES]
        .copy_from_slice(&[answer.mean_angle_rad, conjugate, answer.energy_j].map(f64::from));
    if let Some(well) = answer.well {
        found[UNSTABLE_QUANTITIES..].copy_from_slice(
            &[well.tip_x_m, well.tip_y_m, well.restoring_n_m_per_rad].map(f64::from),
        );
    }
    std::array::from_fn(|q| (found[q] - truth[q]).abs())
}

/// Difference of the barrier from the one by going downhill from every pass afresh. Where the firmware knows of a pass and
/// the fresh solve of none, or the reverse, the whole barrier counts.
fn barrier_error(
    rest: &RestStates,
    answer: &RestState,
    setpoint: f32,
) -> Result<f64, RestStatesError> {
    let setpoint = f64::from(setpoint);
    let mut solver = Solver::new(&rest.modal);
    let states = rest.at(&mut solver, rest.rod.setpoint_from_si(setpoint))?;
    let (numbers, points): (Vec<usize>, Vec<_>) = states.into_iter().unzip();
    let wells =
        wells(&rest.modal, &points).map_err(|_| RestStatesError::PassWithoutWells { setpoint })?;
    let truth = numbers
        .iter()
        .position(|&number| number == usize::from(answer.branch))
        .and_then(|place| wells.barrier[place])
        .map(|barrier| barrier * rest.rod.energy_scale_j);
    let found = answer.well.and_then(|well| well.barrier_j).map(f64::from);
    Ok(match (found, truth) {
        (Some(found), Some(truth)) => (found - truth).abs(),
        (one, other) => one.or(other).unwrap_or(0.0),
    })
}
