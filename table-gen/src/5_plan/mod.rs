//! Trying the arm before it moves: the simulated arm that plans and rehearsals run on.

#[path = "1_plant.rs"]
pub mod plant;
