//! The page of a rehearsal: one file that opens without a network, in the looks of the report.

use super::closed_loop::{Moment, Run};
use super::stage::Stage;
use super::timeline::Who;
use super::verdict;
use super::words::{degrees, mode_in_words, mode_name, setpoint};
use firmware_core::{Drive, Payload};
use serde_json::{Value, json};
use table_gen::arm_file::Region;
use table_gen::report::looks;

const PAGE: &str = include_str!("page/rehearsal.html");
const STYLE: &str = include_str!("page/rehearsal.css");
const SCRIPT: &str = concat!(
    "\"use strict\";\n(() => {\n",
    include_str!("page/rehearsal.js"),
    "})();",
);

/// The whole page as HTML. The same run gives the same bytes.
pub fn render(stage: &Stage, run: &Run) -> String {
    let looks = looks();
    let scenario = &run.scenario;
    fill(&[
        ("arm", escape(&stage.arm.name)),
        ("name", escape(&capital(&scenario.name))),
        ("shows", escape(&scenario.shows)),
        ("style", looks.style.to_string()),
        ("own_style", STYLE.to_string()),
        ("verdict", verdict_html(run)),
        ("facts", facts(stage, run)),
        ("timeline", timeline(run)),
        ("data", embedded(&data(stage, run))),
        ("d3", looks.drawing.to_string()),
        ("script", SCRIPT.to_string()),
    ])
}

/// Replaces every `{{name}}` of the template in one pass, so that inserted text is never searched again.
fn fill(parts: &[(&str, String)]) -> String {
    let mut page = String::new();
    let mut rest = PAGE;
    while let Some((before, after)) = rest.split_once("{{") {
        page.push_str(before);
        let (name, tail) = after
            .split_once("}}")
            .expect("the template closes what it opens");
        let part = parts.iter().find(|(known, _)| *known == name);
        page.push_str(&part.expect("every part of the template is given").1);
        rest = tail;
    }
    page + rest
}

fn escape(text: &str) -> String {
    text.replace('&', "&amp;")
        .replace('<', "&lt;")
        .replace('>', "&gt;")
        .replace('"', "&quot;")
}

fn capital(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or(String::new(), |first| {
        first.to_uppercase().chain(letters).collect()
    })
}

fn verdict_html(run: &Run) -> String {
    let unmet = verdict::unmet(run);
    let (class, summary) = if unmet.is_empty() {
        ("summary", "Went as expected.")
    } else {
        ("summary unmet", "Did not go as expected:")
    };
    let items: String = unmet
        .iter()
        .map(|line| format!("<li>{}</li>", escape(line)))
        .collect();
    let list = if items.is_empty() {
        String::new()
    } else {
        format!("<ul>{items}</ul>")
    };
    let branch = run
        .last
        .branch
        .map_or(String::new(), |branch| format!(" on branch {branch}"));
    let end = format!(
        "At the end the firmware {}{branch}.",
        mode_in_words(run.last.mode)
    );
    format!(
        "<p class=\"{class}\">{summary}</p>{list}<p>{}</p>",
        escape(&end)
    )
}

fn facts(stage: &Stage, run: &Run) -> String {
    let (real, extremes) = (&run.scenario.real, &run.extremes);
    let told = match run.scenario.payload {
        Payload::Unknown => "not known".to_string(),
        Payload::Known(kg) => format!("{:.0} g", 1e3 * kg),
    };
    let drive = stage.table(true).limits().drive;
    let clearance = extremes
        .clearance_m
        .map_or("no keep-out regions".into(), |clearance_m| {
            format!(
                "{:.0} mm from a keep-out region ({:.0} mm required)",
                1e3 * clearance_m,
                1e3 * stage.arm.require.clearance_m
            )
        });
    let percent = |factor: f64| format!("{:.0} %", 100.0 * factor);
    let rows = [
        ("Payload carried", format!("{:.0} g", 1e3 * real.payload_kg)),
        ("Payload told", told),
        (
            "Stiffness",
            format!("{} of nominal", percent(real.stiffness_factor)),
        ),
        (
            "Damping",
            format!("{} of nominal", percent(real.damping_factor)),
        ),
        (
            "Guides keep",
            format!("{} of the tension", percent(real.friction)),
        ),
        (
            "Angle sensors",
            format!(
                "noise {:.2} deg, bias {:.2} deg, age {} ms",
                real.angle_noise_rad.to_degrees(),
                real.angle_bias_rad.to_degrees(),
                real.delay_ticks
            ),
        ),
        (
            "Begins",
            format!(
                "branch {} at {}",
                run.scenario.branch,
                setpoint(drive, run.scenario.setpoint)
            ),
        ),
        (
            "Planned crossing",
            if run.planned {
                "in the table"
            } else {
                "none in the table"
            }
            .into(),
        ),
        ("Fastest tip", format!("{:.2} m/s", extremes.tip_speed_m_s)),
        ("Largest couple", format!("{:.3} N m", extremes.couple_n_m)),
        ("Highest tension", format!("{:.1} N", extremes.tension_n)),
        (
            "Largest strain",
            format!(
                "{:.2} % ({:.2} % allowed)",
                100.0 * extremes.strain,
                100.0 * stage.arm.spine.allowed_strain
            ),
        ),
        ("Nearest", clearance),
        ("Tip at the end", degrees(run.tip_rad)),
    ];
    rows.iter()
        .map(|(name, value)| {
            format!(
                "<div><dt>{}</dt><dd>{}</dd></div>",
                escape(name),
                escape(value)
            )
        })
        .collect()
}

