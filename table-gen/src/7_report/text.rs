//! The written parts of the page: facts, tables and identity, for readers and for pages without scripts.

use std::fmt::Write;

use super::{Arm, Branch, Drive, End, Limit, ReportData, Stretch, Verdict, WorstError};

/// Text with the characters that mean something in HTML replaced.
pub(super) fn escape(text: &str) -> String {
    text.replace('&', "&amp;")
        .replace('<', "&lt;")
        .replace('>', "&gt;")
        .replace('"', "&quot;")
}

/// A number with three significant digits, never in powers of ten within what arms measure; a dash when not finite.
pub(super) fn number(value: f64) -> String {
    if !value.is_finite() {
        return "–".to_string();
    }
    let magnitude = if value == 0.0 {
        0.0
    } else {
        value.abs().log10().floor()
    };
    let decimals = (2.0 - magnitude).clamp(0.0, 6.0) as usize;
    minus(format!("{value:.decimals$}"))
}

pub(super) fn degrees(angle_rad: f64) -> String {
    if !angle_rad.is_finite() {
        return "–".to_string();
    }
    format!("{}°", minus(format!("{:.1}", angle_rad.to_degrees())))
}

/// The sign a person reads, and no minus before a rounded zero.
pub(super) fn minus(digits: String) -> String {
    match digits.strip_prefix('-') {
        Some(rest) if rest.bytes().all(|b| b == b'0' || b == b'.') => rest.to_string(),
        Some(rest) => format!("−{rest}"),
        None => digits,
    }
}

pub(super) fn setpoint(drive: Drive, value: f64) -> String {
    match drive {
        Drive::HeldTip => degrees(value),
        Drive::AppliedCouple => format!("{}\u{a0}N\u{a0}m", number(value)),
    }
}

/// What the arm is, as a description list.
pub(super) fn facts(arm: &Arm) -> String {
    let drive = match arm.drive {
        Drive::HeldTip => "tip held by tendon take-up; the setpoint is the tip angle",
        Drive::AppliedCouple => "couple applied by tendon tension; the setpoint is the tip couple",
    };
    let rows = [
        ("Drive", drive.to_string()),
        ("Length", format!("{}\u{a0}m", number(arm.length_m))),
        (
            "Mass with payload",
            format!("{}\u{a0}kg", number(arm.mass_kg)),
        ),
        (
            "Base tilt",
            format!("{}° from upright", minus(format!("{:.1}", arm.tilt_deg))),
        ),
        (
            "Setpoint range",
            format!(
                "{} to {}",
                setpoint(arm.drive, arm.setpoint_lo),
                setpoint(arm.drive, arm.setpoint_hi)
            ),
        ),
        (
            "Tendons",
            format!(
                "{}\u{a0}mm off the spine, pretension {}\u{a0}N, at most {}\u{a0}N",
                number(arm.offset_m * 1e3),
                number(arm.pretension_n),
                number(arm.max_tension_n)
            ),
        ),
        (
            "Stiffness number γ",
            format!("{} (bending stiffness over m g L²)", number(arm.gamma)),
        ),
    ];
    rows.iter().fold(String::new(), |mut html, (term, value)| {
        let _ = write!(html, "<div><dt>{term}</dt><dd>{}</dd></div>", escape(value));
        html
    })
}

/// The judgement on top of the page.
pub(super) fn verdict(verdict: &Verdict) -> String {
    let items = |lines: &[String]| {
        lines.iter().fold(String::new(), |mut html, line| {
            let _ = write!(html, "<li>{}</li>", escape(line));
            html
        })
    };
    let stretches = verdict
        .stretches
        .iter()
        .fold(String::new(), |mut html, stretch| {
            let _ = write!(
                html,
                "<div class=\"stretch\"><h3>Branch {}: {}</h3><ul>{}</ul>",
                stretch.branch,
                escape(&stretch.setpoints),
                items(&stretch.limits)
            );
            if !stretch.by_payload.is_empty() {
                let _ = write!(
                    html,
                    "<p class=\"by-payload\">When the payload is known: {}.</p>",
                    escape(&stretch.by_payload.join("; "))
                );
            }
            html + "</div>"
        });
    format!(
        "<p class=\"summary\">{}</p><p>{}</p><div class=\"stretches\">{stretches}</div>\
         <h3>What would help</h3><ul class=\"helps\">{}</ul>",
        escape(&verdict.summary),
        escape(&verdict.holds_for),
        items(&verdict.helps)
    )
}

/// Where the two-coordinate model must not be trusted.
pub(super) fn cross_check(data: &ReportData) -> String {
    if data.disagreements.is_empty() {
        return format!(
            "<p>At all {} setpoints compared it has the rod's stable rest states and no others, and its barriers are within a \
             factor of two of the rod's.</p>",
            data.frames.len()
        );
    }
    let rows = data
        .disagreements
        .iter()
        .fold(String::new(), |mut html, row| {
            let _ = write!(
                html,
                "<tr><th scope=\"row\">{}</th><td data-label=\"Setpoints\">{}</td><td data-label=\"Two-coordinate model\">{}</td></tr>",
                escape(&row.branch),
                escape(&row.setpoints),
                escape(&row.what)
            );
            html
        });
    format!(
        "<table class=\"stack\"><thead><tr><th scope=\"col\">Rest state</th><th scope=\"col\">Setpoints</th>\
         <th scope=\"col\">Two-coordinate model</th></tr></thead><tbody>{rows}</tbody></table>\
         <p>Compared at {} setpoints.</p>",
        data.frames.len()
    )
}

