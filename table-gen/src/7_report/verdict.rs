//! The judgement in words: where the arm may be used, what limits it, what would help most.

use super::data::{Drive, Verdict, VerdictStretch};
use super::margins::{Margins, Trace};
use super::text::{number, setpoint};
use super::words;
use crate::margins::requirements::{Finding, Kind};
use crate::margins::usable::EndLimit;
use crate::margins::verdict::{self, Change, Tried, holding};
use crate::rest_states::RestStatesError;

/// Ends closer than this fraction of the setpoint range are one to people.
const SAME_END: f64 = 1e-3;
/// How far beyond an end is looked for what ends it, as a fraction of the setpoint range.
const JUST_BEYOND: f64 = 1e-4;

/// Writes the verdict.
///
/// # Errors
/// [`RestStatesError`] when a corner's rest states cannot be solved.
pub(super) fn verdict(margins: &Margins) -> Result<Verdict, RestStatesError> {
    let slices = margins.tabulation.corners.payloads_kg.len();
    let mut stretches = Vec::new();
    let mut where_used = Vec::new();
    for trace in &margins.traces {
        let label = trace.label;
        let runs = margins.tabulation.usable.any_payload(label, slices);
        if !runs.is_empty() {
            let parts: Vec<String> = runs
                .iter()
                .map(|(ends, _)| format!("from {}", words::range(margins.drive, *ends)))
                .collect();
            where_used.push(format!("{} on branch\u{a0}{label}", parts.join(" and ")));
        }
        let by_payload = by_payload(margins, label);
        let is_none = runs.is_empty();
        for (place, (ends, limits)) in runs.iter().enumerate() {
            stretches.push(VerdictStretch {
                branch: label,
                setpoints: words::range(margins.drive, *ends),
                limits: vec![
                    end(margins, label, ends[0], &limits[0], -1.0)?,
                    end(margins, label, ends[1], &limits[1], 1.0)?,
                ],
                by_payload: if place == 0 {
                    by_payload.clone()
                } else {
                    vec![]
                },
            });
        }
        if is_none {
            stretches.push(VerdictStretch {
                branch: label,
                setpoints: "nowhere".to_string(),
                limits: vec![failing(trace)],
                by_payload,
            });
        }
    }
    let summary = if where_used.is_empty() {
        "This arm may not be used at any setpoint: no rest state meets all requirements."
            .to_string()
    } else {
        format!("This arm may be used {}.", where_used.join(", and "))
    };
    let found = verdict::Verdict::find(&margins.tabulation.arm)?;
    Ok(Verdict {
        summary,
        holds_for: holds_for(margins),
        stretches,
        helps: helps(margins, &found),
    })
}

fn holds_for(margins: &Margins) -> String {
    let arm = &margins.tabulation.arm;
    let [lightest, heaviest] = arm.payload.range_kg.map(words::grams);
    let mut parts = vec![if lightest == heaviest {
        format!("a payload of {heaviest}")
    } else {
        format!("any payload from {lightest} to {heaviest}")
    }];
    if arm.tolerance.stiffness_fraction > 0.0 {
        let percent = words::round(100.0 * arm.tolerance.stiffness_fraction);
        parts.push(format!("a spine up to {percent}\u{a0}% softer or stiffer"));
    }
    if arm.base.tolerance_rad > 0.0 {
        let degrees = words::round(arm.base.tolerance_rad.to_degrees());
        parts.push(format!("a base tilted up to {degrees}° more or less"));
    }
    let last = parts.pop().unwrap_or_default();
    if parts.is_empty() {
        format!("With {last}.")
    } else {
        format!(
            "With {} and {last}, all at their worst together.",
            parts.join(", ")
        )
    }
}

/// What ends a stretch at `at`, looking outwards in the direction of `outwards`.
fn end(
    margins: &Margins,
    label: usize,
    at: f64,
    limit: &EndLimit,
    outwards: f64,
) -> Result<String, RestStatesError> {
    let drive = margins.drive;
    let side = if outwards < 0.0 { "Below" } else { "Above" };
    let place = setpoint(drive, at);
    let Some(kind) = limit.kind else {
        let rod = &margins.tabulation.corners.nominal.rod;
        let of_range = rod.setpoint_si(rod.setpoints[usize::from(outwards > 0.0)]);
        let what = if (at - of_range).abs() <= SAME_END * range_width(margins) {
            "the setpoint range of the arm file ends"
        } else {
            "the branch ends"
        };
        return Ok(format!("{side} {place} {what}."));
    };
    let finding = |at: f64| -> Result<Option<Finding>, RestStatesError> {
        let assessed = margins.assessor.assess(at, Some(label), None)?.pop();
        Ok(assessed.and_then(|assessed| {
            let findings = margins.assessor.findings(&assessed, None);
            findings.into_iter().find(|finding| finding.kind == kind)
        }))
    };
    let beyond = at + outwards * JUST_BEYOND * range_width(margins);
    let corner = match finding(at)?.and_then(|finding| finding.corner) {
        Some(corner) => Some(corner),
        None => finding(beyond)?.and_then(|finding| finding.corner),
    };
    let region = corner
        .filter(|_| kind == Kind::Clearance)
        .and_then(|corner| margins.nearest_region(label, at, &corner))
        .map_or(String::new(), |name| format!(" from {name}"));
    let corner = corner.map_or(String::new(), |corner| {
        format!(
            "; worst {}",
            words::corner(&corner, &margins.tabulation.arm)
        )
    });
    if kind == Kind::Stable {
        return Ok(format!(
            "{side} {place} it is no longer stable in every corner{corner}."
        ));
    }
    let word = if kind.is_upper_limit() {
        "allowed"
    } else {
        "required"
    };
    Ok(format!(
        "{side} {place} the {} fails: {}{region} at the end, {} {word}{corner}.",
        words::name(kind),
        words::quantity(kind, drive, limit.value),
        words::quantity(kind, drive, limit.limit),
    ))
}

