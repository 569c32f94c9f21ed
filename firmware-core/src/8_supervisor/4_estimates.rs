//! From readings to angles and their rates, and the two-coordinate picture of the arm.
//!
//! An angle is followed by a filter of second order that predicts with its rate and corrects with what the reading
//! adds, `w` being its corner and `z = 0.8` its damping ratio:
//!
//! ```text
//! e = reading - angle      rate' = w^2 e      angle' = rate + 2 z w e
//! ```
//!
//! The rate lags by `2 z / w`, the angle not at all when it moves steadily. A reading further than the configured jump from the prediction is
//! not taken; the prediction goes on for as long as readings may be unbelievable, then stands still.
//!
//! The mean angle of the affine curvature through the readings at the tip and at half length is
//! `q1 = (alpha(1/2) + q0/4) / 1.5`.

use super::Events;
use super::config::{ArmFacts, FILTER_DELAY, Settings};
use crate::pose::Pose;

/// What a reading must satisfy.
#[derive(Clone, Copy)]
pub(super) struct Believable {
    pub(super) from: f32,
    pub(super) to: f32,
    pub(super) corner_rad_s: f32,
}

/// One angle sensor.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Angle {
    /// Filtered (rad).
    pub(super) value: f32,
    /// Its rate (rad/s).
    pub(super) rate: f32,
    /// Whether any reading has been taken.
    pub(super) begun: bool,
    /// The last reading.
    last: f32,
    /// How long it has repeated bit by bit (s).
    pub(super) same_s: f32,
    /// How long readings have been unbelievable (s).
    pub(super) bad_s: f32,
}

impl Angle {
    pub(super) const NEW: Self = Self {
        value: 0.0,
        rate: 0.0,
        begun: false,
        last: 0.0,
        same_s: 0.0,
        bad_s: 0.0,
    };

    /// Takes a reading, or says why not.
    pub(super) fn take(
        &mut self,
        reading: f32,
        within: Believable,
        settings: &Settings,
        dt_s: f32,
    ) -> Events {
        if self.begun && reading.to_bits() == self.last.to_bits() {
            self.same_s += dt_s;
        } else {
            self.same_s = 0.0;
        }
        self.last = reading;
        let predicted = self.value + self.rate * dt_s;
        let doubt = if !reading.is_finite() {
            Events::SENSOR_NOT_FINITE
        } else if !(within.from <= reading && reading <= within.to) {
            Events::SENSOR_OUT_OF_RANGE
        } else if self.begun && (reading - predicted).abs() > settings.jump_rad {
            Events::SENSOR_JUMPED
        } else {
            Events::NONE
        };
        if doubt.is_empty() {
            self.bad_s = 0.0;
            if self.begun {
                let (w, e) = (within.corner_rad_s, reading - self.value);
                self.rate += w * w * e * dt_s;
                self.value += (self.rate + FILTER_DELAY * w * e) * dt_s;
            } else {
                (self.value, self.rate, self.begun) = (reading, 0.0, true);
            }
        } else {
            self.bad_s += dt_s;
            if self.bad_s > settings.sensor_s {
                self.rate = 0.0;
            } else if self.begun {
                self.value = predicted;
            }
        }
        doubt
    }

    /// Whether it may be relied on now.
    pub(super) fn sound(&self, settings: &Settings) -> bool {
        self.begun && self.bad_s <= settings.sensor_s
    }
}

/// The arm in two coordinates.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Estimate {
    /// Tip angle (rad).
    pub(super) q0: f32,
    /// Its rate (rad/s).
    pub(super) q0_rate: f32,
    /// Mean angle (rad).
    pub(super) q1: f32,
    /// Its rate (rad/s).
    pub(super) q1_rate: f32,
}

impl Estimate {
    pub(super) fn new(tip: &Angle, mid: &Angle) -> Self {
        let mean = |mid: f32, tip: f32| (mid + 0.25 * tip) / 1.5;
        Self {
            q0: tip.value,
            q0_rate: tip.rate,
            q1: mean(mid.value, tip.value),
            q1_rate: mean(mid.rate, tip.rate),
        }
    }

    pub(super) fn pose(&self) -> Pose {
        Pose {
            tip_angle_rad: self.q0,
            mean_angle_rad: self.q1,
        }
    }

    /// Speed of the tip (m/s).
    pub(super) fn tip_speed_m_s(&self, arm: &ArmFacts) -> f32 {
        let (mut vx, mut vy) = (0.0, 0.0);
        for (s, weight) in GAUSS {
            let (sin, cos) = sin_cos(arm.tilt_rad + affine(self.q0, self.q1, s));
            let rate = affine(self.q0_rate, self.q1_rate, s);
            vx += weight * cos * rate;
            vy -= weight * sin * rate;
        }
        arm.length_m * libm::sqrtf(vx * vx + vy * vy)
    }
}

/// Orientation at `s` of the arm whose curvature is affine in `s`.
pub(super) fn affine(q0: f32, q1: f32, s: f32) -> f32 {
    s * ((6.0 * q1 - 2.0 * q0) + (3.0 * q0 - 6.0 * q1) * s)
}

/// Places and weights of Gauss-Legendre quadrature with six points on 0..1: for the angles of an arm that turns by less
/// than two turns the error is below that of the sine.
pub(super) const GAUSS: [(f32, f32); 6] = [
    (0.033_765_24, 0.085_662_25),
    (0.169_395_31, 0.180_380_79),
    (0.380_690_4, 0.233_956_97),
    (0.619_309_6, 0.233_956_97),
    (0.830_604_7, 0.180_380_79),
    (0.966_234_76, 0.085_662_25),
];

/// Sine and cosine, in f32 throughout (that of libm is in f64 inside). Error below 1e-6 for angles below 100; the
/// polynomials are the Taylor ones to the ninth and eighth power, good to 3e-7 and 3e-8 on the eighth of a turn.
pub(super) fn sin_cos(x: f32) -> (f32, f32) {
    use core::f32::consts::FRAC_2_PI;
    // A quarter turn in two parts, the first with zeros at its end, so that the difference is exact.
    const QUARTER: (f32, f32) = (1.570_312_5, 4.838_268e-4);
    let turns = libm::floorf(x * FRAC_2_PI + 0.5);
    let r = (x - turns * QUARTER.0) - turns * QUARTER.1;
    let z = r * r;
    let sin = r
        * (1.0
            + z * (-1.0 / 6.0 + z * (1.0 / 120.0 + z * (-1.0 / 5040.0 + z * (1.0 / 362_880.0)))));
    let cos = 1.0 + z * (-0.5 + z * (1.0 / 24.0 + z * (-1.0 / 720.0 + z * (1.0 / 40_320.0))));
    match turns as i32 & 3 {
        0 => (sin, cos),
        1 => (cos, -sin),
        2 => (-sin, -cos),
        _ => (-cos, sin),
    }
}
