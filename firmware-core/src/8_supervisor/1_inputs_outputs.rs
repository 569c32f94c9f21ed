//! What goes into a control tick and what comes out of it.

use serde::Serialize;

use super::Events;
use crate::choice::{Answer, TensionPair};
use crate::format::{Method, Reserves};
use crate::load::Payload;

/// What the sensors say at the beginning of a tick. Anything may arrive here; what is not believable is noticed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Measured {
    /// Tip orientation q0 relative to the base tangent, from the take-up or a tip sensor (rad).
    pub tip_angle_rad: f32,
    /// Orientation at half length relative to the base tangent (rad).
    pub mid_angle_rad: f32,
    /// Tension of tendon A at its actuator (N).
    pub tension_a_n: f32,
    /// Tension of tendon B at its actuator (N).
    pub tension_b_n: f32,
}

/// What the caller wants, to be given on every tick.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Request {
    /// Setpoint to go to (rad, or N m with an applied couple).
    pub setpoint: f32,
    /// Branch to rest on; `None` for the one last asked for or, before any, found when armed.
    pub branch: Option<u8>,
    /// Whether the arm may be swung to that branch by a planned crossing.
    pub swing_permitted: bool,
    /// What the tip carries.
    pub payload: Payload,
    /// Stop now.
    pub stop: bool,
    /// Leave [`Mode::Stopped`]. Counts when it changes from false to true, and stands for as long as
    /// [`super::Settings::rearm_s`] says if the arm is not at rest yet; it never counts twice.
    pub rearm: bool,
}

/// Everything that a tick depends on besides table, configuration and state.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Input {
    /// What the sensors say.
    pub measured: Measured,
    /// Time since the tick before (s).
    pub dt_s: f32,
    /// What the caller wants.
    pub request: Request,
}

/// What the supervisor is doing.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Mode {
    /// Rests on a branch and moves its setpoint within usable stretches.
    Hold,
    /// Holds still and finds out from the resting shape what the arm carries, before a crossing.
    Survey,
    /// Moves the tip in phase with the swing until the arm goes over.
    Inject,
    /// Moves the tip slowly past the end of the branch.
    Lean,
    /// Brakes on the other side until the arm rests there.
    Catch,
    /// Holds where the arm is, until the caller arms again.
    Stopped,
}

/// Why a crossing that would be needed is not made.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum CrossingRefusal {
    /// The caller does not permit it.
    NotPermitted,
    /// Crossings are for a held tip only: with an applied couple nothing holds the tip that would have to be moved.
    NotForThisDrive,
    /// The table has no plan for this direction with this payload, at no setpoint that can be reached.
    NoPlan,
    /// The plan did not succeed in every trial.
    NotAllowed {
        /// Trials that succeeded.
        successes: u16,
        /// Trials made.
        trials: u16,
    },
    /// The resting shape fits none of the declared payloads with a stiffness for which crossings were tried.
    SurveyDoesNotFit {
        /// The stiffness it would take with the nearest of these payloads, as a fraction of the nominal one.
        stiffness: f32,
    },
    /// The arm is too straight to tell its stiffness, or it did not come to rest.
    SurveyUnclear,
    /// It has been tried as often as the configuration allows.
    TooManyTries,
}

/// What a survey found.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Surveyed {
    /// Payload of the slice that fits best (kg), of all slices, whatever was declared.
    pub payload_kg: f32,
    /// Stiffness it takes to fit there, as a fraction of the nominal one.
    pub stiffness: f32,
    /// Measured minus expected hold couple with that payload and stiffness (N m).
    pub couple_off_n_m: f32,
    /// Whether the stiffness is one for which crossings were tried.
    pub within_band: bool,
}

/// What a tick decides.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Output {
    /// Tensions to command: finite, at least the pretension, at most the maximum.
    pub tensions: TensionPair,
    /// What the supervisor is doing now.
    pub mode: Mode,
    /// The branch the arm is on; `None` when unknown or on its way over.
    pub branch: Option<u8>,
    /// The setpoint commanded at present, without the brake's small movements (rad or N m).
    pub setpoint: f32,
    /// Worst-case reserves at that setpoint; `None` where it is not usable or the branch is not known.
    pub reserves: Option<Reserves>,
    /// What was noticed on this tick.
    pub events: Events,
    /// Potential and kinetic energy, two-coordinate estimate (J): for the log. 0 when the branch is not known.
    pub energy_j: f32,
    /// The answer to the requested setpoint; `None` when the branch or the payload is not known.
    pub answer: Option<Answer>,
    /// Why the crossing to the wanted branch is not made; `None` when none is needed or it is under way.
    pub refused: Option<CrossingRefusal>,
    /// The method of the crossing under way.
    pub crossing: Option<Method>,
    /// What the last survey found.
    pub surveyed: Option<Surveyed>,
}
