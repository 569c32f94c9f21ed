//! Every rest state at one setpoint, in SI, as the command line prints it.

use super::confirm::judge;
use super::curve::Solver;
use super::wells::wells;
use super::{RestStates, RestStatesError, degree_sum};
use crate::arm_file::{Arm, Drive};
use crate::rod::Rod;
use serde::Serialize;

/// Half width of the setpoint range that is followed around a tip angle asked for (rad).
const AROUND_ANGLE_RAD: f64 = 0.05;
/// The same around a couple, as a fraction of m g L.
const AROUND_COUPLE: f64 = 0.01;

/// What is held when rest states are asked for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Question {
    /// The tip angle (rad).
    HoldTip(f64),
    /// The tip couple (N m).
    Couple(f64),
}

/// All rest states at one setpoint.
#[derive(Clone, Debug, Serialize)]
pub struct Listing {
    /// `held-tip` or `applied-couple`.
    pub drive: &'static str,
    /// The setpoint (rad or N m).
    pub setpoint: f64,
    /// Curvature modes that were sufficient.
    pub modes: usize,
    /// Mean bending stiffness over m g L^2, with the total mass.
    pub gamma: f64,
    /// Sum of (-1)^index; 1 when the list is complete.
    pub degree_sum: i32,
    /// Rest states of the converged rod by mean angle.
    pub equilibria: Vec<Equilibrium>,
    /// What the two-coordinate model says.
    pub two_coordinate: Vec<TwoCoordinate>,
}

/// One rest state of the converged rod.
#[derive(Clone, Copy, Debug, Serialize)]
pub struct Equilibrium {
    /// Tip angle relative to the base tangent (rad).
    pub tip_angle_rad: f64,
    /// Mean angle relative to the base tangent (rad).
    pub mean_angle_rad: f64,
    /// Tip couple that holds it (N m).
    pub couple_n_m: f64,
    /// Elastic and gravity energy without the drive's work (J).
    pub energy_j: f64,
    /// Morse index.
    pub index: usize,
    /// Whether it is stable.
    pub stable: bool,
    /// Tip position along x (m).
    pub tip_x_m: f64,
    /// Tip position upwards (m).
    pub tip_y_m: f64,
    /// Energy to the lowest pass out of its well at the same setpoint (J); `None` for unstable states and where there is none.
    pub barrier_j: Option<f64>,
}

/// One rest state of the two-coordinate model.
#[derive(Clone, Copy, Debug, Serialize)]
pub struct TwoCoordinate {
    /// Tip angle (rad).
    pub tip_angle_rad: f64,
    /// Mean angle (rad).
    pub mean_angle_rad: f64,
    /// Whether the model calls it stable.
    pub stable: bool,
    /// Whether the converged rod has it too; `None` for unstable ones.
    pub confirmed: Option<bool>,
}

impl Listing {
    /// Finds and certifies every rest state of `arm` at one setpoint, whichever drive its file names.
    ///
    /// # Errors
    /// See [`RestStatesError`].
    pub fn new(arm: &Arm, question: Question) -> Result<Self, RestStatesError> {
        let mut arm = arm.clone();
        let (drive, setpoint) = match question {
            Question::HoldTip(angle) => {
                arm.drive = Drive::HeldTip {
                    setpoints_rad: [angle - AROUND_ANGLE_RAD, angle + AROUND_ANGLE_RAD],
                };
                ("held-tip", angle)
            }
            Question::Couple(couple) => {
                let around = AROUND_COUPLE * Rod::new(&arm).energy_scale_j;
                arm.drive = Drive::AppliedCouple {
                    setpoints_n_m: [couple - around, couple + around],
                };
                ("applied-couple", couple)
            }
        };
        let rod = Rod::new(&arm);
        let rest = RestStates::find(&rod, &arm.accuracy, arm.gamma())?;
        let at = rod.setpoint_from_si(setpoint);
        let mut states: Vec<_> = rest
            .at(&mut Solver::new(&rest.modal), at)?
            .into_iter()
            .map(|(_, state)| state)
            .collect();
        states.sort_by(|a, b| a.mean_angle().total_cmp(&b.mean_angle()));
        let wells = wells(&rest.modal, &states)
            .map_err(|_| RestStatesError::PassWithoutWells { setpoint })?;
        let scale = rod.energy_scale_j;
        let equilibria = states
            .iter()
            .zip(&wells.barrier)
            .map(|(state, barrier)| {
                let (x, y) = rest.modal.tip(&state.c);
                Equilibrium {
                    tip_angle_rad: state.tip_angle(),
                    mean_angle_rad: state.mean_angle(),
                    couple_n_m: state.couple * scale,
                    energy_j: state.energy * scale,
                    index: state.index,
                    stable: state.index == 0,
                    tip_x_m: x * rod.length_m,
                    tip_y_m: y * rod.length_m,
                    barrier_j: barrier.map(|barrier| barrier * scale),
                }
            })
            .collect();
        let two_coordinate = judge(&rod, &rest.modal, at)
            .iter()
            .map(|judged| TwoCoordinate {
                tip_angle_rad: judged.state.c[0],
                mean_angle_rad: judged.state.mean_angle(),
                stable: judged.state.is_stable(),
                confirmed: judged.confirmed,
            })
            .collect();
        Ok(Self {
            drive,
            setpoint,
            modes: rest.modal.modes(),
            gamma: arm.gamma(),
            degree_sum: degree_sum(states.iter().map(|state| state.index)),
            equilibria,
            two_coordinate,
        })
    }
}
