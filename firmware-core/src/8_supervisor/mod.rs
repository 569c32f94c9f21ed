//! The decision maker of the control loop.
#[path = "3_config.rs"]
mod config;
#[path = "2_events.rs"]
mod events;
#[path = "1_inputs_outputs.rs"]
mod inputs_outputs;

pub use config::{Config, ConfigError, DAMPING_CEILING, DriveFacts, FILTER_DELAY, Settings};
pub use events::Events;
pub use inputs_outputs::{CrossingRefusal, Input, Measured, Mode, Output, Request, Surveyed};

use crate::choice::TensionPair;
use crate::table::Table;

/// What the supervisor remembers from tick to tick.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct State {
    mode: Mode,
}

impl State {
    /// Stopped, knowing nothing.
    pub const fn new() -> Self {
        Self {
            mode: Mode::Stopped,
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

/// One control tick.
pub fn step(table: &Table<'_>, _config: &Config, state: &mut State, _input: &Input) -> Output {
    Output {
        tensions: TensionPair::for_couple(0.0, &table.limits()),
        mode: state.mode,
        branch: None,
        setpoint: 0.0,
        reserves: None,
        events: Events::NONE,
        energy_j: 0.0,
        answer: None,
        refused: None,
        crossing: None,
        surveyed: None,
    }
}
