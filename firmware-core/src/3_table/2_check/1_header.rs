//! The values of the header.

use super::{below, sound};
use crate::format::{Header, take};
use crate::table::{Fault, Limits};

pub(super) fn check(bytes: &[u8]) -> Result<Limits, Fault> {
    let (header, rest) = take::<Header<'_>>(bytes).ok_or(Fault::HeaderBroken)?;
    if !rest.is_empty() {
        return Err(Fault::HeaderLeftOver {
            bytes: rest.len() as u32,
        });
    }
    let must = |holds: bool, field: &'static str, value: f32| {
        if holds && sound(value) {
            Ok(())
        } else {
            Err(Fault::HeaderValue { field, value })
        }
    };
    must(header.modes >= 1, "modes", header.modes.into())?;
    for (field, value) in [
        ("gamma", header.gamma),
        ("length_m", header.length_m),
        ("mass_kg", header.mass_kg),
        ("energy_scale_j", header.energy_scale_j),
        ("offset_m", header.offset_m),
        ("max_tension_n", header.max_tension_n),
    ] {
        must(value > 0.0, field, value)?;
    }
    // One rounding step above pi: a tilt of 180 degrees computed in f64 may round up.
    let tilt_most = core::f32::consts::PI + 1e-6;
    must(
        header.tilt_rad.abs() <= tilt_most,
        "tilt_rad",
        header.tilt_rad,
    )?;
    let pretension = header.pretension_n;
    must(
        pretension >= 0.0 && pretension <= header.max_tension_n,
        "pretension_n",
        pretension,
    )?;
    let error = header.worst_error;
    for (field, value) in [
        ("nominal_payload_kg", header.nominal_payload_kg),
        ("worst_error.mean_angle_rad", error.mean_angle_rad),
        ("worst_error.tip_angle_rad", error.tip_angle_rad),
        ("worst_error.couple_n_m", error.couple_n_m),
        ("worst_error.energy_j", error.energy_j),
        ("worst_error.barrier_j", error.barrier_j),
        ("worst_error.tip_m", error.tip_m),
        (
            "worst_error.restoring_n_m_per_rad",
            error.restoring_n_m_per_rad,
        ),
        ("deducted.setpoint", header.deducted.setpoint),
        ("deducted.tension_n", header.deducted.tension_n),
    ] {
        must(value >= 0.0, field, value)?;
    }
    must(true, "setpoint_lo", header.setpoint_lo)?;
    must(true, "setpoint_hi", header.setpoint_hi)?;
    if below(header.setpoint_lo, header.setpoint_hi) {
        Ok(Limits {
            drive: header.drive,
            offset_m: header.offset_m,
            pretension_n: header.pretension_n,
            max_tension_n: header.max_tension_n,
            deducted_tension_n: header.deducted.tension_n,
            mean_angle_error_rad: error.mean_angle_rad,
            nominal_payload_kg: header.nominal_payload_kg,
            setpoint_lo: header.setpoint_lo,
            setpoint_hi: header.setpoint_hi,
        })
    } else {
        Err(Fault::SetpointRange {
            lo: header.setpoint_lo,
            hi: header.setpoint_hi,
        })
    }
}
