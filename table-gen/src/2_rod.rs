//! The arm as a rod in dimensionless form.
//!
//! Planar, inextensible, unshearable (Kirchhoff) rod, clamped at the base. With `s` in 0..=1 the arc length from the base,
//! `alpha(s)` the orientation relative to the base tangent and `phi` the tilt of the base tangent from the upward vertical,
//! lengths in L, couples and energies in m g L (m the total mass), the potential energy is
//!
//! ```text
//! U = 1/2 int gamma(s) (alpha' - kappa0(s))^2 ds + int w(s) cos(phi + alpha) ds
//! ```
//!
//! `gamma = B / (m g L^2)` is the bending stiffness, `kappa0` the rest curvature times L and `w(s)` the fraction of the mass
//! outboard of `s`. The gravity term is the height of every mass, integrated by parts once.

use crate::arm_file::{Arm, Drive, Profile, STANDARD_GRAVITY_M_S2};

/// Which quantity the drive holds: the setpoint of the table.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Held {
    /// The tip orientation `q0 = alpha(1)` (rad).
    TipAngle,
    /// The tip couple, here in m g L.
    TipCouple,
}

/// A rod in units of L and m g L.
#[derive(Clone, Debug)]
pub struct Rod {
    /// Length L (m).
    pub length_m: f64,
    /// Energy and couple scale m g L (J).
    pub energy_scale_j: f64,
    /// Base tilt from the upward vertical (rad).
    pub tilt_rad: f64,
    /// What the drive holds.
    pub held: Held,
    /// Lowest and highest setpoint (rad, or m g L).
    pub setpoints: [f64; 2],
    stiffness: Profile,
    rest_curvature: Profile,
    mass_per_length: Profile,
    /// `(s, fraction)` of every point mass, the payload at 1 included.
    point_masses: Vec<(f64, f64)>,
}

impl Rod {
    /// The rod of an arm.
    pub fn new(arm: &Arm) -> Self {
        let length_m = arm.spine.length_m;
        let mass_kg = arm.total_mass_kg();
        let energy_scale_j = mass_kg * STANDARD_GRAVITY_M_S2 * length_m;
        let mut point_masses: Vec<_> = arm
            .lumps
            .iter()
            .map(|lump| (lump.at, lump.mass_kg / mass_kg))
            .collect();
        point_masses.push((1.0, arm.payload.mass_kg / mass_kg));
        let (held, setpoints) = match arm.drive {
            Drive::HeldTip { setpoints_rad } => (Held::TipAngle, setpoints_rad),
            Drive::AppliedCouple { setpoints_n_m } => (
                Held::TipCouple,
                setpoints_n_m.map(|couple| couple / energy_scale_j),
            ),
        };
        Self {
            length_m,
            energy_scale_j,
            tilt_rad: arm.base.tilt_rad,
            held,
            setpoints,
            stiffness: arm
                .spine
                .bending_stiffness_n_m2
                .scaled(1.0 / (energy_scale_j * length_m)),
            rest_curvature: arm.spine.rest_curvature_rad_m.scaled(length_m),
            mass_per_length: arm.spine.mass_per_length_kg_m.scaled(length_m / mass_kg),
            point_masses,
        }
    }

    /// Dimensionless bending stiffness at `s`.
    pub fn stiffness(&self, s: f64) -> f64 {
        self.stiffness.at(s)
    }

    /// Rest curvature times L at `s`.
    pub fn rest_curvature(&self, s: f64) -> f64 {
        self.rest_curvature.at(s)
    }

    /// Distributed mass per arc length at `s`, as a fraction of the arm's mass.
    pub fn mass_per_length(&self, s: f64) -> f64 {
        self.mass_per_length.at(s)
    }

    /// `(s, fraction of the mass)` of every point mass, the payload at 1 included.
    pub fn point_masses(&self) -> &[(f64, f64)] {
        &self.point_masses
    }

    /// Fraction of the mass outboard of `s`, where `s` lies inside a panel whose far end is `panel_end` (point masses at
    /// either end of the panel count as outboard of its inside exactly when they lie at or beyond the far end).
    pub fn outboard(&self, s: f64, panel_end: f64) -> f64 {
        let points: f64 = self
            .point_masses
            .iter()
            .filter(|p| p.0 >= panel_end)
            .map(|p| p.1)
            .sum();
        self.mass_per_length.integral_to_tip(s) + points
    }

    /// Where stiffness, mass or rest curvature has a kink or the outboard mass a jump: panel ends from 0 to 1.
    pub fn panel_ends(&self) -> Vec<f64> {
        let mut ends = vec![0.0, 1.0];
        for profile in [&self.stiffness, &self.rest_curvature, &self.mass_per_length] {
            ends.extend(profile.knots().iter().map(|k| k.0));
        }
        ends.extend(self.point_masses.iter().map(|p| p.0));
        ends.sort_by(f64::total_cmp);
        ends.dedup_by(|a, b| (*a - *b).abs() < 1e-12);
        ends
    }

    /// A setpoint in SI (rad or N m) from a dimensionless one.
    pub fn setpoint_si(&self, setpoint: f64) -> f64 {
        match self.held {
            Held::TipAngle => setpoint,
            Held::TipCouple => setpoint * self.energy_scale_j,
        }
    }

    /// A dimensionless setpoint from one in SI (rad or N m).
    pub fn setpoint_from_si(&self, setpoint: f64) -> f64 {
        match self.held {
            Held::TipAngle => setpoint,
            Held::TipCouple => setpoint / self.energy_scale_j,
        }
    }
}
