//! What is remembered from tick to tick.

use super::crossing::Under;
use super::inputs_outputs::{CrossingRefusal, Mode, Surveyed};
use super::noticing::Watch;
use super::survey::Listened;
use crate::choice::TensionPair;
use crate::load::Payload;

/// What the supervisor remembers from tick to tick: small, `Copy`, printable.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct State {
    pub(super) mode: Mode,
    /// Time in this mode (s).
    pub(super) mode_s: f32,
    pub(super) watch: Watch,
    /// The branch the arm is on, as far as is known.
    pub(super) branch: Option<u8>,
    /// The branch it is to rest on.
    pub(super) wanted: Option<u8>,
    /// The setpoint commanded, without the brake.
    pub(super) held: f32,
    /// How long it has stood still (s).
    pub(super) still_s: f32,
    /// The tip angle referred to on the last tick, if any.
    pub(super) reference: Option<f32>,
    /// Integral part of the couple (N m).
    pub(super) trim_n_m: f32,
    /// The last couple was cut.
    pub(super) cut: bool,
    /// Tensions commanded on the last tick; `None` before the first.
    pub(super) command: Option<TensionPair>,
    /// Rates of tip and mean angle, smoothed for the question whether the arm is at rest (rad/s).
    pub(super) calm: [f32; 2],
    /// How long the arm has been at rest (s).
    pub(super) rest_s: f32,
    /// How Stopped holds.
    pub(super) stay: Stay,
    /// How long a request to arm still stands (s).
    pub(super) arming_s: f32,
    /// The request to arm on the last tick.
    pub(super) armed_before: bool,
    pub(super) listened: Listened,
    pub(super) surveyed: Option<Surveyed>,
    pub(super) under: Option<Under>,
    /// Payload that the permission was given for.
    pub(super) permitted_for: Payload,
    /// Crossings tried in a row.
    pub(super) tries: u8,
    /// A refusal that stands until permission is withdrawn or another branch is wanted.
    pub(super) refused: Option<CrossingRefusal>,
    /// The branch wanted was asked for while it stood.
    pub(super) refused_for: Option<u8>,
}

/// How the arm is held when stopped.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Stay {
    /// Not known yet: where the tip is when it can first be measured.
    Anywhere,
    /// Tip angle to keep (rad), and the couple where no branch is known (N m).
    Tip { angle_rad: f32, couple_n_m: f32 },
    /// Couple to keep (N m).
    Couple(f32),
    /// Let go, down to the pretension.
    Slack,
}

impl State {
    /// Stopped, knowing nothing.
    pub const fn new() -> Self {
        Self {
            mode: Mode::Stopped,
            mode_s: 0.0,
            watch: Watch::NEW,
            branch: None,
            wanted: None,
            held: 0.0,
            still_s: 0.0,
            reference: None,
            trim_n_m: 0.0,
            cut: false,
            command: None,
            calm: [0.0; 2],
            rest_s: 0.0,
            stay: Stay::Anywhere,
            arming_s: 0.0,
            armed_before: false,
            listened: Listened::NEW,
            surveyed: None,
            under: None,
            permitted_for: Payload::Unknown,
            tries: 0,
            refused: None,
            refused_for: None,
        }
    }

    /// What the supervisor is doing.
    pub const fn mode(&self) -> Mode {
        self.mode
    }
}

impl Default for State {
    fn default() -> Self {
        Self::new()
    }
}
