//! The header: which arm, in which units, how exact.

use serde::{Deserialize, Serialize};

/// The units of every number in the table.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Units {
    /// SI units and radians.
    SiRadians,
}

/// What the drive controls, and with it what a setpoint is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Drive {
    /// Take-up controlled: the setpoint is the tip angle q0 (rad), its conjugate the hold couple tau (N m).
    HeldTip,
    /// Tension controlled: the setpoint is the tip couple tau (N m), its conjugate the tip angle q0 (rad).
    AppliedCouple,
}

/// Worst interpolation error of each tabulated quantity, measured by the generator against fresh solves. All >= 0.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct WorstError {
    /// Of the mean angle (rad).
    pub mean_angle_rad: f32,
    /// Of the tip angle (rad); 0 when the tip is held, for then it is the setpoint.
    pub tip_angle_rad: f32,
    /// Of the couple (N m); 0 when the couple is applied.
    pub couple_n_m: f32,
    /// Of the energy (J).
    pub energy_j: f32,
    /// Of the barrier (J).
    pub barrier_j: f32,
    /// Of the tip position, either coordinate (m).
    pub tip_m: f32,
    /// Of the restoring stiffness (N m/rad).
    pub restoring_n_m_per_rad: f32,
}

/// What the generator took off the usable stretches because of the interpolation errors. All >= 0.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Deducted {
    /// From the ends of the stretches, in units of the setpoint (rad or N m).
    pub setpoint: f32,
    /// From the maximum tension (N).
    pub tension_n: f32,
}

/// The arm the table was made for, and the quality of the table.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Header<'a> {
    /// The arm's name.
    pub name: &'a str,
    /// The first bytes of the digest of the arm's description: tells tables of different arms apart.
    pub fingerprint: [u8; 8],
    /// The units of every number.
    pub units: Units,
    /// What the setpoint is.
    pub drive: Drive,
    /// Curvature modes of the rod that the table was made from, >= 1.
    pub modes: u8,
    /// Dimensionless stiffness B / (m g L^2), > 0.
    pub gamma: f32,
    /// Length of the arm (m), > 0.
    pub length_m: f32,
    /// Total mass, the nominal payload included (kg), > 0.
    pub mass_kg: f32,
    /// Payload that the tensions are made for when the payload is unknown (kg): that of one of the slices.
    pub nominal_payload_kg: f32,
    /// Energy scale m g L (J), > 0.
    pub energy_scale_j: f32,
    /// Base tilt from the upward vertical (rad), within -pi..=pi.
    pub tilt_rad: f32,
    /// Distance of either tendon from the centre line (m), > 0.
    pub offset_m: f32,
    /// Tension of the tendon that does not pull (N), within 0..=max_tension_n.
    pub pretension_n: f32,
    /// Largest allowed tension (N), > 0.
    pub max_tension_n: f32,
    /// Lowest tabulated setpoint (rad or N m).
    pub setpoint_lo: f32,
    /// Highest tabulated setpoint, > `setpoint_lo`.
    pub setpoint_hi: f32,
    /// Worst interpolation errors.
    pub worst_error: WorstError,
    /// What was taken off for them.
    pub deducted: Deducted,
}
