//! Every tolerance of the checks, each with its reason.

/// Accuracies asked of rest states that are compared with reference values (rad, m g L), the tightest
/// first. The number of modes rises until no rest state is further than a quarter of it from the
/// exact one, and 24 modes do not reach 1e-7 where the arm is very soft (gamma .02 and less) or also
/// has tightly curled rest states. The comparison decides whether what was reached is enough.
pub const ASKED: [f64; 5] = [1e-7, 1e-6, 3e-6, 1e-4, 4e-4];

/// Rest states against reference values: angles (rad), lengths (L), couples and energies (m g L).
/// The project's promise.
pub const REST_STATE: f64 = 1e-6;

/// The fold at gamma .01 in 24 modes, the most there are: the modes are off by 7.3e-5 in the mean
/// angle, 4e-6 in the couple and 3e-6 in the setpoint, where the wave length along the arm is a
/// tenth of it. The shooting, against which every table is audited, keeps to [`REST_STATE`] there.
pub const SOFTEST_FOLD: f64 = 1e-4;
/// Stiffness below which [`SOFTEST_FOLD`] holds instead of [`REST_STATE`].
pub const SOFTEST: f64 = 0.015;

/// Accuracy asked of a shooting whose folds are compared (rad, m g L): a hundredth of
/// [`REST_STATE`].
pub const SHOOTING: f64 = 1e-8;

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

/// Central differences with a step of 1e-5 rad: 1e-10 times third derivatives of up to 1 m g L, and
/// rounding of energies and forces of up to 100 m g L over the step.
pub const FINITE_DIFFERENCE: f64 = 5e-9;

/// Energy by 20 000 midpoints (m g L): a piece in which a profile has a kink is off by its width
/// squared, the rest by the same times derivatives of up to 100.
pub const ENERGY_BY_MASSES: f64 = 1e-6;

/// Arms of other sizes at equal gamma: the same arithmetic up to rounding, which the way to the rest
/// state amplifies; Newton's last step is below 1e-8 and squares.
pub const SCALED: f64 = 1e-9;

/// Setpoints this near to a fold are left out where two solutions are compared (rad or m g L): there
/// the distance of rest states grows like the root of any difference.
pub const BESIDE_A_FOLD: f64 = 1e-3;

/// Values printed with four decimals: half a unit of the last, and what an accuracy of .03 degrees
/// adds.
pub const PRINTED_FOUR_DECIMALS: f64 = 0.5e-4 + 1.3e-4;

/// Two-coordinate values with three decimals: half a unit of the last; the model itself is solved to
/// rounding.
pub const PRINTED_THREE_DECIMALS: f64 = 0.5e-3;

/// Reserves in stiffness and payload against the critical stiffness (fractions). The project's promise.
pub const RESERVE: f64 = 1e-5;

/// Accuracy asked of arms whose reserves are compared (rad, m g L): the modes that reach it leave a
/// tenth of [`RESERVE`] in the critical stiffness.
pub const ASKED_FOR_RESERVES: f64 = 1e-6;

/// Knocks computed from the same effective mass and barrier: rounding.
pub const ROUNDING: f64 = 1e-12;

/// Effective masses against the cantilever formulas (fraction of the beam's mass). Simpson's rule over
/// 400 intervals is exact to 1e-10 for polynomials of sixth degree.
pub const EFFECTIVE_MASS: f64 = 1e-6;

/// Clearance in closed form (m, arms of 1 m): the arm is looked at in 401 points, half a step of 1.25e-3
/// from the nearest one is further from a disc whose centre is 0.1 m away by 7.8e-6.
pub const CLEARANCE: f64 = 1e-5;

/// Stored reserves, relative: single precision, twice.
pub const STORED: f64 = 2.5e-7;
