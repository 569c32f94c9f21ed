//! Trying the arm before it moves: the simulated arm that plans and rehearsals run on, and the plan of its crossings.

#[path = "1_plant.rs"]
pub mod plant;
#[path = "2_swing.rs"]
pub mod swing;
