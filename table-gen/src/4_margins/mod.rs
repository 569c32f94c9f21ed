//! How far each rest state is from trouble, in engineering units, in every corner of the tolerances.
//!
//! Read in this order: [`shape`] the arm in space, [`reserves`] payload and stiffness to the limit of stability, [`corners`] the
//! arms of the tolerance box, [`requirements`] what is asked and what there is, [`usable`] the
//! stretches that meet it all, [`why`] the judgement of one setpoint, [`verdict`] what would help.

#[path = "3_corners.rs"]
pub mod corners;
#[path = "4_requirements.rs"]
pub mod requirements;
#[path = "2_reserves.rs"]
pub mod reserves;
#[path = "1_shape.rs"]
pub mod shape;
#[path = "5_usable.rs"]
pub mod usable;
#[path = "7_verdict.rs"]
pub mod verdict;
#[path = "6_why.rs"]
pub mod why;
