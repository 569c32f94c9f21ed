//! Requirements and corners of the tolerances as people say them.

use super::Drive;
use super::text::{minus, number, setpoint};
use crate::arm_file::Arm;
use crate::margins::corners::Corner;
use crate::margins::requirements::{Finding, Kind};

/// Name of a requirement.
pub(super) fn name(kind: Kind) -> &'static str {
    match kind {
        Kind::Stable => "stable in every corner",
        Kind::Knock => "knock",
        Kind::PayloadReserve => "payload reserve",
        Kind::StiffnessReserve => "stiffness reserve",
        Kind::SetpointReserve => "setpoint reserve",
        Kind::TensionFactor => "tension factor",
        Kind::Strain => "strain",
        Kind::Clearance => "clearance",
    }
}

/// Unit that people read a requirement in, and what SI values are multiplied with for it.
pub(super) fn unit(kind: Kind, drive: Drive) -> (&'static str, f64) {
    match (kind, drive) {
        (Kind::Stable | Kind::TensionFactor, _) => ("", 1.0),
        (Kind::Knock, _) => ("N s", 1.0),
        (Kind::PayloadReserve, _) => ("g", 1e3),
        (Kind::StiffnessReserve | Kind::Strain, _) => ("%", 100.0),
        (Kind::SetpointReserve, Drive::HeldTip) => ("°", 1f64.to_degrees()),
        (Kind::SetpointReserve, Drive::AppliedCouple) => ("N m", 1.0),
        (Kind::Clearance, _) => ("mm", 1e3),
    }
}

/// A value of a requirement with its unit.
pub(super) fn quantity(kind: Kind, drive: Drive, value: f64) -> String {
    let (unit, factor) = unit(kind, drive);
    let shown = number(value * factor);
    match unit {
        "" => shown,
        "°" => format!("{shown}°"),
        _ => format!("{shown} {unit}").replace(' ', "\u{a0}"),
    }
}

/// A finding as "knock 0.004 N s of 0.010 N s".
pub(super) fn shortfall(finding: &Finding, drive: Drive) -> String {
    let name = name(finding.kind);
    match (finding.kind, finding.value) {
        (Kind::Stable, _) | (_, None) => format!("not {}", self::name(Kind::Stable)),
        (kind, Some(value)) => format!(
            "{name} {}, {} {}",
            quantity(kind, drive, value),
            quantity(kind, drive, finding.limit),
            if kind.is_upper_limit() {
                "allowed"
            } else {
                "required"
            }
        ),
    }
}

/// A corner as "with 75.0 g, a spine 10 % softer and the base tilted 2° towards −x"; only what can vary is said.
pub(super) fn corner(corner: &Corner, arm: &Arm) -> String {
    let mut parts = Vec::new();
    if arm.payload.range_kg[0] < arm.payload.range_kg[1] {
        parts.push(grams(corner.payload_kg));
    }
    if arm.tolerance.stiffness_fraction > 0.0 {
        parts.push(match corner.stiffness_percent {
            0.0 => "the spine as measured".to_string(),
            percent => format!(
                "a spine {}\u{a0}% {}",
                round(percent.abs()),
                if percent < 0.0 { "softer" } else { "stiffer" }
            ),
        });
    }
    if arm.base.tolerance_rad > 0.0 {
        parts.push(match corner.tilt_deg {
            0.0 => "the base as designed".to_string(),
            tilt => format!(
                "the base tilted {}° towards {}x",
                round(tilt.abs()),
                if tilt < 0.0 { "−" } else { "+" }
            ),
        });
    }
    match parts.split_last() {
        None => "with the arm as measured".to_string(),
        Some((last, [])) => format!("with {last}"),
        Some((last, others)) => format!("with {} and {last}", others.join(", ")),
    }
}

/// A mass of payload.
pub(super) fn grams(mass_kg: f64) -> String {
    format!("{}\u{a0}g", round(1e3 * mass_kg))
}

/// At most one decimal, none when it says nothing.
pub(super) fn round(value: f64) -> String {
    let text = minus(format!("{value:.1}"));
    text.strip_suffix(".0").map_or(text.clone(), str::to_string)
}

/// "a to b", or "near a" when they read the same.
pub(super) fn range(drive: Drive, [from, to]: [f64; 2]) -> String {
    let (from, to) = (setpoint(drive, from), setpoint(drive, to));
    if from == to {
        format!("near {from}")
    } else {
        format!("{from} to {to}")
    }
}
