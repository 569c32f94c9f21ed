//! The report page: one file that opens without a network and prints on A4.
//!
//! Text and tables are written here; the figures are drawn in the page by the scripts in `page/` from the same data,
//! embedded as JSON. Axes and curves come from a few D3 modules, bundled once by `vendor/vendor.sh` (run by hand, never
//! by the build).

mod cross_check;
mod data;
mod gather;
mod json;
mod margins;
mod text;
mod verdict;
mod words;

pub use data::{
    Arm, Branch, BranchPoint, Disagreement, Drive, End, FalseFriend, Fold, Frame, FrameState,
    Limit, ReportData, Reserve, ReserveCurve, RowKind, Stretch, Strip, StripRow, Verdict,
    VerdictStretch, WorstError, WorstShape,
};

pub use gather::gather;

const PAGE: &str = include_str!("page/report.html");
const STYLE: &str = include_str!("page/report.css");
const SCRIPT: &str = concat!(
    "\"use strict\";\n(() => {\n",
    include_str!("page/1_words.js"),
    include_str!("page/2_looks.js"),
    include_str!("page/3_plot.js"),
    include_str!("page/4_over_setpoint.js"),
    include_str!("page/5_keep_out.js"),
    include_str!("page/6_at_setpoint.js"),
    include_str!("page/7_reserves.js"),
    include_str!("page/8_slider.js"),
    "})();",
);
const D3: &str = include_str!("vendor/d3-subset.min.js");

/// What other pages of this project take over to look like this one.
#[derive(Clone, Copy, Debug)]
pub struct Looks {
    /// The style sheet.
    pub style: &'static str,
    /// The D3 modules, as a script that defines `d3`.
    pub drawing: &'static str,
}

/// The looks of the report page.
pub fn looks() -> Looks {
    Looks {
        style: STYLE,
        drawing: D3,
    }
}

/// The whole page as HTML.
///
/// Any data gives a page: names and sentences are escaped, numbers that are not finite show as a dash. The same data
/// gives the same bytes.
pub fn render(data: &ReportData) -> String {
    let parts = [
        ("title", text::escape(&data.arm.name)),
        ("style", STYLE.to_string()),
        ("verdict", text::verdict(&data.verdict)),
        ("cross_check", text::cross_check(data)),
        ("facts", text::facts(&data.arm)),
        ("false_friends", text::false_friends(data)),
        ("branches", text::branches(data)),
        ("limits", text::limits(&data.limits)),
        ("accuracy", text::accuracy(&data.worst_errors)),
        ("identity", text::identity(data)),
        ("data", json::embedded(data)),
        ("d3", D3.to_string()),
        ("script", SCRIPT.to_string()),
    ];
    fill(PAGE, &parts)
}

/// Replaces every `{{name}}` of the template in one pass, so that inserted text is never searched again.
fn fill(template: &str, parts: &[(&str, String)]) -> String {
    let room: usize = parts.iter().map(|(_, text)| text.len()).sum();
    let mut page = String::with_capacity(template.len() + room);
    let mut rest = template;
    while let Some((before, after)) = rest.split_once("{{") {
        page.push_str(before);
        let Some((name, tail)) = after.split_once("}}") else {
            page.push_str("{{");
            rest = after;
            continue;
        };
        if let Some((_, text)) = parts.iter().find(|(known, _)| *known == name) {
            page.push_str(text);
        }
        rest = tail;
    }
    page.push_str(rest);
    page
}

#[cfg(test)]
mod tests {
    use super::*;

    fn data_named(name: &str) -> ReportData {
        ReportData {
            arm: Arm {
                name: name.to_string(),
                drive: Drive::HeldTip,
                length_m: 0.6,
                gamma: 0.05,
                modes: 8,
                mass_kg: 0.1,
                energy_scale_j: 0.6,
                tilt_deg: 0.0,
                offset_m: 0.012,
                pretension_n: 3.0,
                max_tension_n: 60.0,
                setpoint_lo: -1.0,
                setpoint_hi: 1.0,
                fingerprint: "00ff".to_string(),
            },
            branches: vec![],
            folds: vec![],
            frames: vec![],
            false_friends: vec![FalseFriend {
                setpoint: f64::NAN,
                mean_angle_rad: 1.0,
            }],
            disagreements: vec![],
            verdict: Verdict::default(),
            reserves: vec![],
            strips: vec![],
            keep_out: vec![],
            limits: vec![],
            worst_errors: vec![],
            table_bytes: 0,
        }
    }

    #[test]
    fn a_hostile_name_stays_text() {
        let page = render(&data_named(
            "</script><script>alert(1)</script>{{data}}\u{2028}",
        ));
        let plain = render(&data_named("plain"));
        assert_eq!(
            page.matches("</script>").count(),
            plain.matches("</script>").count()
        );
        assert!(page.contains("&lt;/script&gt;&lt;script&gt;alert(1)"));
        assert_eq!(page.matches("\"table_bytes\"").count(), 1);
    }

    #[test]
    fn every_placeholder_is_known() {
        let names: Vec<&str> = PAGE
            .split("{{")
            .skip(1)
            .filter_map(|part| part.split_once("}}"))
            .map(|(name, _)| name)
            .collect();
        let marked: Vec<(&str, String)> =
            names.iter().map(|name| (*name, "@".to_string())).collect();
        assert_eq!(
            fill(PAGE, &marked).matches('@').count() - PAGE.matches('@').count(),
            names.len()
        );
        // `render` knows each of them: filling with nothing but its parts leaves no gap where text must stand.
        let page = render(&data_named("plain"));
        for mark in ["<title>plain", "00ff", "\"gamma\"", "scaleLinear", "@page"] {
            assert!(page.contains(mark), "{mark} is missing from the page");
        }
    }

    #[test]
    fn the_same_data_gives_the_same_bytes() {
        assert_eq!(render(&data_named("a")), render(&data_named("a")));
    }
}
