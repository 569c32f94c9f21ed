//! The corners of the tolerances, each with its own certified rest states, and which branch there is which nominal one.

use crate::arm_file::Arm;
use crate::rest_states::curve::{RestPoint, Solver};
use crate::rest_states::modes::{ModalRod, mean_angle};
use crate::rest_states::wells::{Wells, wells};
use crate::rest_states::{RestStates, RestStatesError};
use crate::rod::Rod;
use rayon::prelude::*;
use serde::Serialize;

/// Steps from the nominal arm to a corner at most: what cannot be followed with the shortest has vanished.
const SHORTEST_STEP: f64 = 1.0 / 512.0;
/// Farthest that a rest state may move in one step (rad, Euclidean norm of the coefficients).
const FARTHEST_MOVE: f64 = 0.3;
/// Longest step on the way to a corner, as a fraction of it.
const LONGEST_STEP: f64 = 0.25;
/// How close a followed state must come to one of the corner's own (rad, in mean angle).
const SAME_STATE: f64 = 0.02;
/// How far a setpoint exactly on a fold is moved, as a fraction of the setpoint range.
const OFF_FOLD: f64 = 1e-7;

/// Where in the tolerances an arm lies.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Corner {
    /// Payload (kg).
    pub payload_kg: f64,
    /// Bending stiffness off the nominal (%).
    pub stiffness_percent: f64,
    /// Base tilt off the nominal (deg).
    pub tilt_deg: f64,
}

/// An arm in one corner.
#[derive(Clone, Debug)]
pub struct CornerArm {
    /// Where.
    pub corner: Corner,
    /// Position of its payload among the slices'.
    pub slice: usize,
    /// Whether its payload is the heaviest, its stiffness the lowest.
    pub is_heaviest: bool,
    /// Whether its stiffness is the lowest.
    pub is_softest: bool,
    /// The arm.
    pub arm: Arm,
    /// Its rest states.
    pub rest: RestStates,
}

/// How many values of each tolerance are looked at.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Levels {
    /// The nominal arm alone.
    Nominal,
    /// Both ends of each tolerance together, and the arm of each payload slice: at most eleven corners.
    Ends,
    /// Both ends and the middle of each: 27 corners.
    EndsAndMiddle,
}

/// All corners of an arm.
#[derive(Clone, Debug)]
pub struct Corners {
    /// The nominal arm's rest states: their branches are the ones that all corners speak of.
    pub nominal: RestStates,
    /// Payloads of the slices (kg), increasing.
    pub payloads_kg: Vec<f64>,
    /// Position of the nominal payload among them.
    pub nominal_slice: usize,
    /// The corners; the arm with nominal stiffness and tilt of each slice is among them.
    pub arms: Vec<CornerArm>,
}

/// Payloads of the slices: both ends of the range and the nominal one, or the middle when that is an end. One slice when the
/// payload does not vary.
pub fn slice_payloads_kg(arm: &Arm) -> Vec<f64> {
    let [lo, hi] = arm.payload.range_kg;
    let nominal = arm.payload.mass_kg;
    if lo == hi {
        return vec![nominal];
    }
    let middle = if lo < nominal && nominal < hi {
        nominal
    } else {
        0.5 * (lo + hi)
    };
    vec![lo, middle, hi]
}

impl Corners {
    /// Finds and certifies the rest states of every corner. `progress` is called after each with the fraction done.
    ///
    /// # Errors
    /// The first error of any corner.
    pub fn find(
        arm: &Arm,
        levels: Levels,
        progress: &(dyn Fn(f64) + Sync),
    ) -> Result<Self, RestStatesError> {
        let nominal = RestStates::find(&Rod::new(arm), &arm.accuracy, arm.gamma())?;
        let payloads_kg = if levels == Levels::Nominal {
            vec![arm.payload.mass_kg]
        } else {
            slice_payloads_kg(arm)
        };
        let nominal_slice = payloads_kg
            .iter()
            .position(|&p| p == arm.payload.mass_kg)
            .expect("the nominal payload is a slice");
        let heaviest = payloads_kg.len() - 1;
        let spread = |reach: f64| match levels {
            Levels::Nominal => vec![0.0],
            _ if reach == 0.0 => vec![0.0],
            _ => vec![0.0, -reach, reach],
        };
        let stiffness_levels = spread(arm.tolerance.stiffness_fraction);
        let tilt_levels = spread(arm.base.tolerance_rad);
        let softest = stiffness_levels.iter().copied().fold(0.0, f64::min);
        let extreme = |levels: &[f64], value: f64| levels.len() == 1 || value != 0.0;
        let mut wanted = Vec::new();
        for (slice, &payload_kg) in payloads_kg.iter().enumerate() {
            for &stiffness in &stiffness_levels {
                for &tilt in &tilt_levels {
                    let is_end = extreme(&stiffness_levels, stiffness)
                        && extreme(&tilt_levels, tilt)
                        && (slice == 0 || slice == heaviest);
                    let is_slice = stiffness == 0.0 && tilt == 0.0;
                    if levels == Levels::EndsAndMiddle || is_end || is_slice {
                        wanted.push((slice, payload_kg, stiffness, tilt));
                    }
                }
            }
        }
        let done = std::sync::atomic::AtomicUsize::new(0);
        let arms = wanted
            .par_iter()
            .map(|&(slice, payload_kg, stiffness, tilt)| {
                let corner_arm = arm.varied(payload_kg, 1.0 + stiffness, tilt);
                let rest =
                    RestStates::find(&Rod::new(&corner_arm), &arm.accuracy, corner_arm.gamma())?;
                let before = done.fetch_add(1, std::sync::atomic::Ordering::Relaxed);
                progress((before + 1) as f64 / wanted.len() as f64);
                Ok(CornerArm {
                    corner: Corner {
                        payload_kg,
                        stiffness_percent: 100.0 * stiffness,
                        tilt_deg: tilt.to_degrees(),
                    },
                    slice,
                    is_heaviest: slice == heaviest,
                    is_softest: stiffness == softest,
                    arm: corner_arm,
                    rest,
                })
            })
            .collect::<Result<Vec<_>, RestStatesError>>()?;
        Ok(Self {
            nominal,
            payloads_kg,
            nominal_slice,
            arms,
        })
    }