fn timeline(run: &Run) -> String {
    let item = |line: &super::timeline::Line| {
        let (class, who) = match line.who {
            Who::Caller => ("caller", "The caller"),
            Who::Arm => ("arm", "The arm"),
            Who::Firmware => ("firmware", "The firmware"),
        };
        format!(
            "<li><button type=\"button\"><time>{:.2} s</time><span class=\"{class}\">{who} {}</span></button></li>\n",
            line.at_s,
            escape(&line.text)
        )
    };
    run.timeline.iter().map(item).collect()
}

fn data(stage: &Stage, run: &Run) -> Value {
    let limits = stage.table(true).limits();
    let keep_out: Vec<Value> = stage
        .arm
        .keep_out
        .iter()
        .map(|keep_out| match keep_out.region {
            Region::HalfPlane { point_m, normal } => {
                json!({ "name": keep_out.name, "point_m": point_m, "normal": normal })
            }
            Region::Disc { centre_m, radius_m } => {
                json!({ "name": keep_out.name, "centre_m": centre_m, "radius_m": radius_m })
            }
        })
        .collect();
    let column = |of: fn(&Moment) -> f64| -> Vec<Value> {
        run.moments
            .iter()
            .map(|moment| rounded(of(moment)))
            .collect()
    };
    // Tenths of a millimetre are finer than any screen.
    let shapes: Vec<Vec<Value>> = run
        .moments
        .iter()
        .map(|moment| {
            moment
                .shape_m
                .iter()
                .flatten()
                .map(|m| json!((1e4 * m).round() / 10.0))
                .collect()
        })
        .collect();
    json!({
        "drive": match limits.drive { Drive::HeldTip => "held-tip", Drive::AppliedCouple => "applied-couple" },
        "limits": { "pretension_n": rounded(limits.pretension_n.into()), "max_tension_n": rounded(limits.max_tension_n.into()) },
        "keep_out": keep_out,
        "lines": run.timeline.iter().map(|line| rounded(line.at_s)).collect::<Vec<_>>(),
        "moments": {
            "time_s": column(|m| m.time_s),
            "tip_rad": column(|m| m.tip_rad),
            "mid_rad": column(|m| m.mid_rad),
            "tip_measured_rad": column(|m| m.tip_measured_rad),
            "mid_measured_rad": column(|m| m.mid_measured_rad),
            "setpoint": column(|m| m.setpoint),
            "couple_n_m": column(|m| m.couple_n_m),
            "commanded_n_m": column(|m| m.commanded_n_m),
            "tension_a_n": column(|m| m.tensions_n[0]),
            "tension_b_n": column(|m| m.tensions_n[1]),
            "mode": run.moments.iter().map(|m| mode_name(m.mode)).collect::<Vec<_>>(),
            "branch": run.moments.iter().map(|m| m.branch).collect::<Vec<_>>(),
            "shape_mm": shapes,
        },
    })
}

/// Five significant digits; what is not finite becomes null.
fn rounded(value: f64) -> Value {
    format!("{value:.4e}")
        .parse::<f64>()
        .ok()
        .filter(|value| value.is_finite())
        .map_or(Value::Null, Value::from)
}

/// As JSON that cannot end the element it stands in.
fn embedded(value: &Value) -> String {
    value
        .to_string()
        .replace('<', "\\u003c")
        .replace('\u{2028}', "\\u2028")
        .replace('\u{2029}', "\\u2029")
}
