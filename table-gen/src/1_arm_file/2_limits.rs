//! What each key of the arm file may hold.
//!
//! The ranges are generous; they catch values in the wrong unit (a length in millimetres, a mass in
//! grams) and keep the rod's arithmetic away from overflow. README.md lists them; a test compares.

use std::fmt;

/// The range of one key, in the unit of the file.
#[derive(Clone, Copy, Debug)]
pub struct Limits {
    /// The key as written in the file.
    pub key: &'static str,
    low: Low,
    high: High,
    /// For messages; empty for a pure number.
    unit: &'static str,
}

#[derive(Clone, Copy, Debug)]
enum Low {
    From(f64),
    Above(f64),
}

#[derive(Clone, Copy, Debug)]
enum High {
    To(f64),
    Below(f64),
}

use High::{Below, To};
use Low::{Above, From};

const fn limits(key: &'static str, low: Low, high: High, unit: &'static str) -> Limits {
    Limits {
        key,
        low,
        high,
        unit,
    }
}

/// From a finger's breadth to a lamp post.
pub const LENGTH: Limits = limits("length_m", From(0.01), To(20.0), "m");
/// From a hair-thin polymer strip to a steel mast.
pub const STIFFNESS: Limits = limits("bending_stiffness_n_m2", From(1e-9), To(1e6), "N m2");
/// Up to a solid steel bar of 90 mm.
pub const MASS_PER_LENGTH: Limits = limits("mass_per_length_kg_m", From(0.0), To(50.0), "kg/m");
/// Tighter than this is a coil spring, not a spine.
pub const REST_CURVATURE: Limits = limits("rest_curvature_rad_m", From(-100.0), To(100.0), "rad/m");
/// From foil to a mast.
pub const THICKNESS: Limits = limits("thickness_m", From(1e-5), To(0.2), "m");
/// Beyond half its length the small-strain bending law means nothing.
pub const STRAIN: Limits = limits("allowed_strain", Above(0.0), Below(0.5), "");
/// At 1 nothing swings any more.
pub const DAMPING: Limits = limits("damping_ratio", From(0.0), Below(1.0), "");
/// A lump at the clamp would move nothing.
pub const LUMP_AT: Limits = limits("at", Above(0.0), To(1.0), "of the length");
/// A lump or the payload.
pub const MASS: Limits = limits("mass_kg", From(0.0), To(200.0), "kg");
/// A full turn either way.
pub const TILT: Limits = limits("tilt_deg", From(-360.0), To(360.0), "deg");
/// Distance of a tendon from the spine.
pub const OFFSET: Limits = limits("offset_m", From(1e-4), To(1.0), "m");
/// Slack tendons are allowed.
pub const PRETENSION: Limits = limits("pretension_n", From(0.0), To(1e5), "N");
/// More than the pretension, which is checked besides.
pub const MAX_TENSION: Limits = limits("max_tension_n", Above(0.0), To(1e5), "N");
/// Held tip: two turns either way.
pub const SETPOINTS_DEG: Limits = limits("setpoints_deg", From(-720.0), To(720.0), "deg");
/// Applied couple.
pub const SETPOINTS_N_M: Limits = limits("setpoints_n_m", From(-1e5), To(1e5), "N m");
/// Coarser than 5 degrees is no table.
pub const ANGLE: Limits = limits("angle_deg", Above(0.0), To(5.0), "deg");
/// Of m g L.
pub const COUPLE: Limits = limits("couple_percent", Above(0.0), To(10.0), "percent");

