//! The parameter of the knots.
//!
//! Near a fold a branch goes like the square root of the distance to it, so that polynomials in the setpoint would
//! need knots without end. With `u = (setpoint - anchor_from) / (anchor_to - anchor_from)` the parameter
//!
//! ```text
//! no fold             t = u
//! fold at the lower   t = sqrt(u)
//! fold at the upper   t = -sqrt(1 - u)
//! fold at both        t = sqrt(u) - sqrt(1 - u)
//! ```
//!
//! grows with the setpoint, and the branch is smooth in it. The anchors may lie outside the covered setpoints: a fold
//! just beyond the tabulated range bends the branch all the same.

use serde::Serialize;

/// The map from a setpoint to the parameter of the knots of one branch.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct ParameterMap {
    /// Setpoint of the lower anchor.
    pub anchor_from: f32,
    /// Setpoint of the upper anchor, > `anchor_from`.
    pub anchor_to: f32,
    /// The branch folds at the lower anchor.
    pub fold_from: bool,
    /// The branch folds at the upper anchor.
    pub fold_to: bool,
}

impl ParameterMap {
    /// The parameter of `setpoint`, which is taken as the nearer anchor when it lies beyond them. NaN gives NaN.
    pub fn t(&self, setpoint: f32) -> f32 {
        let span = self.anchor_to - self.anchor_from;
        // Each distance is taken from its own anchor: 1 - u would lose half the digits of the root near the upper one.
        let u = (setpoint - self.anchor_from) / span;
        let v = (self.anchor_to - setpoint) / span;
        let root = |x: f32| libm::sqrtf(if x < 0.0 { 0.0 } else { x });
        match (self.fold_from, self.fold_to) {
            (false, false) => u,
            (true, false) => root(u),
            (false, true) => -root(v),
            (true, true) => root(u) - root(v),
        }
    }
}