fn range_width(margins: &Margins) -> f64 {
    let rod = &margins.tabulation.corners.nominal.rod;
    rod.setpoint_si(rod.setpoints[1]) - rod.setpoint_si(rod.setpoints[0])
}

/// Which requirements keep a branch from being used at all, the most frequent first.
fn failing(trace: &Trace) -> String {
    let (Some(first), Some(last)) = (trace.points.first(), trace.points.last()) else {
        return "The branch was not assessed.".to_string();
    };
    let cover = last.0 - first.0;
    let mut fails: Vec<(f64, Kind)> = std::iter::once(Kind::Stable)
        .chain(Kind::NUMBERED)
        .map(|kind| {
            let runs = holding(&trace.points, Some(kind));
            let held: f64 = runs.iter().map(|[from, to]| to - from).sum();
            (1.0 - held / cover, kind)
        })
        .filter(|(fraction, _)| *fraction > 0.005)
        .collect();
    fails.sort_by(|a, b| b.0.total_cmp(&a.0));
    let parts: Vec<String> = fails
        .iter()
        .take(3)
        .map(|(fraction, kind)| {
            let percent = words::round(100.0 * fraction);
            match kind {
                Kind::Stable => {
                    format!("stability in every corner is missing over {percent}\u{a0}%")
                }
                _ => format!("{} fails over {percent}\u{a0}%", words::name(*kind)),
            }
        })
        .collect();
    format!("Of its setpoints, {}.", parts.join(", "))
}

/// Setpoints with each payload, when one of them has more than what is usable whatever the payload.
fn by_payload(margins: &Margins, label: usize) -> Vec<String> {
    let payloads = &margins.tabulation.corners.payloads_kg;
    let any = margins.usable(label);
    let near = SAME_END * range_width(margins);
    let same = |runs: &[[f64; 2]]| {
        runs.len() == any.len()
            && runs
                .iter()
                .zip(&any)
                .all(|(a, b)| (a[0] - b[0]).abs() < near && (a[1] - b[1]).abs() < near)
    };
    let each: Vec<Vec<[f64; 2]>> = (0..payloads.len())
        .map(|slice| margins.usable_with(label, slice))
        .collect();
    if each.iter().all(|runs| same(runs)) {
        return vec![];
    }
    let in_words = |runs: &[[f64; 2]]| {
        if runs.is_empty() {
            return "nowhere".to_string();
        }
        let parts: Vec<String> = runs
            .iter()
            .map(|ends| words::range(margins.drive, *ends))
            .collect();
        parts.join(" and ")
    };
    payloads
        .iter()
        .zip(&each)
        .map(|(payload_kg, runs)| format!("with {}: {}", words::grams(*payload_kg), in_words(runs)))
        .collect()
}

/// What would help, the larger gain first.
fn helps(margins: &Margins, found: &verdict::Verdict) -> Vec<String> {
    let width = |value: f64| match margins.drive {
        Drive::HeldTip => format!("{:.0}°", value.to_degrees()),
        Drive::AppliedCouple => format!("{}\u{a0}N\u{a0}m", number(value)),
    };
    let now = format!("{} of {}", width(found.width), width(found.range));
    if found.tried.is_empty() {
        return vec![format!(
            "Practically the whole setpoint range can be used ({now}): neither a stiffer spine nor a lighter payload is needed."
        )];
    }
    let mut helping: Vec<&Tried> = [Change::Stiffness, Change::Payload]
        .into_iter()
        .filter_map(|change| found.smallest(change))
        .collect();
    helping.sort_by(|a, b| b.width.unwrap_or(0.0).total_cmp(&a.width.unwrap_or(0.0)));
    let mut lines: Vec<String> = helping
        .iter()
        .enumerate()
        .map(|(place, tried)| {
            format!(
                "{}: usable setpoints grow from {} to {} in all.",
                changed(tried, if place == 0 { "Most: " } else { "Also: " }),
                width(found.width),
                width(tried.width.unwrap_or(found.width))
            )
        })
        .collect();
    for change in [Change::Stiffness, Change::Payload] {
        let tried: Vec<&Tried> = found.tried.iter().filter(|t| t.change == change).collect();
        let Some(most) = tried.last().filter(|_| found.smallest(change).is_none()) else {
            continue;
        };
        let to = tried.iter().filter_map(|t| t.width).max_by(f64::total_cmp);
        let up_to = match change {
            Change::Stiffness => format!(
                "A stiffer spine, up to {} times as stiff",
                number(most.factor)
            ),
            Change::Payload => format!(
                "A lighter payload, down to {}\u{a0}% of its range",
                words::round(100.0 * most.factor)
            ),
        };
        lines.push(match to {
            Some(to) if to <= found.width => {
                format!("{up_to}, does not help: at best {}, now {now}.", width(to))
            }
            Some(to) => format!("{up_to}, helps little: at best {}, now {now}.", width(to)),
            None => format!("{up_to}, could not be judged: its rest states were not certified."),
        });
    }
    lines
}

fn changed(tried: &Tried, lead: &str) -> String {
    let percent = words::round(100.0 * (tried.factor - 1.0).abs());
    match tried.change {
        Change::Stiffness => format!("{lead}a spine {percent}\u{a0}% stiffer"),
        Change::Payload => format!("{lead}a payload {percent}\u{a0}% lighter"),
    }
}
