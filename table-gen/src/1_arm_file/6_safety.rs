//! What "safe" asks of the arm: what may vary, which reserves must remain, where the arm must not
//! be, and how far a swing may go.
//!
//! Positions are in the bending plane, base at the origin, y up (against gravity), x to the side that
//! positive angles turn towards.

use serde::Serialize;

use super::Drive;

/// Default setpoint reserve of a held tip (deg): about the error of a plain orientation sensor.
const DEFAULT_SETPOINT_RESERVE_DEG: f64 = 1.0;
/// Default setpoint reserve of an applied couple, as a fraction of the width of the setpoint range.
const DEFAULT_SETPOINT_RESERVE_FRACTION: f64 = 0.01;
/// Default of the couple available over the couple needed.
const DEFAULT_TENSION_FACTOR: f64 = 1.3;

/// How far the real arm may be from the measured one, besides payload and base tilt.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize)]
pub struct Tolerance {
    /// Bending stiffness either way, as a fraction of the nominal, in 0..=0.9. Default 0: exactly as
    /// measured.
    pub stiffness_fraction: f64,
}

/// The reserves a rest state must keep, in every corner of the tolerances, to be usable.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Require {
    /// Lateral impulse at the tip that must not push the arm out of its rest state (N s), >= 0.
    pub knock_n_s: f64,
    /// Mass the tip must bear beyond the upper end of the payload range (kg), >= 0.
    pub payload_reserve_kg: f64,
    /// Bending stiffness that may be lost beyond the tolerance, as a fraction of the nominal, >= 0;
    /// together with the tolerance below 1.
    pub stiffness_reserve_fraction: f64,
    /// Distance of the setpoint to the fold, >= 0: rad with a held tip, N m with an applied couple.
    pub setpoint_reserve: f64,
    /// Couple the tendons can give over the couple needed to hold, >= 1.
    pub tension_factor: f64,
    /// Distance of the whole arm to every keep-out region (m), >= 0.
    pub clearance_m: f64,
}

impl Require {
    /// What holds where the arm file says nothing: no knock, no reserve in payload and stiffness, no
    /// distance to keep-out regions, 1.3 times the couple needed, and a setpoint reserve.
    ///
    /// The setpoint reserve is never 0, for at the fold the least error lets the arm flop: 1 degree
    /// with a held tip, about the error of a plain orientation sensor; 1 % of the setpoint range
    /// with an applied couple.
    pub fn default_for(drive: &Drive) -> Self {
        let setpoint_reserve = match drive {
            Drive::HeldTip { .. } => DEFAULT_SETPOINT_RESERVE_DEG.to_radians(),
            Drive::AppliedCouple {
                setpoints_n_m: [low, high],
            } => DEFAULT_SETPOINT_RESERVE_FRACTION * (high - low),
        };
        Self {
            knock_n_s: 0.0,
            payload_reserve_kg: 0.0,
            stiffness_reserve_fraction: 0.0,
            setpoint_reserve,
            tension_factor: DEFAULT_TENSION_FACTOR,
            clearance_m: 0.0,
        }
    }
}

/// The defaults of a held tip; an applied couple needs [`Require::default_for`].
impl Default for Require {
    fn default() -> Self {
        Self::default_for(&Drive::HeldTip {
            setpoints_rad: [0.0; 2],
        })
    }
}

/// A place where no part of the arm may be.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct KeepOut {
    /// What the engineer calls it; no two of an arm have the same name.
    pub name: String,
    /// Its extent.
    pub region: Region,
}

/// The extent of a keep-out, in the bending plane.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub enum Region {
    /// Everything on the side of a line that `normal` points away from.
    HalfPlane {
        /// A point of the line, `[x, y]` (m).
        point_m: [f64; 2],
        /// Unit vector to the allowed side.
        normal: [f64; 2],
    },
    /// The inside of a circle.
    Disc {
        /// Centre, `[x, y]` (m).
        centre_m: [f64; 2],
        /// Radius (m), > 0.
        radius_m: f64,
    },
}

impl Region {
    /// Distance of the point `[x, y]` (m) to the region (m); negative inside, then how deep.
    pub fn clearance_m(&self, at_m: [f64; 2]) -> f64 {
        match *self {
            Self::HalfPlane { point_m, normal } => {
                (at_m[0] - point_m[0]) * normal[0] + (at_m[1] - point_m[1]) * normal[1]
            }
            Self::Disc { centre_m, radius_m } => {
                (at_m[0] - centre_m[0]).hypot(at_m[1] - centre_m[1]) - radius_m
            }
        }
    }
}

/// How far a swing to the other side may go. An arm without it never swings.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Swing {
    /// How far the tip orientation may go beyond those of the two rest states the swing joins (rad), > 0.
    pub max_tip_travel_rad: f64,
    /// Fastest the tip may move (m/s), > 0.
    pub max_tip_speed_m_s: f64,
    /// Largest couple the drive may put on the tip during a swing, either way (N m), > 0.
    pub max_couple_n_m: f64,
}
