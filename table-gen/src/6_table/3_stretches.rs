//! The stretches of setpoints that may be commanded on a stable branch, and what ends them.

use super::knots::Sampler;
use crate::arm_file::Tendons;
use firmware_core::{Deducted, Limit, Requirement, Stretch};

/// Places along a branch at which the tension is tried before its crossings are refined.
const TRIALS: usize = 200;
/// Halvings of a crossing.
const HALVINGS: usize = 40;

/// Finds the stretches of one branch.
pub(super) struct Search<'a, 'b> {
    pub(super) sampler: &'a mut Sampler<'b>,
    pub(super) tendons: &'a Tendons,
    pub(super) energy_scale_j: f64,
    pub(super) deducted: Deducted,
}

impl Search<'_, '_> {
    /// The stretches of `branch`, setpoints increasing; `None` when a state cannot be solved.
    pub(super) fn run(&mut self, branch: u8) -> Option<Vec<Stretch>> {
        let [mut from, mut to] = self.sampler.cover();
        let [fold_from, fold_to] = self.sampler.ends_in_fold();
        let deducted = f64::from(self.deducted.setpoint);
        from += if fold_from { deducted } else { 0.0 };
        to -= if fold_to { deducted } else { 0.0 };
        if from >= to {
            return Some(Vec::new());
        }
        let mut stretches = Vec::new();
        let mut open: Option<(f64, Limit)> = None;
        let mut last = from;
        for k in 0..=TRIALS {
            let x = k as f64 / TRIALS as f64;
            let here = from * (1.0 - x) + to * x;
            let holds = self.holds(here)?;
            match (open, holds) {
                (None, true) if k == 0 => open = Some((here, self.end_limit(0, here))),
                (None, true) => {
                    let at = self.crossing(here, last)?;
                    open = Some((at, self.tension_limit(at)?));
                }
                (Some((start, limit)), false) => {
                    let at = self.crossing(last, here)?;
                    stretches.extend(stretch(
                        branch,
                        (start, limit),
                        (at, self.tension_limit(at)?),
                    ));
                    open = None;
                }
                _ => {}
            }
            last = here;
        }
        if let Some(start) = open {
            stretches.extend(stretch(branch, start, (to, self.end_limit(1, to))));
        }
        Some(stretches)
    }

    /// The limit at an end that no tension sets: the fold, less what was deducted, or the end of the table.
    fn end_limit(&self, end: usize, setpoint: f64) -> Limit {
        if self.sampler.ends_in_fold()[end] {
            Limit {
                requirement: Requirement::FoldDistance,
                value: self.deducted.setpoint,
                limit: self.deducted.setpoint,
            }
        } else {
            let range_end = setpoint as f32;
            Limit {
                requirement: Requirement::TableRange,
                value: range_end,
                limit: range_end,
            }
        }
    }

    fn tension_limit(&mut self, setpoint: f64) -> Option<Limit> {
        Some(Limit {
            requirement: Requirement::TensionMax,
            value: self.pulling_tension_n(setpoint)? as f32,
            limit: self.tendons.max_tension_n as f32,
        })
    }

    fn pulling_tension_n(&mut self, setpoint: f64) -> Option<f64> {
        let couple_n_m = self.sampler.state(setpoint)?.couple * self.energy_scale_j;
        Some(
            self.tendons.pretension_n
                + couple_n_m.abs() / self.tendons.offset_m
                + f64::from(self.deducted.tension_n),
        )
    }

    fn holds(&mut self, setpoint: f64) -> Option<bool> {
        Some(self.pulling_tension_n(setpoint)? <= self.tendons.max_tension_n)
    }

    /// The setpoint next to the crossing at which the tension still holds.
    fn crossing(&mut self, mut inside: f64, mut outside: f64) -> Option<f64> {
        for _ in 0..HALVINGS {
            let middle = 0.5 * (inside + outside);
            if self.holds(middle)? {
                inside = middle;
            } else {
                outside = middle;
            }
        }
        Some(inside)
    }
}

/// A stretch inside its ends after rounding to f32; `None` when nothing is left.
fn stretch(
    branch: u8,
    (from, from_limit): (f64, Limit),
    (to, to_limit): (f64, Limit),
) -> Option<Stretch> {
    let inward = |value: f64, rounded: f32, up: bool| match up {
        true if f64::from(rounded) < value => rounded.next_up(),
        false if f64::from(rounded) > value => rounded.next_down(),
        _ => rounded,
    };
    let (from, to) = (
        inward(from, from as f32, true),
        inward(to, to as f32, false),
    );
    (from < to).then_some(Stretch {
        branch,
        from,
        to,
        from_limit,
        to_limit,
    })
}
