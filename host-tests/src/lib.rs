//! Checks of the generator and the core against the outside world, and what those checks share.
//!
//! The checks are in `tests/`; each file there says what it compares with. Reference values with
//! their sources lie in `reference/`, every tolerance with its reason in [`tolerances`].
//!
//! The arms compared with published values are given by dimensionless numbers ([`arms`]); those of
//! the property tests are drawn at random ([`random_arms`]).

pub mod arms;
pub mod program;
pub mod random_arms;
pub mod reference;
pub mod rehearsal;
pub mod tolerances;
