//! From a measured slender arm to the table its firmware answers from.
//!
//! Data flows one way, and so do the files: `1_arm_file` what the engineer measured, `2_rod` the same in dimensionless form,
//! `3_rest_states` every rest state with a certificate, `4_margins` its reserves in every corner of the tolerances, `5_plan` the
//! simulated arm, `6_table` the bytes for the board and their worst errors, `7_report` the
//! picture, `8_build` all of it in one call.
//!
//! SI units and radians throughout; inside `2_rod` and `3_rest_states` lengths are in L and energies and couples in m g L.
//! Angles are relative to the base tangent and positive towards +x; the base sits at the origin, y points up.
//!
//! A build script calls [`table_bytes`].

#[path = "1_arm_file.rs"]
pub mod arm_file;
#[path = "8_build.rs"]
mod build;
#[path = "4_margins/mod.rs"]
pub mod margins;
#[path = "5_plan/mod.rs"]
pub mod plan;
#[path = "7_report/mod.rs"]
pub mod report;
#[path = "3_rest_states/mod.rs"]
pub mod rest_states;
#[path = "2_rod.rs"]
pub mod rod;
#[path = "6_table/mod.rs"]
pub mod table;

pub use build::{BuildError, Outputs, table_bytes};
