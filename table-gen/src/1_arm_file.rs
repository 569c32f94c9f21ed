//! The arm as measured: what the engineer writes in `arm.toml`, checked, in SI units and radians.
//!
//! [`read`] goes text -> keys as written (`3_written.rs`) -> checked [`Arm`] (`4_checking.rs`). Every
//! fault is an [`ArmFileError`] that shows the place, the value found and what is allowed; the
//! allowed ranges are in `2_limits.rs`.

use serde::Serialize;
use sha2::{Digest, Sha256};

#[path = "1_arm_file/4_checking.rs"]
mod checking;
#[path = "1_arm_file/2_limits.rs"]
mod limits;
#[path = "1_arm_file/1_message.rs"]
mod message;
#[path = "1_arm_file/6_safety.rs"]
mod safety;
#[path = "1_arm_file/5_tests.rs"]
#[cfg(test)]
mod tests;
#[path = "1_arm_file/3_written.rs"]
mod written;

pub use checking::{parse, read};
pub use message::ArmFileError;
pub use safety::{KeepOut, Region, Require, Swing, Tolerance};

/// Standard gravity (m/s2), exact by convention (3rd General Conference on Weights and Measures, 1901).
pub const STANDARD_GRAVITY_M_S2: f64 = 9.806_65;

/// A quantity along the spine: linear between knots, constant outside them.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Profile {
    /// `(s, value)` with `s` in 0..=1 strictly increasing; one knot means constant. Never empty.
    knots: Vec<(f64, f64)>,
}

impl Profile {
    /// A constant quantity.
    pub fn constant(value: f64) -> Self {
        Self {
            knots: vec![(0.0, value)],
        }
    }

    /// Linear between `knots`, which must be strictly increasing in `s` within 0..=1.
    ///
    /// # Errors
    /// The position in `knots` of the first offending knot.
    pub fn from_knots(knots: Vec<(f64, f64)>) -> Result<Self, usize> {
        if knots.is_empty() {
            return Err(0);
        }
        for (i, &(s, value)) in knots.iter().enumerate() {
            let in_order = i == 0 || knots[i - 1].0 < s;
            if !((0.0..=1.0).contains(&s) && value.is_finite() && in_order) {
                return Err(i);
            }
        }
        Ok(Self { knots })
    }

    /// The knots `(s, value)`.
    pub fn knots(&self) -> &[(f64, f64)] {
        &self.knots
    }

    /// Value at `s`; outside the first and last knot the nearest knot's value.
    pub fn at(&self, s: f64) -> f64 {
        let after = self.knots.partition_point(|&(at, _)| at <= s);
        if after == 0 {
            return self.knots[0].1;
        }
        let (s0, v0) = self.knots[after - 1];
        match self.knots.get(after) {
            None => v0,
            Some(&(s1, v1)) => v0 + (v1 - v0) * (s - s0) / (s1 - s0),
        }
    }

    /// The same profile with every value multiplied by `factor`.
    pub fn scaled(&self, factor: f64) -> Self {
        Self {
            knots: self.knots.iter().map(|&(s, v)| (s, v * factor)).collect(),
        }
    }

    /// Integral from `s` to 1 (exact: trapezoids over the linear pieces).
    pub fn integral_to_tip(&self, s: f64) -> f64 {
        let mut sum = 0.0;
        let mut at = s;
        for &(knot, _) in self.knots.iter().filter(|k| k.0 > s && k.0 < 1.0) {
            sum += 0.5 * (knot - at) * (self.at(at) + self.at(knot));
            at = knot;
        }
        sum + 0.5 * (1.0 - at) * (self.at(at) + self.at(1.0))
    }
}

/// The springy spine.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Spine {
    /// Length from clamp to tip (m), > 0.
    pub length_m: f64,
    /// Bending stiffness (N m2), > 0 everywhere.
    pub bending_stiffness_n_m2: Profile,
    /// Mass per length (kg/m), >= 0.
    pub mass_per_length_kg_m: Profile,
    /// Curvature at rest without load (rad/m), any sign.
    pub rest_curvature_rad_m: Profile,
    /// Thickness in the bending plane (m), > 0.
    pub thickness_m: f64,
    /// Largest strain the spine may see, > 0.
    pub allowed_strain: f64,
    /// Damping ratio of the first mode with the tip held, in 0..1.
    pub damping_ratio: f64,
}

/// A mass clamped to the spine.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Lump {
    /// Where along the spine, 0 at the base, 1 at the tip.
    pub at: f64,
    /// Mass (kg), >= 0.
    pub mass_kg: f64,
}

/// What the tip carries.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Payload {
    /// Mass (kg), >= 0.
    pub mass_kg: f64,
    /// Lightest and heaviest the tip may carry (kg), >= 0; contains `mass_kg`. Both are `mass_kg` when
    /// the arm file says nothing.
    pub range_kg: [f64; 2],
}

