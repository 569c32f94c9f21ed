//! The directory: the slices, their branches, the stretches that may be commanded; the crossings follow them.

use core::fmt;

use serde::{Deserialize, Serialize};

use super::{ParameterMap, RESERVES, SurveyBand};
use crate::words::Word::{F, T};
use crate::words::Words;

/// Branch numbers are below this, so that [`BranchEntry::exits`] has a bit for each.
pub const MOST_BRANCHES: u8 = 32;

/// Opens the part of the directory that belongs to one payload.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct SliceEntry {
    /// Payload at the tip (kg), >= 0; increases from slice to slice.
    pub payload_kg: f32,
    /// Branches that follow, 1 to [`MOST_BRANCHES`].
    pub branches: u8,
    /// Stretches that follow the branches.
    pub stretches: u8,
    /// Crossings that follow the stretches.
    pub crossings: u8,
    /// Stiffness for which the crossings were tried.
    pub survey: SurveyBand,
}

/// One branch of rest states over the setpoint, with the payload of its slice.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct BranchEntry {
    /// The branch's label, below [`MOST_BRANCHES`]; increases within a slice. In every slice it stands for the same
    /// branch, followed from payload to payload; a slice need not have them all.
    pub number: u8,
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
    /// Bit i set: branch number i of this slice, of index 1, is a pass out of this well. 0 for unstable branches.
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

/// What a setpoint must satisfy to be usable, in every corner of the declared tolerances.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Requirement {
    /// The setpoint lies in the tabulated range. Value: the setpoint; limit: the end of the range.
    TableRange,
    /// The rest state exists and is stable in every corner. Value and limit are 0.
    Stable,
    /// The lateral impulse at the tip that carries the arm over a pass is large enough. N s.
    KnockImpulse,
    /// The payload can grow beyond its range before the rest state ceases to be stable. kg.
    PayloadReserve,
    /// The bending stiffness can fall below its tolerance before the same. Fraction of the nominal stiffness.
    StiffnessReserve,
    /// The setpoint keeps a distance from the fold where the branch ends. Units of the setpoint (rad or N m).
    SetpointReserve,
    /// Couple that the tendons can make over the couple needed to hold.
    TensionFactor,
    /// The largest bending strain of the spine stays below what it may be.
    Strain,
    /// The whole arm keeps a distance from every keep-out region. m.
    Clearance,
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

/// A run of setpoints of a stable branch that satisfy every requirement. Its reserves are stored at `points` setpoints
/// from end to end, at equal steps.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Stretch {
    /// Number of the branch.
    pub branch: u8,
    /// Setpoints at which the reserves are stored, >= 2.
    pub points: u8,
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
    /// Number of f32 that its reserves take.
    pub const fn reserve_values(&self) -> usize {
        self.points as usize * RESERVES
    }

    /// Whether `setpoint` lies in the stretch; false for NaN.
    pub fn contains(&self, setpoint: f32) -> bool {
        self.from <= setpoint && setpoint <= self.to
    }
}

impl fmt::Display for Limit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (value, limit) = (F(self.value), F(self.limit));
        let percent = |fraction: f32| F(100.0 * fraction);
        match self.requirement {
            Requirement::TableRange => f.say(&[T("the table ends at setpoint "), limit]),
            Requirement::Stable => f.say(&[T(
                "beyond, the arm has no such stable rest state in some corner of the tolerances",
            )]),
            Requirement::KnockImpulse => f.say(&[
                T("a knock of "),
                value,
                T(" N s at the tip carries the arm over, it must withstand "),
                limit,
                T(" N s"),
            ]),
            Requirement::PayloadReserve => f.say(&[
                T("the payload reserve is "),
                value,
                T(" kg and may not be less than "),
                limit,
                T(" kg"),
            ]),
            Requirement::StiffnessReserve => f.say(&[
                T("the stiffness reserve is "),
                percent(self.value),
                T(" % of the nominal stiffness and may not be less than "),
                percent(self.limit),
                T(" %"),
            ]),
            Requirement::SetpointReserve => f.say(&[
                T("the distance to the fold is "),
                value,
                T(" and may not be less than "),
                limit,
                T(", in rad or N m as the setpoint"),
            ]),
            Requirement::TensionFactor => f.say(&[
                T("the tendons can make "),
                value,
                T(" times the couple that holds the arm, they must be able to make "),
                limit,
                T(" times as much"),
            ]),
            Requirement::Strain => f.say(&[
                T("the strain of the spine is "),
                percent(self.value),
                T(" % of at most "),
                percent(self.limit),
                T(" %"),
            ]),
            Requirement::Clearance => f.say(&[
                T("the arm is "),
                value,
                T(" m from a keep-out region and may not come nearer than "),
                limit,
                T(" m"),
            ]),
        }
    }
}
