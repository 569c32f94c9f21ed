//! The couple that holds the tip, and the tensions that make it.
//!
//! ```text
//! tau = table(branch, setpoint) + trim + KP (setpoint + brake - q0) - KD q0'
//! brake = -A (2/pi) atan(eta q1' sqrt(L/g))
//! ```
//!
//! A tip held still takes no energy out of a swinging arm. The brake moves it against the rate of the mean angle, which
//! is the only quick way to come to rest. The trim is the integral part: it takes up the friction of the tendons and
//! what the table does not know of the payload, within a bound, and stands still while the couple is cut.

use super::config::{ArmFacts, Settings};
use super::estimates::{Estimate, GAUSS, affine, sin_cos};
use crate::choice::TensionPair;
use crate::table::Limits;

/// `value` within `from..=to`; `from` for NaN.
pub(super) fn within(value: f32, from: f32, to: f32) -> f32 {
    if value >= to {
        to
    } else if value >= from {
        value
    } else {
        from
    }
}

/// `from` moved towards `to` by at most `step`.
pub(super) fn towards(from: f32, to: f32, step: f32) -> f32 {
    let change = to - from;
    if change.abs() <= step {
        to
    } else if change > 0.0 {
        from + step
    } else {
        from - step
    }
}

/// `A (2/pi) atan(eta q1' sqrt(L/g))`: the tip's movement in phase with the swing.
pub(super) fn in_phase(amplitude_rad: f32, eta: f32, rate_rad_s: f32, arm: &ArmFacts) -> f32 {
    amplitude_rad * core::f32::consts::FRAC_2_PI * libm::atanf(eta * rate_rad_s * arm.unit_s)
}

/// Movement of the tip that brakes a disturbance (rad).
pub(super) fn brake(now: &Estimate, settings: &Settings, arm: &ArmFacts) -> f32 {
    let still = settings.brake_deadband_rad_s;
    let beyond = if now.q1_rate > still {
        now.q1_rate - still
    } else if now.q1_rate < -still {
        now.q1_rate + still
    } else {
        0.0
    };
    -in_phase(
        settings.brake_amplitude_rad,
        settings.brake_eta,
        beyond,
        arm,
    )
}

/// Couple that the tip takes more, away from the rest state with mean angle `rest_q1`, because the arm is bent
/// otherwise (N m). With affine curvature, `dU/dq0 = m g L (gamma (4 q0 - 6 q1) - int sin(phi + alpha) (3 s^2 - 2 s) ds)`; the
/// weight is taken to be at the tip, and what that and two coordinates get wrong cancels at the rest state.
pub(super) fn couple_off_rest(now: &Estimate, rest_q1: f32, arm: &ArmFacts) -> f32 {
    let mut change = -6.0 * arm.gamma * (now.q1 - rest_q1);
    for (s, share) in GAUSS {
        let sin = |q1: f32| sin_cos(arm.tilt_rad + affine(now.q0, q1, s)).0;
        change -= share * (sin(now.q1) - sin(rest_q1)) * s * (3.0 * s - 2.0);
    }
    arm.energy_scale_j * change
}

/// Position and rate feedback about a reference (N m).
pub(super) fn feedback(now: &Estimate, reference: f32, settings: &Settings) -> f32 {
    settings.kp_n_m_per_rad * (reference - now.q0) - settings.kd_n_m_s_per_rad * now.q0_rate
}

/// The trim after `dt_s`. It stands still while the couple is cut and while the tip is far away.
pub(super) fn trim(trim: f32, off_rad: f32, cut: bool, settings: &Settings, dt_s: f32) -> f32 {
    let most = settings.most_trim_n_m;
    // Written so that NaN changes nothing.
    let near = off_rad.abs() <= settings.reach_tolerance_rad;
    if cut || !near {
        return trim;
    }
    within(
        trim + settings.ki_n_m_per_rad_s * off_rad * dt_s,
        -most,
        most,
    )
}

/// The tensions for a couple of at most `most_couple_n_m`, and whether it had to be cut. Always finite, at least the
/// floor, at most the maximum with the part kept back for interpolation.
pub(super) fn tensions(
    couple_n_m: f32,
    most_couple_n_m: f32,
    limits: &Limits,
    settings: &Settings,
) -> (TensionPair, f32, bool) {
    let floor_n = within(
        settings.pretension_n,
        limits.pretension_n,
        limits.max_tension_n,
    );
    let spare_n = limits.max_tension_n - limits.deducted_tension_n - floor_n;
    let spare_n = if spare_n > 0.0 { spare_n } else { 0.0 };
    let most = within(spare_n * limits.offset_m, 0.0, most_couple_n_m);
    // Nothing is known of a couple that is not a number: none then.
    let asked = if couple_n_m.is_nan() { 0.0 } else { couple_n_m };
    let couple = within(asked, -most, most);
    let pulling_n = within(
        floor_n + couple.abs() / limits.offset_m,
        floor_n,
        limits.max_tension_n,
    );
    let pair = if couple > 0.0 {
        TensionPair {
            a_n: pulling_n,
            b_n: floor_n,
        }
    } else {
        TensionPair {
            a_n: floor_n,
            b_n: pulling_n,
        }
    };
    (pair, couple, couple != asked)
}