/// How the base is mounted.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Base {
    /// Tilt of the base tangent from the upward vertical (rad); positive turns towards +x.
    pub tilt_rad: f64,
    /// How far the tilt may be off, either way (rad), >= 0; 0 when the arm file says nothing.
    pub tolerance_rad: f64,
}

/// The two tendons.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Tendons {
    /// Distance of each tendon from the spine (m), > 0.
    pub offset_m: f64,
    /// Tension both carry at no couple (N), >= 0.
    pub pretension_n: f64,
    /// Largest tension allowed (N), > pretension.
    pub max_tension_n: f64,
}

/// What the drive controls, and the setpoint range to tabulate.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub enum Drive {
    /// Take-up controlled: the tip orientation is the setpoint (rad).
    HeldTip {
        /// Lowest and highest setpoint, increasing.
        setpoints_rad: [f64; 2],
    },
    /// Tension controlled: the tip couple is the setpoint (N m).
    AppliedCouple {
        /// Lowest and highest setpoint, increasing.
        setpoints_n_m: [f64; 2],
    },
}

/// The accuracy asked of the table.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Accuracy {
    /// Worst interpolation error of angles (rad), > 0.
    pub angle_rad: f64,
    /// Worst error of couples and energies as a fraction of m g L, > 0.
    pub couple_fraction: f64,
}

/// A checked arm: everything finite and inside its range.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Arm {
    /// What the engineer calls it.
    pub name: String,
    /// The springy spine.
    pub spine: Spine,
    /// Masses along the spine.
    pub lumps: Vec<Lump>,
    /// What the tip carries.
    pub payload: Payload,
    /// How the base is mounted.
    pub base: Base,
    /// The two tendons.
    pub tendons: Tendons,
    /// Drive kind and setpoint range.
    pub drive: Drive,
    /// Accuracy asked of the table.
    pub accuracy: Accuracy,
    /// How far the real arm may be from this one, besides payload and base tilt.
    pub tolerance: Tolerance,
    /// The reserves of a usable rest state.
    pub require: Require,
    /// Where no part of the arm may be.
    pub keep_out: Vec<KeepOut>,
    /// Limits of a swing to the other side; without it the arm never swings.
    pub swing: Option<Swing>,
}

impl Arm {
    /// All mass: spine, lumps and payload (kg), > 0.
    pub fn total_mass_kg(&self) -> f64 {
        let spine_kg = self.spine.length_m * self.spine.mass_per_length_kg_m.integral_to_tip(0.0);
        let lumps_kg: f64 = self.lumps.iter().map(|lump| lump.mass_kg).sum();
        spine_kg + lumps_kg + self.payload.mass_kg
    }

    /// Bending stiffness averaged along the spine (N m2), > 0.
    pub fn mean_bending_stiffness_n_m2(&self) -> f64 {
        self.spine.bending_stiffness_n_m2.integral_to_tip(0.0)
    }

    /// Dimensionless stiffness `B / (m g L^2)` with the mean stiffness and the total mass, > 0.
    ///
    /// It decides how the arm behaves under gravity: stiff arms stand, soft ones flop.
    pub fn gamma(&self) -> f64 {
        let length_m = self.spine.length_m;
        self.mean_bending_stiffness_n_m2()
            / (self.total_mass_kg() * STANDARD_GRAVITY_M_S2 * length_m * length_m)
    }

    /// The one arm that carries `payload_kg`, with the stiffness times `stiffness_factor` (> 0) and
    /// the base turned by `tilt_change_rad`: a corner of the tolerances, or beyond them.
    ///
    /// Nothing of it varies any more: its payload range is `payload_kg` alone and its tolerances are 0.
    /// Everything else is as in `self`. The arguments are not checked against the tolerances.
    pub fn varied(&self, payload_kg: f64, stiffness_factor: f64, tilt_change_rad: f64) -> Self {
        let mut arm = self.clone();
        arm.payload = Payload {
            mass_kg: payload_kg,
            range_kg: [payload_kg; 2],
        };
        arm.spine.bending_stiffness_n_m2 =
            self.spine.bending_stiffness_n_m2.scaled(stiffness_factor);
        arm.base = Base {
            tilt_rad: self.base.tilt_rad + tilt_change_rad,
            tolerance_rad: 0.0,
        };
        arm.tolerance = Tolerance::default();
        arm
    }

    /// Tells arms apart: the first 8 bytes of SHA-256 over the checked values, name included.
    ///
    /// Comments, layout and key order of the file do not count; a changed value does.
    pub fn fingerprint(&self) -> [u8; 8] {
        let values = serde_json::to_vec(self).expect("an arm is plain numbers and text");
        let digest = Sha256::digest(values);
        std::array::from_fn(|i| digest[i])
    }
}
