//! The firmware's answers against fresh solves of the rod, between all knots.

use super::knots::{QUANTITIES, Quantities, UNSTABLE_QUANTITIES};
use super::{SliceTable, TabulationError};
use crate::rest_states::curve::Solver;
use crate::rest_states::wells::wells;
use crate::rest_states::{RestStates, RestStatesError};
use crate::rod::Held;
use firmware_core::{Drive, RestState, Slice, WorstError};

/// Places tried between two knots.
const PLACES: usize = 16;
/// The worst error lies between the places that are tried; this factor covers what they miss.
const BETWEEN_PLACES: f64 = 1.03;
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
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Measured {
    barrier_j: f64,
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

    /// As the header has it, rounded up.
    pub(super) fn worst(&self, held: Held) -> WorstError {
        let [
            mean_angle_rad,
            conjugate,
            energy_j,
            tip_x,
            tip_y,
            restoring_n_m_per_rad,
        ] = self.by_quantity.map(|error| (error as f32).next_up());
        let (tip_angle_rad, couple_n_m) = match held {
            Held::TipAngle => (0.0, conjugate),
            Held::TipCouple => (conjugate, 0.0),
        };
        WorstError {
            mean_angle_rad,
            tip_angle_rad,
            couple_n_m,
            energy_j,
            barrier_j: (self.barrier_j as f32).next_up(),
            tip_m: tip_x.max(tip_y),
            restoring_n_m_per_rad,
        }
    }

    /// Compares one slice at [`PLACES`] places between all neighbouring knots.
    pub(super) fn slice(
        &mut self,
        slice: &Slice,
        table: &mut SliceTable,
    ) -> Result<(), RestStatesError> {
        let rest = table.rest;
        for (sampler, knots) in table.samplers.iter_mut().zip(&table.knots) {
            let [from, to] = sampler.cover().map(|setpoint| setpoint as f32);
            for pair in knots.windows(2) {
                for place in 0..PLACES {
                    let x = (place as f64 + 0.5) / PLACES as f64;
                    let t = pair[0].t() + x * (pair[1].t() - pair[0].t());
                    let setpoint = (sampler.map().setpoint(t) as f32).clamp(from, to);
                    // Closer to a fold than the fold itself is known, there is nothing to compare.
                    if sampler.to_fold(f64::from(setpoint)) < rest.fold_uncertainty_si() {
                        continue;
                    }
                    let lost = RestStatesError::CurveLost {
                        setpoint: f64::from(setpoint),
                    };
                    let answer = slice
                        .at(sampler.number() as u8, setpoint)
                        .map_err(|_| lost)?;
                    let truth = sampler.quantities(f64::from(setpoint)).ok_or(lost)?;
                    for (worst, error) in self
                        .by_quantity
                        .iter_mut()
                        .zip(errors(slice, &answer, &truth))
                    {
                        *worst = worst.max(BETWEEN_PLACES * error);
                    }
                    if answer.index == 0 {
                        let error = barrier_error(rest, &answer, sampler.branch(), setpoint)?;
                        self.barrier_j = self.barrier_j.max(BETWEEN_PLACES * error);
                    }
                    self.compared += 1;
                }
            }
        }
        Ok(())
    }
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
    branch: usize,
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
        .position(|&number| number == branch)
        .and_then(|place| wells.barrier[place])
        .map(|barrier| barrier * rest.rod.energy_scale_j);
    let found = answer.well.and_then(|well| well.barrier_j).map(f64::from);
    Ok(match (found, truth) {
        (Some(found), Some(truth)) => (found - truth).abs(),
        (one, other) => one.or(other).unwrap_or(0.0),
    })
}
