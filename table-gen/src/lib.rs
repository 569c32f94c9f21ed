//! From a measured arm to a table its firmware answers from.

#[path = "1_arm_file.rs"]
pub mod arm_file;
#[path = "2_rod.rs"]
pub mod rod;
#[path = "3_rest_states/mod.rs"]
pub mod rest_states;
#[path = "6_table/mod.rs"]
pub mod table;
