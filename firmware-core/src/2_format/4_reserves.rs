//! The reserves of a setpoint: how far the arm is from what the requirements guard against.

use core::fmt;

use serde::Serialize;

use crate::words::Word::{F, T};
use crate::words::{Word, Words};

/// Number of values of one point.
pub const RESERVES: usize = 9;

/// A reserve of this stands for "no bound": nothing was found however far one goes.
pub const UNBOUNDED: f32 = 1e9;

/// Worst-case reserves of a setpoint on a branch; `None` means no bound. The fields are in the order of the format.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Reserves {
    /// Energy to the lowest pass out of the well (J).
    pub barrier_j: Option<f32>,
    /// Lateral impulse at the tip that carries the arm over that pass (N s).
    pub knock_n_s: Option<f32>,
    /// Payload beyond the declared range until the rest state ceases to be stable (kg).
    pub payload_reserve_kg: Option<f32>,
    /// Loss of bending stiffness beyond the tolerance until the same, as a fraction of the nominal stiffness.
    pub stiffness_reserve: Option<f32>,
    /// Distance to the fold in units of the setpoint (rad or N m).
    pub setpoint_reserve: Option<f32>,
    /// Restoring stiffness along the mean angle (N m/rad).
    pub restoring_n_m_per_rad: Option<f32>,
    /// Couple that the tendons can make over the couple needed to hold.
    pub tension_factor: Option<f32>,
    /// Distance of the whole arm from the nearest keep-out region (m).
    pub clearance_m: Option<f32>,
    /// Largest bending strain, >= 0: the one value of which more is worse.
    pub strain: f32,
}

impl Reserves {
    /// From the values of one point.
    pub(crate) fn from_values(values: [f32; RESERVES]) -> Self {
        let [
            barrier_j,
            knock_n_s,
            payload_reserve_kg,
            stiffness_reserve,
            setpoint_reserve,
            restoring_n_m_per_rad,
            tension_factor,
            clearance_m,
            strain,
        ] = values;
        let bounded = |value: f32| (value < UNBOUNDED).then_some(value);
        Self {
            barrier_j: bounded(barrier_j),
            knock_n_s: bounded(knock_n_s),
            payload_reserve_kg: bounded(payload_reserve_kg),
            stiffness_reserve: bounded(stiffness_reserve),
            setpoint_reserve: bounded(setpoint_reserve),
            restoring_n_m_per_rad: bounded(restoring_n_m_per_rad),
            tension_factor: bounded(tension_factor),
            clearance_m: bounded(clearance_m),
            strain,
        }
    }

    /// The values of one point, for the writer.
    pub fn to_values(&self) -> [f32; RESERVES] {
        let value = |reserve: Option<f32>| reserve.unwrap_or(UNBOUNDED);
        [
            value(self.barrier_j),
            value(self.knock_n_s),
            value(self.payload_reserve_kg),
            value(self.stiffness_reserve),
            value(self.setpoint_reserve),
            value(self.restoring_n_m_per_rad),
            value(self.tension_factor),
            value(self.clearance_m),
            self.strain,
        ]
    }

    /// Combines two value by value, the strain with a rule of its own.
    fn with(
        &self,
        other: &Self,
        reserve: impl Fn(Option<f32>, Option<f32>) -> Option<f32>,
        strain: impl Fn(f32, f32) -> f32,
    ) -> Self {
        Self {
            barrier_j: reserve(self.barrier_j, other.barrier_j),
            knock_n_s: reserve(self.knock_n_s, other.knock_n_s),
            payload_reserve_kg: reserve(self.payload_reserve_kg, other.payload_reserve_kg),
            stiffness_reserve: reserve(self.stiffness_reserve, other.stiffness_reserve),
            setpoint_reserve: reserve(self.setpoint_reserve, other.setpoint_reserve),
            restoring_n_m_per_rad: reserve(self.restoring_n_m_per_rad, other.restoring_n_m_per_rad),
            tension_factor: reserve(self.tension_factor, other.tension_factor),
            clearance_m: reserve(self.clearance_m, other.clearance_m),
            strain: strain(self.strain, other.strain),
        }
    }

    /// The worse of two, value by value.
    #[must_use]
    pub fn worse(&self, other: &Self) -> Self {
        self.with(other, smaller, |a, b| if a >= b { a } else { b })
    }

    /// The reserves at the fraction `x`, within 0..=1, of the way to `other`. Between a bounded and an unbounded one
    /// it is the bounded one: nobody knows where between the two points the bound begins.
    pub(crate) fn towards(&self, other: &Self, x: f32) -> Self {
        // Exact at both ends.
        let line = |a: f32, b: f32| a * (1.0 - x) + b * x;
        let reserve = |a: Option<f32>, b: Option<f32>| match (a, b) {
            (Some(a), Some(b)) => Some(line(a, b)),
            (one, other) => one.or(other),
        };
        self.with(other, reserve, line)
    }
}

/// The smaller of two reserves.
pub(crate) fn smaller(a: Option<f32>, b: Option<f32>) -> Option<f32> {
    match (a, b) {
        (Some(a), Some(b)) => Some(if a <= b { a } else { b }),
        (one, other) => one.or(other),
    }
}

impl fmt::Display for Reserves {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut reserve = |name: &str, value: Option<f32>, unit: &str| {
            let value = value.map_or(T("without bound"), F);
            let unit = if matches!(value, Word::F(_)) {
                unit
            } else {
                ""
            };
            f.say(&[T(name), T(" "), value, T(unit), T(", ")])
        };
        let percent = self.stiffness_reserve.map(|fraction| 100.0 * fraction);
        reserve("barrier", self.barrier_j, " J")?;
        reserve("knock", self.knock_n_s, " N s")?;
        reserve("payload", self.payload_reserve_kg, " kg")?;
        reserve("stiffness", percent, " %")?;
        reserve("setpoint", self.setpoint_reserve, "")?;
        reserve("restoring", self.restoring_n_m_per_rad, " N m/rad")?;
        reserve("tension factor", self.tension_factor, "")?;
        reserve("clearance", self.clearance_m, " m")?;
        f.say(&[T("strain "), F(100.0 * self.strain), T(" %")])
    }
}
