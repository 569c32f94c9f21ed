//! The parameter of a branch's knots in f64: the map of the table format, from the exact folds.

use crate::rest_states::curve::{Branch, BranchEnd};
use crate::rod::Rod;
use firmware_core::ParameterMap;

/// The map between the setpoint (SI) and the parameter in which a branch is smooth.
#[derive(Clone, Copy, Debug)]
pub(super) struct ExactMap {
    anchor_from: f64,
    anchor_to: f64,
    fold_from: bool,
    fold_to: bool,
}

impl ExactMap {
    /// Folds are anchors wherever the curve was followed to them, inside the setpoint range or beyond.
    pub(super) fn new(rod: &Rod, branch: &Branch) -> Self {
        let (fold_from, fold_to) = (
            branch.from_end == BranchEnd::Fold,
            branch.to_end == BranchEnd::Fold,
        );
        let [lo, hi] = rod.setpoints;
        Self {
            anchor_from: rod.setpoint_si(if fold_from { branch.from() } else { lo }),
            anchor_to: rod.setpoint_si(if fold_to { branch.to() } else { hi }),
            fold_from,
            fold_to,
        }
    }

    /// As the firmware reads it.
    pub(super) fn stored(&self) -> ParameterMap {
        ParameterMap {
            anchor_from: self.anchor_from as f32,
            anchor_to: self.anchor_to as f32,
            fold_from: self.fold_from,
            fold_to: self.fold_to,
        }
    }

    /// Whether the parameter's lowest value is a fold, beyond which there is nothing.
    pub(super) fn fold_from(&self) -> bool {
        self.fold_from
    }

    /// Whether the parameter's highest value is a fold.
    pub(super) fn fold_to(&self) -> bool {
        self.fold_to
    }

    /// The parameter of a setpoint.
    pub(super) fn t(&self, setpoint: f64) -> f64 {
        let span = self.anchor_to - self.anchor_from;
        let (u, v) = (
            (setpoint - self.anchor_from) / span,
            (self.anchor_to - setpoint) / span,
        );
        let root = |x: f64| x.max(0.0).sqrt();
        match (self.fold_from, self.fold_to) {
            (false, false) => u,
            (true, false) => root(u),
            (false, true) => -root(v),
            (true, true) => root(u) - root(v),
        }
    }

    /// The setpoint of a parameter.
    pub(super) fn setpoint(&self, t: f64) -> f64 {
        let u = match (self.fold_from, self.fold_to) {
            (false, false) => t,
            (true, false) => t * t,
            (false, true) => 1.0 - t * t,
            // With u = sin^2 x the parameter is sin x - cos x.
            (true, true) => 0.5 * (1.0 + t * (2.0 - t * t).max(0.0).sqrt()),
        };
        self.anchor_from * (1.0 - u) + self.anchor_to * u
    }
}
