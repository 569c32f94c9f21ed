//! Rehearsals: the control loop of the firmware against the simulated arm, told as a story.
//!
//! A [`scenario::Scenario`] is a TOML file that says what is really there, what the firmware is told, what happens when,
//! and what is expected. [`stage::Stage`] is the arm with its table, [`closed_loop`] runs one scenario on it,
//! [`timeline`] puts into words what happened, [`verdict`] compares it with what was expected, [`page`] draws it, and
//! [`random_cases`] runs many drawn cases and counts how they end.

pub mod closed_loop;
pub mod page;
mod place;
pub mod random_cases;
pub mod scenario;
pub mod stage;
pub mod timeline;
pub mod truth;
pub mod verdict;
pub mod words;
