//! Every tolerance of these tests, with its reason.

/// Lookups, the very folds apart. Values are about 1 and an f32 has 6e-8 of that; a Hermite polynomial adds some ten
/// roundings, the 33 knots per branch leave less than 1e-7. Measured: 4e-7 with the tip held.
pub const LOOKUP: f64 = 1e-6;

/// The restoring stiffness, whose slope over the mean angle is up to 8 here. Measured: 8e-7 with a couple applied.
pub const STIFFNESS: f64 = 2e-6;

/// Lookups at a fold: the stored anchor is rounded by up to 1.5e-8, and the mean angle goes like 0.76 times the root
/// of the distance to it: 1e-4 in the worst case. The rounding of this fold is a lucky one. Measured: 7e-6.
pub const AT_FOLD: f64 = 2e-5;

/// Nearer to a fold than this the closed form of these tests cannot tell the wells apart either.
pub const NEAR_FOLD: f64 = 1e-3;

/// The parameter in f32 against f64: a root halves the relative error of its argument, which is a few 6e-8.
pub const PARAMETER: f64 = 3e-7;

/// The inverse of the parameter map, both in f64, over ranges of up to 10.
pub const PARAMETER_INVERSE: f64 = 2e-11;

/// The nearest safe setpoint found by halving, where a tension ends a stretch: f32 rounding of a couple of 0.1 N m
/// over 0.01 m against 0.77 N/unit of setpoint, some 1e-6 N.
pub const REACH: f32 = 1e-5;

/// Reserves of up to about 5 between points: an f32 has 6e-8 of that; the point's setpoint, the place between two points
/// and the straight line add some roundings.
pub const RESERVES: f32 = 2e-6;

/// Numbers in messages have five decimals.
pub const MESSAGE: f64 = 0.6e-5;

/// Beyond the five decimals, f32 arithmetic of at most 45 factors of ten.
pub const MESSAGE_RELATIVE: f64 = 2e-5;
