//! What can be asked of a simulated arm and what it answers.

use std::fmt;

/// One of the two tendons.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Side {
    /// Pulls the tip towards +x.
    A,
    /// Pulls the tip towards -x.
    B,
}

/// One of the sensors.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SensorName {
    /// Tip orientation.
    TipAngle,
    /// Orientation at half length.
    MidAngle,
    /// Tension of one tendon.
    Tension(Side),
}

/// What the sensors read on one tick; NaN from a sensor that has dropped out.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sensed {
    /// Tip orientation relative to the base tangent (rad).
    pub tip_angle_rad: f64,
    /// Orientation at half length relative to the base tangent (rad).
    pub mid_angle_rad: f64,
    /// Tensions of tendons A and B at their actuators (N).
    pub tension_n: [f64; 2],
}

/// Energy, without what the drive has stored in its motors.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Energy {
    /// Of motion, the drive's inertia included (J).
    pub kinetic_j: f64,
    /// Of bending and height (J); height counts from the base.
    pub potential_j: f64,
    /// Of the stretched tendons (J).
    pub tendons_j: f64,
}

/// Where the tip is and how it moves.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tip {
    /// Position `[x, y]` (m), base at the origin, y up.
    pub position_m: [f64; 2],
    /// Velocity `[x, y]` (m/s).
    pub velocity_m_s: [f64; 2],
    /// Orientation relative to the base tangent (rad).
    pub angle_rad: f64,
    /// Its rate (rad/s).
    pub rate_rad_s: f64,
}

impl Tip {
    /// Speed (m/s).
    pub fn speed_m_s(&self) -> f64 {
        self.velocity_m_s[0].hypot(self.velocity_m_s[1])
    }
}

/// Why a simulation could not go on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum PlantError {
    /// No rest shape close to the one given.
    NoRestNearby {
        /// Tip orientation it was sought at (rad).
        tip_angle_rad: f64,
    },
    /// The motion could not be integrated, however short the step.
    MotionLost {
        /// When (s).
        time_s: f64,
    },
}

impl fmt::Display for PlantError {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        match self {
            Self::NoRestNearby { tip_angle_rad } => write!(
                f,
                "the simulated arm has no rest shape near the one given at tip orientation {:.2} deg; simulate with more modes",
                tip_angle_rad.to_degrees()
            ),
            Self::MotionLost { time_s } => write!(
                f,
                "the motion of the simulated arm could not be followed past {time_s:.4} s; give it a shorter longest step"
            ),
        }
    }
}

impl std::error::Error for PlantError {}