/// Both ends; together they contain the payload.
pub const PAYLOAD_RANGE: Limits = limits("range_kg", From(0.0), To(200.0), "kg");
/// A base known no better than this is not measured.
pub const TILT_TOLERANCE: Limits = limits("tolerance_deg", From(0.0), To(45.0), "deg");
/// Some stiffness must be left.
pub const STIFFNESS_TOLERANCE: Limits = limits("stiffness_percent", From(0.0), To(90.0), "percent");
/// Up to a blow that throws a person.
pub const KNOCK: Limits = limits("knock_n_s", From(0.0), To(1000.0), "N s");
/// As the payload itself.
pub const PAYLOAD_RESERVE: Limits = limits("payload_reserve_kg", From(0.0), To(200.0), "kg");
/// Together with the tolerance below 100, which is checked besides.
pub const STIFFNESS_RESERVE: Limits = limits(
    "stiffness_reserve_percent",
    From(0.0),
    Below(100.0),
    "percent",
);
/// Held tip.
pub const SETPOINT_RESERVE_DEG: Limits = limits("setpoint_reserve_deg", From(0.0), To(90.0), "deg");
/// Applied couple.
pub const SETPOINT_RESERVE_N_M: Limits = limits("setpoint_reserve_n_m", From(0.0), To(1e5), "N m");
/// Below 1 the arm could not be held.
pub const TENSION_FACTOR: Limits = limits("tension_factor", From(1.0), To(100.0), "");
/// No longer than the longest arm.
pub const CLEARANCE: Limits = limits("clearance_m", From(0.0), To(20.0), "m");
/// Farther off no arm gets.
pub const POINT: Limits = limits("point_m", From(-100.0), To(100.0), "m");
/// Only its direction counts; not both 0, which is checked besides.
pub const NORMAL: Limits = limits("normal", From(-1e6), To(1e6), "");
/// As a point.
pub const CENTRE: Limits = limits("centre_m", From(-100.0), To(100.0), "m");
/// Up to a disc that looks straight to the arm.
pub const RADIUS: Limits = limits("radius_m", Above(0.0), To(100.0), "m");
/// Two turns.
pub const TIP_TRAVEL: Limits = limits("max_tip_travel_deg", Above(0.0), To(720.0), "deg");
/// Beyond it air drag, which is not modelled, rules the swing.
pub const TIP_SPEED: Limits = limits("max_tip_speed_m_s", Above(0.0), To(100.0), "m/s");
/// As the couple setpoints.
pub const SWING_COUPLE: Limits = limits("max_couple_n_m", Above(0.0), To(1e5), "N m");

/// Stiffness against weight, `B / (m g L^2)`; outside it some unit is wrong.
///
/// The low end is far below what can be tabulated, so that a soft arm is still reported as soft.
pub const GAMMA: Limits = limits("gamma", From(1e-6), To(1e4), "");
/// Rest curvature times length (rad): at most two full turns.
pub const MOST_REST_TURN_RAD: f64 = 2.0 * std::f64::consts::TAU;
/// Longest name (characters).
pub const LONGEST_NAME: usize = 60;

impl Limits {
    /// Whether `value` is allowed; never for NaN.
    pub fn allow(&self, value: f64) -> bool {
        let above = match self.low {
            From(low) => value >= low,
            Above(low) => value > low,
        };
        let below = match self.high {
            To(high) => value <= high,
            Below(high) => value < high,
        };
        above && below
    }
}

impl fmt::Display for Limits {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (low, high) = match (self.low, self.high) {
            (From(low) | Above(low), To(high) | Below(high)) => (plain(low), plain(high)),
        };
        match (self.low, self.high) {
            (From(_), To(_)) => write!(f, "{low} to {high}")?,
            (From(_), Below(_)) => write!(f, "at least {low}, less than {high}")?,
            (Above(_), To(_)) => write!(f, "more than {low}, at most {high}")?,
            (Above(_), Below(_)) => write!(f, "more than {low}, less than {high}")?,
        }
        if !self.unit.is_empty() {
            write!(f, " {}", self.unit)?;
        }
        Ok(())
    }
}

/// A number without a row of zeros.
fn plain(value: f64) -> String {
    let size = value.abs();
    if size != 0.0 && !(1e-3..1e5).contains(&size) {
        format!("{value:e}")
    } else {
        format!("{value}")
    }
}
