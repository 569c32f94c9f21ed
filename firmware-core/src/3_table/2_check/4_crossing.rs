//! One crossing and the survey band of its slice.

use super::{Own, sound};
use crate::format::{Crossing, Drive, Method, SurveyBand};
use crate::table::{CrossingFault, Fault, Limits};

/// Rounding of f32 when two stored numbers are compared (rad or N m).
const SLACK: f32 = 1e-5;

pub(super) fn band(slice: u16, band: SurveyBand) -> Result<(), Fault> {
    let SurveyBand { lo, hi } = band;
    if lo > 0.0 && lo <= 1.0 && hi >= 1.0 && sound(hi) {
        Ok(())
    } else {
        Err(Fault::SurveyBand { slice, lo, hi })
    }
}

pub(super) fn check(found: &Crossing, limits: &Limits, own: Own<'_>) -> Result<(), CrossingFault> {
    if limits.drive != Drive::HeldTip {
        return Err(CrossingFault::Drive);
    }
    ends(found, own)?;
    values(found, limits)?;
    let (successes, trials) = (found.successes, found.trials);
    if successes > trials {
        return Err(CrossingFault::Trials { successes, trials });
    }
    if !found.allowed {
        return Ok(());
    }
    if successes != trials || trials == 0 {
        return Err(CrossingFault::AllowedWithFailures { successes, trials });
    }
    let rest_setpoint = found.rest_setpoint;
    if own.usable(found.to, rest_setpoint) == Some(true) {
        Ok(())
    } else {
        Err(CrossingFault::EndsOutsideStretches { rest_setpoint })
    }
}

/// Both branches are stable and reach the setpoints.
fn ends(found: &Crossing, own: Own<'_>) -> Result<(), CrossingFault> {
    if found.from == found.to {
        return Err(CrossingFault::SameBranch { branch: found.from });
    }
    let stable = |branch: u8| {
        own.branch(branch)
            .filter(|entry| entry.is_stable())
            .ok_or(CrossingFault::NotStable { branch })
    };
    let (from, to) = (stable(found.from)?, stable(found.to)?);
    for (holds, field, value) in [
        (
            from.covers(found.setpoint_from),
            "setpoint_from",
            found.setpoint_from,
        ),
        (
            from.covers(found.setpoint_to) && found.setpoint_from <= found.setpoint_to,
            "setpoint_to",
            found.setpoint_to,
        ),
        (
            to.covers(found.rest_setpoint),
            "rest_setpoint",
            found.rest_setpoint,
        ),
    ] {
        if !holds {
            return Err(CrossingFault::Value { field, value });
        }
    }
    Ok(())
}

fn values(found: &Crossing, limits: &Limits) -> Result<(), CrossingFault> {
    let leans = found.method == Method::Lean;
    let amplitude = found.amplitude_rad;
    let travel = found.most_tip_travel_rad;
    let lean = (found.lean_setpoint - found.rest_setpoint).abs();
    let most_n_m = (limits.max_tension_n - limits.pretension_n) * limits.offset_m;
    let checks = [
        (
            amplitude >= 0.0 && (leans || amplitude > 0.0),
            "amplitude_rad",
            amplitude,
        ),
        (found.eta > 0.0, "eta", found.eta),
        (
            sound(found.lean_setpoint),
            "lean_setpoint",
            found.lean_setpoint,
        ),
        (found.longest_s > 0.0, "longest_s", found.longest_s),
        (
            travel > 0.0 && travel + SLACK >= amplitude && (!leans || travel + SLACK >= lean),
            "most_tip_travel_rad",
            travel,
        ),
        (
            found.most_couple_n_m > 0.0 && found.most_couple_n_m <= most_n_m + SLACK,
            "most_couple_n_m",
            found.most_couple_n_m,
        ),
        (
            found.most_tip_speed_m_s > 0.0,
            "most_tip_speed_m_s",
            found.most_tip_speed_m_s,
        ),
        (true, "lowest_clearance_m", found.lowest_clearance_m),
        (
            found.peak_couple_n_m >= 0.0,
            "peak_couple_n_m",
            found.peak_couple_n_m,
        ),
        (
            found.peak_tip_speed_m_s >= 0.0,
            "peak_tip_speed_m_s",
            found.peak_tip_speed_m_s,
        ),
        (found.takes_s >= 0.0, "takes_s", found.takes_s),
    ];
    for (holds, field, value) in checks {
        if !(holds && sound(value)) {
            return Err(CrossingFault::Value { field, value });
        }
    }
    Ok(())
}
