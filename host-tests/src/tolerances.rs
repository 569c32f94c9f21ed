//! Every tolerance of the checks, each with its reason.

/// Accuracy asked of the rest states that are compared with reference values (rad, m g L). The number
/// of modes rises until no rest state is further than a quarter of it from the exact one.
pub const ASKED: f64 = 1e-7;

/// The same where 24 modes do not reach [`ASKED`] (gamma .01): its quarter is still below
/// [`REST_STATE`].
pub const ASKED_OF_SOFTEST: f64 = 3e-6;
/// Stiffness below which [`ASKED_OF_SOFTEST`] is asked.
pub const SOFTEST: f64 = 0.015;

/// Rest states against reference values: angles (rad), lengths (L), couples and energies (m g L).
/// The project's promise; [`ASKED`] leaves a factor of 40 for what the audit does not look at.
pub const REST_STATE: f64 = 1e-6;

/// Critical stiffness, absolute in gamma. The project's promise; bisection to 1e-9 and 24 modes,
/// whose error is far below, leave it to the discretisation.
pub const CRITICAL_STIFFNESS: f64 = 1e-6;

/// Width at which a bisection over gamma stops.
pub const BISECTION: f64 = 1e-9;

/// Post-buckling column against the exact columns. The project's promise.
pub const COLUMN: f64 = 1e-5;

/// Post-buckling column against the printed table as remembered: the printed one is off from the
/// exact one by up to 1.3e-3 (load at 140 degrees), so nothing tighter can hold.
pub const PRINTED_COLUMN: f64 = 2e-3;

/// Cantilevers against printed values of five decimals: half a unit of the last, and the project's
/// promise of 1e-6.
pub const PRINTED_FIVE_DECIMALS: f64 = 0.5e-5 + REST_STATE;

/// Pure couple: angles, lengths and relative energies. The project's promise.
pub const CIRCLE: f64 = 1e-9;

/// Clothoid tip positions: quadrature rounding over some 40 nodes, 1e-15 each at most.
pub const CLOTHOID: f64 = 1e-12;

/// The same with the 17 nodes that two modes come with, for shapes that turn by up to 27 radians per
/// length: their quadrature error is 4.3e-11.
pub const CLOTHOID_OF_TWO_MODES: f64 = 1e-10;

/// Printed Fresnel integrals of seven decimals, half a unit of the last.
pub const PRINTED_SEVEN_DECIMALS: f64 = 0.5e-7;

/// Two-coordinate rest states against values of 18 digits: both solve the same two-mode equations, so
/// only Newton's last step and rounding are left.
pub const TWO_COORDINATE: f64 = 1e-9;

/// Roots by bisection of a dense scan: angles of some rad halved down to rounding, divided by the
/// slope at the root, which the drawn arms keep above 1e-4.
pub const DENSE_SCAN: f64 = 1e-9;

/// Base curvature of the shots against reference values: it is up to 20 and the shots' angles are
/// within 1e-8, near a fold less.
pub const BASE_CURVATURE: f64 = 1e-5;
