//! Which rest states of the two-coordinate model the rod really has.
//!
//! A Ritz subspace can only overstate stability. The rod is let go from the two-coordinate shape: the state is confirmed when
//! the rod settles in a stable rest state whose mean angle is still inside the two-coordinate state's own well, that is,
//! between the two-coordinate model's neighbouring unstable states. Otherwise it is false: no such rest state exists.

use super::curve::Solver;
use super::modes::ModalRod;
use super::two_coordinate::{self, TwoCoordinateState};
use super::wells::Descent;
use crate::rod::Rod;

/// A two-coordinate rest state and, for a stable one, whether the rod confirms it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Judged {
    /// The state.
    pub state: TwoCoordinateState,
    /// Whether the rod has it too; `None` for an unstable state, which is not judged.
    pub confirmed: Option<bool>,
}

/// Every two-coordinate rest state of `rod` at `setpoint` (dimensionless), by mean angle, judged by `modal`, the converged rod.
pub fn judge(rod: &Rod, modal: &ModalRod, setpoint: f64) -> Vec<Judged> {
    let states = two_coordinate::rest_states(&ModalRod::new(rod, 2), setpoint);
    let unstable: Vec<f64> = states
        .iter()
        .filter(|s| !s.is_stable())
        .map(TwoCoordinateState::mean_angle)
        .collect();
    states
        .into_iter()
        .map(|state| {
            let confirmed = state.is_stable().then(|| {
                let own = state.mean_angle();
                let from = unstable
                    .iter()
                    .copied()
                    .filter(|&q| q < own)
                    .fold(f64::NEG_INFINITY, f64::max);
                let to = unstable
                    .iter()
                    .copied()
                    .filter(|&q| q > own)
                    .fold(f64::INFINITY, f64::min);
                settles(modal, &state, setpoint).is_some_and(|q1| (from..to).contains(&q1))
            });
            Judged { state, confirmed }
        })
        .collect()
}

/// Mean angle of the stable rest state that the rod settles in from a two-coordinate shape; `None` when it stays on an
/// unstable one.
fn settles(modal: &ModalRod, state: &TwoCoordinateState, setpoint: f64) -> Option<f64> {
    let mut start = state.c.to_vec();
    start.resize(modal.modes(), 0.0);
    let mut descent = Descent::at_setpoint(modal, setpoint);
    let end = descent.run(start, f64::INFINITY)?;
    let mut solver = Solver::new(modal);
    let rest = solver.at_setpoint(&end, setpoint)?;
    (rest.index == 0).then(|| rest.mean_angle())
}