    /// The state of nominal branch `label` at `setpoint` (SI), solved afresh; `None` where the branch is not.
    pub fn nominal_state(&self, label: usize, setpoint: f64) -> Option<RestPoint> {
        let rest = &self.nominal;
        rest.branches[label].state_at(
            &mut Solver::new(&rest.modal),
            rest.rod.setpoint_from_si(setpoint),
        )
    }
}

/// All rest states of one corner at one setpoint.
pub struct CornerStates {
    /// Their branches in the corner.
    pub numbers: Vec<usize>,
    /// The states.
    pub states: Vec<RestPoint>,
    /// Barriers.
    pub wells: Wells,
}

impl CornerArm {
    /// The rest states at `setpoint` (SI).
    ///
    /// # Errors
    /// [`RestStatesError`] when they are incomplete or a pass leads nowhere.
    pub fn states(&self, setpoint: f64) -> Result<CornerStates, RestStatesError> {
        let rod = &self.rest.rod;
        let [lo, hi] = rod.setpoints;
        let off = OFF_FOLD * (hi - lo);
        let mut at = rod.setpoint_from_si(setpoint);
        if self
            .rest
            .folds
            .iter()
            .any(|fold| (fold.point.setpoint - at).abs() < off)
        {
            at = if at + 2.0 * off < hi {
                at + 2.0 * off
            } else {
                at - 2.0 * off
            };
        }
        let states = self
            .rest
            .at(&mut Solver::new(&self.rest.modal), at.clamp(lo, hi))?;
        let (numbers, states): (Vec<_>, Vec<_>) = states.into_iter().unzip();
        let wells = wells(&self.rest.modal, &states)
            .map_err(|_| RestStatesError::PassWithoutWells { setpoint })?;
        Ok(CornerStates {
            numbers,
            states,
            wells,
        })
    }

    /// Coefficients, in the nominal number of modes, of what the stable nominal state `from` turns into when the arm goes from
    /// nominal to this corner in a straight line at a fixed setpoint; `None` when it ceases to be stable on the way.
    pub fn follow(&self, nominal: &RestStates, from: &RestPoint) -> Option<Vec<f64>> {
        let stiffness = 0.01 * self.corner.stiffness_percent;
        // In units of the nominal m g L, which the two rods' scales give.
        let more_payload = self.rest.rod.energy_scale_j / nominal.rod.energy_scale_j - 1.0;
        let tilt = self.corner.tilt_deg.to_radians();
        if stiffness == 0.0 && more_payload == 0.0 && tilt == 0.0 {
            return Some(from.c.clone());
        }
        let way = |x: f64| -> ModalRod {
            nominal
                .modal
                .varied(1.0 + x * stiffness, x * more_payload, x * tilt)
        };
        let mut at = 0.0;
        let mut step = LONGEST_STEP;
        let mut state = from.clone();
        while at < 1.0 {
            let next = (at + step).min(1.0);
            let rod = way(next);
            let solved = Solver::new(&rod)
                .at_setpoint(&state.c, from.setpoint)
                .filter(|solved| {
                    let moved = solved
                        .c
                        .iter()
                        .zip(&state.c)
                        .map(|(a, b)| (a - b).powi(2))
                        .sum::<f64>()
                        .sqrt();
                    solved.index == 0 && moved < FARTHEST_MOVE
                });
            match solved {
                Some(solved) => {
                    state = solved;
                    at = next;
                    step = (2.0 * step).min(LONGEST_STEP);
                }
                None => {
                    step *= 0.5;
                    if step < SHORTEST_STEP {
                        return None;
                    }
                }
            }
        }
        Some(state.c)
    }
}

impl CornerStates {
    /// The stable state nearest to the followed coefficients `c`, if it is near enough to be the same.
    pub fn nearest_well(&self, c: &[f64]) -> Option<usize> {
        let mean_angle = mean_angle(c);
        let (place, off) = self
            .states
            .iter()
            .enumerate()
            .filter(|(_, state)| state.index == 0)
            .map(|(place, state)| (place, (state.mean_angle() - mean_angle).abs()))
            .min_by(|a, b| a.1.total_cmp(&b.1))?;
        (off < SAME_STATE).then_some(place)
    }
}
