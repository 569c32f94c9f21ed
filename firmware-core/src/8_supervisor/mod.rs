//! The decision maker of the control loop: [`step`], once per tick.
//!
//! ```text
//! Hold -> Survey -> Inject | Lean -> Catch -> Hold       any -> Stopped -> (caller arms) -> Hold
//! ```
//!
//! * **Hold** moves the setpoint at a limited rate, inside usable stretches only, and brakes disturbances.
//! * **Survey** holds still and finds out whether the arm is the one that crossings were planned for.
//! * **Inject**, **Lean** bring the arm over as planned in the table, with permission only.
//! * **Catch** brakes on the other side.
//! * **Stopped** holds the measured tip angle, with the couple of the nearest branch where one is known: a law that
//!   works on any branch. It ends when the caller arms again and never by itself. Without a sound tip sensor it keeps
//!   the couple last held, without feedback; when a tendon does not carry what it should it lets both go down to the
//!   pretension.
//!
//! A new [`State`] is stopped: the caller arms when the arm is at rest. What is doubtful ends in Stopped, with an event
//! that says why ([`Events`]); all ways between modes are in [`TRANSITIONS`].
//!
//! With an applied couple ([`Drive::AppliedCouple`]) the setpoint is the couple: Hold moves it at a limited rate and
//! damps the tip; crossings are refused ([`CrossingRefusal::NotForThisDrive`]), and that the setpoint is reached is
//! watched by the tensions.
//!
//! # The contract of a tick
//!
//! Anything may be in the input. The tensions are finite, at least the pretension floor and at most the table's
//! maximum. The work is bounded by the size of the table. Nothing but `state` is remembered.
//!
//! # Where to read on
//!
//! `1_inputs_outputs.rs`, `2_events.rs`, `3_config.rs`: what goes in and comes out; `4_estimates.rs`: angles and rates;
//! `5_noticing.rs`: what is noticed; `6_hold.rs`, `7_survey.rs`, `8_crossing.rs`: the laws; `9_transitions.rs`: the
//! guards.

#[path = "3_config.rs"]
mod config;
#[path = "8_crossing.rs"]
mod crossing;
#[path = "4_estimates.rs"]
mod estimates;
#[path = "2_events.rs"]
mod events;
#[path = "6_hold.rs"]
mod hold;
#[path = "1_inputs_outputs.rs"]
mod inputs_outputs;
#[path = "5_noticing.rs"]
mod noticing;
#[path = "10_state.rs"]
mod state;
#[path = "7_survey.rs"]
mod survey;
#[path = "11_tick.rs"]
mod tick;
#[path = "9_transitions.rs"]
mod transitions;

pub use config::{Config, ConfigError, DAMPING_CEILING, DriveFacts, FILTER_DELAY, Settings};
pub use events::Events;
pub use inputs_outputs::{CrossingRefusal, Input, Measured, Mode, Output, Request, Surveyed};
pub use state::State;
pub use tick::step;
pub use transitions::{TRANSITIONS, Transition};

#[cfg(doc)]
use crate::format::Drive;