/// What the crosses of figure 1 mean; nothing when there are none.
pub(super) fn false_friends(data: &ReportData) -> String {
    if data.false_friends.is_empty() {
        return String::new();
    }
    "<p class=\"note\"><strong>Crosses (×)</strong> are rest states that the two-coordinate model of the arm believes in \
     and the full rod does not have: the arm would not stay there. They are not in the table; do not plan with them.</p>"
        .to_string()
}

/// Where each branch runs and where it may be used.
pub(super) fn branches(data: &ReportData) -> String {
    let drive = data.arm.drive;
    let mut html = String::new();
    for branch in &data.branches {
        let kind = match (branch.stable, branch.index) {
            (true, _) => "stable",
            (false, 1) => "unstable, a pass",
            (false, _) => "unstable, a hilltop",
        };
        let runs = match (branch.points.first(), branch.points.last()) {
            (Some(first), Some(last)) => format!(
                "{}, {}, to {}, {}",
                setpoint(drive, first.setpoint),
                end(branch.from_end),
                setpoint(drive, last.setpoint),
                end(branch.to_end)
            ),
            _ => "–".to_string(),
        };
        let used = if branch.stretches.is_empty() {
            "not to be used".to_string()
        } else {
            let stretches: Vec<String> = branch
                .stretches
                .iter()
                .map(|stretch| used_stretch(drive, stretch))
                .collect();
            stretches.join("<br>")
        };
        let _ = write!(
            html,
            "<tr><th scope=\"row\">{}</th><td data-label=\"Kind\">{kind}</td><td data-label=\"Setpoints\">{runs}</td>\
             <td data-label=\"May be used\">{used}</td><td data-label=\"Lowest barrier\">{}</td>\
             <td data-label=\"Weakest return stiffness\">{}</td></tr>",
            branch.number,
            lowest(branch, "J", |point| point.barrier_j),
            lowest(branch, "N\u{a0}m/rad", |point| point.restoring_n_m_per_rad),
        );
    }
    html
}

fn end(end: End) -> &'static str {
    match end {
        End::Range => "end of range",
        End::Fold => "fold",
    }
}

fn used_stretch(drive: Drive, stretch: &Stretch) -> String {
    format!(
        "{} <small>({})</small> to {} <small>({})</small>",
        setpoint(drive, stretch.from),
        escape(&stretch.from_why),
        setpoint(drive, stretch.to),
        escape(&stretch.to_why)
    )
}

/// The least value over the usable stretches, with its unit; a dash when the branch has none.
fn lowest(branch: &Branch, unit: &str, of: impl Fn(&super::BranchPoint) -> Option<f64>) -> String {
    branch
        .points
        .iter()
        .filter(|point| {
            branch
                .stretches
                .iter()
                .any(|part| part.from <= point.setpoint && point.setpoint <= part.to)
        })
        .filter_map(of)
        .filter(|value| value.is_finite())
        .min_by(f64::total_cmp)
        .map_or("–".to_string(), |least| {
            format!("{}\u{a0}{unit}", number(least))
        })
}

/// Rows of the table of limits.
pub(super) fn limits(limits: &[Limit]) -> String {
    limits.iter().fold(String::new(), |mut html, limit| {
        let _ = write!(
            html,
            "<tr><th scope=\"row\">{}</th><td data-label=\"Limit\">{}</td><td data-label=\"Meaning\">{}</td></tr>",
            escape(&limit.what),
            escape(&limit.value),
            escape(&limit.note)
        );
        html
    })
}

/// Rows of the table of errors.
pub(super) fn accuracy(errors: &[WorstError]) -> String {
    errors.iter().fold(String::new(), |mut html, error| {
        let _ = write!(
            html,
            "<tr><th scope=\"row\">{}</th><td>{}{}{}</td></tr>",
            escape(&error.quantity),
            number(error.value),
            if error.unit.starts_with('°') {
                ""
            } else {
                " "
            },
            escape(&error.unit)
        );
        html
    })
}

/// What ties the page to one table.
pub(super) fn identity(data: &ReportData) -> String {
    format!(
        "<div><dt>Arm fingerprint</dt><dd><code>{}</code></dd></div>\
         <div><dt>Table size</dt><dd>{} bytes</dd></div>\
         <div><dt>Curvature modes</dt><dd>{}</dd></div>\
         <div><dt>Energy scale m g L</dt><dd>{} J</dd></div>",
        escape(&data.arm.fingerprint),
        data.table_bytes,
        data.arm.modes,
        number(data.arm.energy_scale_j)
    )
}
