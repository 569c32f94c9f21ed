#![no_std]
//! Answers, on the controller board of a tendon-driven arm, from a table of the arm's rest states: where the arm may
//! be told to rest, how far, on which side, and why not.
//!
//! # Units and signs
//!
//! SI throughout, angles in radians, units in the names. Positive angles turn towards `+x`; a positive tip couple
//! turns the tip towards `+x`, and tendon A pulls it.
//!
//! ```text
//!            y up           q0  tip orientation relative to the base tangent   tip_angle_rad
//!            |      __ tip  q1  orientation along the arm, integrated 0..1     mean_angle_rad
//!            |   .-'        tau tip couple = offset * (tension A - tension B)  couple_n_m
//!            | .'  alpha(s) phi base tilt from the upward vertical             tilt_rad
//!            |/
//!     base --+------ x      alpha(0) = 0,  q0 = alpha(1),  q1 = integral of alpha over s in 0..1
//! ```
//!
//! The *setpoint* is what the drive is told: the tip angle when the take-up is controlled
//! ([`Drive::HeldTip`]), the couple when the tensions are ([`Drive::AppliedCouple`]). The other of the two is its
//! *conjugate* and follows from the table. A *branch* is one family of rest states followed over the setpoint; its
//! Morse index is the number of directions in which the energy falls: 0 is stable (a *well*), 1 is a *pass* between
//! wells. A *stretch* is a run of setpoints of a stable branch that may be commanded; its *reserves* say how far it is,
//! in the worst case, from what makes a setpoint unusable. A *slice* is the arm with one payload. A branch keeps its
//! number from slice to slice. A *load* is the slices to be respected with what the tip carries.
//!
//! # Contract
//!
//! No heap, no unsafe, no clock, no hardware, no globals. No function panics, whatever its input; a build that links
//! only without panic paths proves it, messages included. Arithmetic is `f32`. Input that is not finite is an error,
//! and every comparison is written so that a NaN is refused.
//!
//! # Where to read on
//!
//! The files are numbered in the order of the flow:
//! 1. `1_bytes.rs`, `1_words.rs`: numbers out of bytes, numbers into messages;
//! 2. `2_format/`: what a table file holds (and, with the feature `write`, its writer);
//! 3. `3_table/`: **start here**: [`Table::new`] checks the bytes, once, and is the only way to a [`Table`];
//! 4. `4_lookup.rs`: the rest state of a branch at a setpoint, with one payload;
//! 5. `5_load.rs`: [`Table::load`], the slices to be respected with a payload, known or not;
//! 6. `6_pose.rs`: the branch a measured pose belongs to;
//! 7. `7_choice/`: [`choose`], the answer to a requested setpoint;
//! 8. `8_supervisor/`: [`supervisor::step`], the control loop: one call per tick that holds, notices, swings over or stops.

#[path = "1_bytes.rs"]
mod bytes;
#[path = "7_choice/mod.rs"]
pub mod choice;
#[path = "2_format/mod.rs"]
pub mod format;
#[path = "5_load.rs"]
pub mod load;
#[path = "4_lookup.rs"]
pub mod lookup;
#[path = "6_pose.rs"]
pub mod pose;
#[path = "8_supervisor/mod.rs"]
pub mod supervisor;
#[path = "3_table/mod.rs"]
pub mod table;
#[path = "1_words.rs"]
mod words;

pub use choice::{Answer, Input, Present, Refusal, TensionPair, choose};
pub use format::{
    BranchEntry, Crossing, Deducted, Drive, Header, Limit, Method, ParameterMap, Requirement,
    Reserves, SliceEntry, Stretch, SurveyBand, UNBOUNDED, Units, WorstError,
};
pub use load::{Load, LoadError, Payload};
pub use lookup::{LookupError, RestState, Well};
pub use pose::{Pose, PoseError, Seat, which_branch};
pub use table::{Branch, Limits, Slice, Table, TableError, Usable};
