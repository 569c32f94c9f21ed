//! Crossings planned offline: how the arm gets from one well to another, and whether it may.

use core::fmt;

use serde::{Deserialize, Serialize};

use crate::words::Word::{F, N, T};
use crate::words::Words;

/// How a crossing is driven.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Method {
    /// The tip is moved in phase with the rate of the mean angle until the arm swings over.
    Inject,
    /// The tip is moved slowly past the fold where the well ends, then brought back.
    Lean,
}

/// One planned crossing with the payload of its slice. Angles in rad, positive towards +x.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Crossing {
    /// The stable branch the arm rests on before.
    pub from: u8,
    /// The stable branch it is to rest on afterwards, another one.
    pub to: u8,
    /// Lowest setpoint from which it was planned.
    pub setpoint_from: f32,
    /// Highest such setpoint, >= `setpoint_from`.
    pub setpoint_to: f32,
    /// How it is driven.
    pub method: Method,
    /// The setpoint around which the tip is moved and at which the arm is held afterwards; on the branch `to`.
    pub rest_setpoint: f32,
    /// First amplitude of the tip about `rest_setpoint`, also of the brake afterwards (rad), >= 0; above 0 to inject.
    pub amplitude_rad: f32,
    /// Steepness of the tip's motion over the rate of the mean angle, in units of sqrt(L/g), > 0.
    pub eta: f32,
    /// Where a lean takes the setpoint; `rest_setpoint` when the tip is moved otherwise.
    pub lean_setpoint: f32,
    /// Longest time until the arm has passed to the other side (s), > 0.
    pub longest_s: f32,
    /// Largest distance of the tip from `rest_setpoint` (rad), >= `amplitude_rad` and than to `lean_setpoint`.
    pub most_tip_travel_rad: f32,
    /// Largest couple that may be commanded (N m), > 0.
    pub most_couple_n_m: f32,
    /// Fastest tip allowed (m/s), > 0.
    pub most_tip_speed_m_s: f32,
    /// Least distance of the arm from a keep-out region in the trials (m); [`super::UNBOUNDED`] without regions.
    pub lowest_clearance_m: f32,
    /// Largest couple in the trials (N m), >= 0.
    pub peak_couple_n_m: f32,
    /// Fastest tip in the trials (m/s), >= 0.
    pub peak_tip_speed_m_s: f32,
    /// Longest time until the arm rested on the other side in the trials (s), >= 0.
    pub takes_s: f32,
    /// Trials that ended on the other side within every limit.
    pub successes: u16,
    /// Trials in the corners of the tolerances.
    pub trials: u16,
    /// Whether the crossing may be made: every trial succeeded.
    pub allowed: bool,
}

impl Crossing {
    /// Whether it was planned for `setpoint`; false for NaN.
    pub fn covers(&self, setpoint: f32) -> bool {
        self.setpoint_from <= setpoint && setpoint <= self.setpoint_to
    }
}

/// The bending stiffness for which the crossings of a slice were tried, as a fraction of the nominal one.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct SurveyBand {
    /// Least fraction, > 0 and at most 1.
    pub lo: f32,
    /// Largest fraction, at least 1.
    pub hi: f32,
}

impl SurveyBand {
    /// Whether `fraction` lies in the band; false for NaN.
    pub fn contains(&self, fraction: f32) -> bool {
        self.lo <= fraction && fraction <= self.hi
    }
}

impl Default for SurveyBand {
    /// The nominal stiffness and nothing else: nothing was tried.
    fn default() -> Self {
        Self { lo: 1.0, hi: 1.0 }
    }
}

impl fmt::Display for Crossing {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.say(&[
            T("from branch "),
            N(self.from.into()),
            T(" to "),
            N(self.to.into()),
            T(" at setpoints "),
            F(self.setpoint_from),
            T(" to "),
            F(self.setpoint_to),
            T(match self.method {
                Method::Inject => " by swinging: ",
                Method::Lean => " by leaning: ",
            }),
            T(if self.allowed {
                "allowed, "
            } else {
                "not allowed, "
            }),
            N(self.successes.into()),
            T(" of "),
            N(self.trials.into()),
            T(" trials succeeded"),
        ])
    }
}
