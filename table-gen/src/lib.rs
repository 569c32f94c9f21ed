//! From a measured arm to a table its firmware answers from.

#[path = "1_arm_file.rs"]
pub mod arm_file;
