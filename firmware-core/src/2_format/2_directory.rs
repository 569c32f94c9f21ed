//! The directory: the slices, their branches, and the stretches that may be commanded.

use core::fmt;

use serde::{Deserialize, Serialize};

use super::ParameterMap;
use crate::words::Word::{F, T};
use crate::words::Words;

/// Opens the part of the directory that belongs to one payload.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct SliceEntry {
    /// Payload at the tip (kg), >= 0; increases from slice to slice.
    pub payload_kg: f32,
    /// Branches that follow, >= 1.
    pub branches: u8,
    /// Stretches that follow the branches.
    pub stretches: u8,
}

/// One branch of rest states over the setpoint.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct BranchEntry {
    /// Morse index: 0 stable, 1 a pass between two wells, more a hilltop.
    pub index: u8,
    /// Lowest setpoint covered.
    pub from: f32,
    /// Highest setpoint covered, > `from`.
    pub to: f32,
    /// Lower anchor of the parameter map, <= `from`.
    pub anchor_from: f32,
    /// Upper anchor of the parameter map, >= `to`.
    pub anchor_to: f32,
    /// The branch ends in a fold at the lower anchor.
    pub fold_from: bool,
    /// The branch ends in a fold at the upper anchor.
    pub fold_to: bool,
    /// Bit i set: branch i of this slice, of index 1, is a pass out of this well. 0 for unstable branches.
    pub exits: u32,
    /// Number of knots, >= 2.
    pub knots: u16,
}

impl BranchEntry {
    /// Whether the rest states of this branch are stable.
    pub const fn is_stable(&self) -> bool {
        self.index == 0
    }

    /// Number of f32 in one knot: t, then a value and a slope of each quantity.
    pub const fn floats_per_knot(&self) -> usize {
        if self.is_stable() { 13 } else { 7 }
    }

    /// The map from the setpoint to the parameter of the knots.
    pub const fn map(&self) -> ParameterMap {
        ParameterMap {
            anchor_from: self.anchor_from,
            anchor_to: self.anchor_to,
            fold_from: self.fold_from,
            fold_to: self.fold_to,
        }
    }

    /// Whether `setpoint` is covered; false for NaN.
    pub fn covers(&self, setpoint: f32) -> bool {
        self.from <= setpoint && setpoint <= self.to
    }
}

/// What a setpoint must satisfy to be safe. A later version of the format adds to these.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Requirement {
    /// The setpoint lies in the tabulated range. Value: the setpoint; limit: the end of the range.
    TableRange,
    /// The setpoint keeps a distance from the fold where the branch ends. Value: distance to the fold; limit: the
    /// smallest allowed, both in units of the setpoint.
    FoldDistance,
    /// The pulling tendon stays below its maximum. Value: its tension, interpolation error included; limit: the
    /// maximum, both in N.
    TensionMax,
}

/// What ends a stretch: the requirement, the value it takes there, and the limit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Limit {
    /// The requirement that would be broken beyond.
    pub requirement: Requirement,
    /// Its value here.
    pub value: f32,
    /// The value allowed.
    pub limit: f32,
}

/// A run of setpoints of a stable branch that satisfy every requirement known to the generator. The configured
/// distance from the fold comes off on the board.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Stretch {
    /// The branch, by its number in the slice.
    pub branch: u8,
    /// Lowest setpoint.
    pub from: f32,
    /// Highest setpoint, > `from`.
    pub to: f32,
    /// What ends the stretch below.
    pub from_limit: Limit,
    /// What ends the stretch above.
    pub to_limit: Limit,
}

impl Stretch {
    /// Whether `setpoint` lies in the stretch; false for NaN.
    pub fn contains(&self, setpoint: f32) -> bool {
        self.from <= setpoint && setpoint <= self.to
    }
}

impl fmt::Display for Limit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (value, limit) = (F(self.value), F(self.limit));
        match self.requirement {
            Requirement::TableRange => f.say(&[T("the table ends at setpoint "), limit]),
            Requirement::FoldDistance => f.say(&[
                T("the distance to the fold is "),
                value,
                T(" and may not be less than "),
                limit,
            ]),
            Requirement::TensionMax => f.say(&[
                T("the pulling tendon is at "),
                value,
                T(" N of at most "),
                limit,
                T(" N"),
            ]),
        }
    }
}
