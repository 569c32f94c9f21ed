//! Checks of the generator and the core against the outside world.
