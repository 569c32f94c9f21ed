//! The report as a browser shows it: a copy with a probe at both ends runs in headless Chromium, at the width of a
//! telephone and of a desk, and tells what it drew.

use std::{
    fs,
    path::Path,
    process::{Command, Stdio},
    sync::OnceLock,
    time::{Duration, Instant},
};

use host_tests::program::table_gen;
use serde::Deserialize;

/// Narrowest and widest page looked at, CSS pixels; `frames.html` has the same.
const WIDTHS: [f64; 2] = [400.0, 1200.0];
/// Type below this is hard to read on a telephone, CSS pixels.
const SMALLEST_TEXT_PX: f64 = 12.0;
/// The printable width the figures are drawn for, CSS pixels: A4 less 15 mm on either side.
const PAPER_WIDTH_PX: f64 = 680.4;
/// All shapes at one scale have the arm's length; chords of a drawn curve lose less than this.
const LENGTH_SPREAD: f64 = 0.01;
/// Marks sit on the energy curve within about half their size, px.
const OFF_CURVE_PX: f64 = 4.0;
/// Chromium takes about three seconds.
const PATIENCE: Duration = Duration::from_secs(120);

#[derive(Deserialize)]
struct Seen {
    width: f64,
    wrong: Vec<String>,
    requests: Vec<String>,
    first: Look,
    moved: Vec<Look>,
    paper: Look,
    after_paper: Look,
}

#[derive(Deserialize)]
struct Look {
    frame: Option<usize>,
    scroll_width: f64,
    setpoint: String,
    value_text: String,
    shapes: Vec<Shape>,
    cursors: Vec<String>,
    off_curve: Vec<f64>,
    rows: usize,
    usable: Vec<String>,
    worst: Vec<Shape>,
    worst_words: Vec<String>,
    regions: Vec<Region>,
    region_names: Vec<String>,
    runs: Vec<f64>,
    strip_rows: usize,
    verdict: String,
    verdict_height: f64,
    svgs: Vec<Svg>,
}

#[derive(Deserialize)]
struct Region {
    name: String,
    width: f64,
    height: f64,
}

#[derive(Deserialize)]
struct Shape {
    d: String,
    length: f64,
    dashed: bool,
}

#[derive(Deserialize)]
struct Svg {
    figure: String,
    panel: String,
    limits: usize,
    role: Option<String>,
    name: Option<String>,
    width: f64,
    marks: usize,
    broken: bool,
    smallest_text_px: f64,
    text_outside: Vec<String>,
}

/// The report of the greenhouse wand, made once.
fn report() -> &'static str {
    static PAGE: OnceLock<String> = OnceLock::new();
    PAGE.get_or_init(|| {
        let dir = tempfile::tempdir().expect("a temporary directory");
        let output = Command::new(table_gen())
            .arg("build")
            .arg(concat!(
                env!("CARGO_MANIFEST_DIR"),
                "/../examples/greenhouse-wand/arm.toml"
            ))
            .arg("--out")
            .arg(dir.path())
            .output()
            .expect("table-gen runs");
        assert!(
            output.status.success(),
            "table-gen build failed:\n{}",
            String::from_utf8_lossy(&output.stderr)
        );
        fs::read_to_string(dir.path().join("report.html")).expect("report.html was written")
    })
}

/// The data the page was drawn from.
fn embedded() -> &'static serde_json::Value {
    static DATA: OnceLock<serde_json::Value> = OnceLock::new();
    DATA.get_or_init(|| {
        let (_, after) = report()
            .split_once("id=\"report-data\">")
            .expect("the page holds its data");
        let (data, _) = after.split_once("</script>").expect("the data ends");
        serde_json::from_str(data).expect("the data is JSON")
    })
}

/// What the probe saw at both widths, narrow first.
fn seen() -> &'static [Seen] {
    static SEEN: OnceLock<Vec<Seen>> = OnceLock::new();
    SEEN.get_or_init(|| {
        let dir = tempfile::tempdir().expect("a temporary directory");
        let copy = report()
            .replacen(
                "<head>",
                concat!(
                    "<head><script>",
                    include_str!("../report-page/first.js"),
                    "</script>"
                ),
                1,
            )
            .replacen(
                "</body>",
                concat!(
                    "<script>",
                    include_str!("../report-page/last.js"),
                    "</script></body>"
                ),
                1,
            );
        fs::write(dir.path().join("copy.html"), copy).expect("the copy is written");
        let frames = dir.path().join("frames.html");
        fs::write(&frames, include_str!("../report-page/frames.html"))
            .expect("the frames are written");
        let dom = chromium(&frames, dir.path());
        let results = dom
            .split_once("<pre id=\"results\">")
            .and_then(|(_, after)| after.split_once("</pre>"))
            .map(|(text, _)| text)
            .expect("Chromium shows the frames");
        let text = results
            .replace("&lt;", "<")
            .replace("&gt;", ">")
            .replace("&nbsp;", "\u{a0}")
            .replace("&amp;", "&");
        let values: Vec<serde_json::Value> = serde_json::from_str(&text)
            .unwrap_or_else(|_| panic!("the probe did not report from both frames: {text:?}"));
        let mut seen: Vec<Seen> = values
            .into_iter()
            .map(|value| {
                let wrong = value["wrong"].to_string();
                serde_json::from_value(value)
                    .unwrap_or_else(|problem| panic!("{problem}; the page reported {wrong}"))
            })
            .collect();
        seen.sort_by(|a, b| a.width.total_cmp(&b.width));
        seen
    })
}

/// Opens `page` in headless Chromium and gives the document it ends with.
fn chromium(page: &Path, dir: &Path) -> String {
    let dom = dir.join("dom.html");
    let mut profile = std::ffi::OsString::from("--user-data-dir=");
    profile.push(dir.join("profile"));
    let mut child = Command::new("chromium")
        .args([
            "--headless=new",
            "--no-sandbox",
            "--disable-gpu",
            "--disable-quic",
            "--no-first-run",
            "--disable-background-networking",
            "--disable-component-update",
            "--disable-sync",
            "--window-size=1700,1000",
            "--virtual-time-budget=10000",
            "--dump-dom",
        ])
        .arg(profile)
        .arg(page)
        .stdin(Stdio::null())
        .stdout(fs::File::create(&dom).expect("the output file is made"))
        .stderr(Stdio::null())
        .spawn()
        .unwrap_or_else(|problem| {
            panic!("chromium does not start ({problem}): run host-tests/check once, it installs what the tests need")
        });
    let begun = Instant::now();
    let status = loop {
        if let Some(status) = child.try_wait().expect("chromium can be waited for") {
            break status;
        }
        if begun.elapsed() > PATIENCE {
            child.kill().expect("chromium can be stopped");
            panic!("chromium gave no answer in {PATIENCE:?}");
        }
        std::thread::sleep(Duration::from_millis(50));
    };
    assert!(status.success(), "chromium failed: {status}");
    fs::read_to_string(dom).expect("chromium wrote the document")
}

fn looks(seen: &Seen) -> impl Iterator<Item = &Look> {
    std::iter::once(&seen.first).chain(&seen.moved)
}

#[test]
fn no_script_errors_and_nothing_from_outside() {
    for seen in seen() {
        assert_eq!(seen.wrong, Vec::<String>::new(), "at {} px", seen.width);
        assert_eq!(seen.requests, Vec::<String>::new(), "at {} px", seen.width);
    }
    for opening in ["src=", "href=", "url(http", "url(//", "@import", "<link"] {
        let places: Vec<_> = report().match_indices(opening).collect();
        assert!(places.is_empty(), "the page holds {opening}: {places:?}");
    }
}

#[test]
fn every_figure_is_drawn_and_named() {
    let figures = [
        "fig-rest",
        "fig-drive",
        "fig-drive",
        "fig-shape",
        "fig-energy",
        "fig-reserves",
        "fig-reserves",
        "fig-reserves",
        "fig-reserves",
        "fig-reserves",
        "fig-reserves",
        "fig-reserves",
        "fig-strips",
    ];
    for seen in seen() {
        for look in looks(seen) {
            let drawn: Vec<&str> = look.svgs.iter().map(|svg| svg.figure.as_str()).collect();
            assert_eq!(drawn, figures, "at {} px", seen.width);
            for svg in &look.svgs {
                assert!(svg.marks > 0, "{} is empty", svg.figure);
                assert!(!svg.broken, "{} holds a NaN or infinity", svg.figure);
                assert_eq!(svg.role.as_deref(), Some("img"), "{}", svg.figure);
                assert!(
                    svg.name.as_ref().is_some_and(|name| name.len() > 20),
                    "{} has no name for a screen reader",
                    svg.figure
                );
            }
        }
    }
}

#[test]
fn the_slider_moves_the_shapes_the_cursor_and_the_words() {
    for seen in seen() {
        for pair in seen.moved.windows(2) {
            let drawn =
                |look: &Look| -> Vec<String> { look.shapes.iter().map(|s| s.d.clone()).collect() };
            assert_ne!(drawn(&pair[0]), drawn(&pair[1]));
            assert_ne!(pair[0].setpoint, pair[1].setpoint);
            assert_ne!(pair[0].value_text, pair[1].value_text);
            assert_eq!(
                pair[0].cursors.len(),
                11,
                "one in each plot over the setpoint"
            );
            for (before, after) in pair[0].cursors.iter().zip(&pair[1].cursors) {
                assert_ne!(before, after);
            }
        }
    }
}

#[test]
fn the_shapes_are_the_states_of_the_data_to_scale() {
    for seen in seen() {
        let mut lengths = Vec::new();
        for look in looks(seen) {
            let frame = look.frame.expect("the slider stands somewhere");
            let states = embedded()["frames"][frame]["states"]
                .as_array()
                .expect("states");
            let unstable = states.iter().filter(|state| state["stable"] == false);
            assert_eq!(look.shapes.len(), states.len(), "frame {frame}");
            assert_eq!(look.rows, states.len(), "frame {frame}");
            assert_eq!(
                look.shapes.iter().filter(|shape| shape.dashed).count(),
                unstable.count(),
                "frame {frame}"
            );
            lengths.extend(look.shapes.iter().map(|shape| shape.length));
        }
        let longest = lengths.iter().copied().fold(f64::MIN, f64::max);
        let shortest = lengths.iter().copied().fold(f64::MAX, f64::min);
        assert!(
            (longest - shortest).abs() < LENGTH_SPREAD * longest,
            "drawn lengths from {shortest} to {longest} px"
        );
    }
    // The wand flops: at the first setpoint shown there is more than one way to rest.
    let first = &seen()[0].first;
    assert!(first.shapes.iter().filter(|shape| !shape.dashed).count() >= 2);
    assert!(first.shapes.iter().any(|shape| shape.dashed));
}

/// Numbers of a text as a person reads them.
fn numbers(text: &str) -> Vec<f64> {
    text.replace('−', "-")
        .split(|c: char| !(c.is_ascii_digit() || c == '.' || c == '-'))
        .filter_map(|part| part.trim_end_matches('.').parse().ok())
        .collect()
}

#[test]
fn the_verdict_says_where_what_ends_it_and_what_would_help() {
    let verdict = &seen()[1].first.verdict;
    let branches = embedded()["branches"].as_array().expect("branches");
    let summary = verdict
        .split_once("may be used")
        .and_then(|(_, after)| after.split_once("With any payload"))
        .expect("a sentence on where the arm may be used")
        .0;
    let said = numbers(summary);
    let mut stretches = 0;
    for stretch in branches
        .iter()
        .flat_map(|branch| branch["stretches"].as_array().expect("stretches"))
    {
        stretches += 1;
        for end in ["from", "to"] {
            let degrees = stretch[end].as_f64().expect("a number").to_degrees();
            assert!(
                said.iter().any(|said| (said - degrees).abs() <= 0.051),
                "{degrees} is missing from {summary:?}"
            );
        }
    }
    assert!(stretches > 0, "the wand is usable somewhere");
    for requirement in ["the clearance fails", "the setpoint reserve fails"] {
        assert!(verdict.contains(requirement), "{requirement:?} is missing");
    }
    assert!(verdict.contains("from bench"), "the region is named");
    assert!(verdict.contains("a spine 10\u{a0}% softer and the base tilted 2°"));
    let helps = verdict.split_once("What would help").expect("a heading").1;
    let changes = numbers(helps);
    // Two lines: percent, width now, width then.
    assert_eq!(changes.len(), 6, "{helps}");
    for line in changes.chunks(3) {
        assert!(line[2] > line[1] && line[1] > 0.0, "{helps}");
        assert_eq!(line[1], changes[1], "{helps}");
    }
    for seen in seen() {
        let most = if seen.width < 600.0 { 1000.0 } else { 700.0 };
        assert!(
            seen.first.verdict_height < most,
            "the verdict takes {} px at {} px",
            seen.first.verdict_height,
            seen.width
        );
    }
}

#[test]
fn every_reserve_has_its_limit_and_its_curves() {
    let reserves = embedded()["reserves"].as_array().expect("reserves");
    let keys: Vec<&str> = reserves
        .iter()
        .map(|reserve| reserve["key"].as_str().expect("a key"))
        .collect();
    assert_eq!(
        keys,
        [
            "knock_n_s",
            "payload_reserve_kg",
            "stiffness_reserve_percent",
            "setpoint_reserve_deg",
            "tension_factor",
            "strain",
            "clearance_m"
        ]
    );
    for seen in seen() {
        for look in looks(seen) {
            let drawn: Vec<&Svg> = look
                .svgs
                .iter()
                .filter(|svg| svg.figure == "fig-reserves")
                .collect();
            let panels: Vec<&str> = drawn.iter().map(|svg| svg.panel.as_str()).collect();
            assert_eq!(panels, keys);
            for svg in drawn {
                assert_eq!(svg.limits, 1, "{}", svg.panel);
                assert!(
                    svg.marks >= 2,
                    "one curve for each stable branch in {}",
                    svg.panel
                );
            }
        }
    }
}

#[test]
fn the_strips_show_where_each_requirement_holds() {
    let strips = embedded()["strips"].as_array().expect("strips");
    assert_eq!(strips.len(), 2, "the wand has two stable branches");
    let rows: Vec<&serde_json::Value> = strips
        .iter()
        .flat_map(|strip| strip["rows"].as_array().expect("rows"))
        .collect();
    let runs = |row: &serde_json::Value| row["runs"].as_array().expect("runs").len();
    for seen in seen() {
        for look in looks(seen) {
            assert_eq!(look.strip_rows, rows.len());
            assert_eq!(
                look.runs.len(),
                rows.iter().map(|row| runs(row)).sum::<usize>()
            );
            assert!(look.runs.iter().all(|width| *width > 1.0));
        }
    }
    // All together holds nowhere that one requirement fails, but for what interpolation leaves.
    for strip in strips {
        let rows = strip["rows"].as_array().expect("rows");
        let all = rows.iter().find(|row| row["kind"] == "all").expect("a row");
        let ends = |run: &serde_json::Value| {
            [0, 1].map(|end| run[end].as_f64().expect("a number").to_degrees())
        };
        for row in rows.iter().filter(|row| row["kind"] == "requirement") {
            for run in all["runs"].as_array().expect("runs") {
                let [from, to] = ends(run);
                let within = row["runs"].as_array().expect("runs").iter().any(|run| {
                    let [lower, upper] = ends(run);
                    lower <= from + 0.5 && to - 0.5 <= upper
                });
                assert!(within, "{} fails inside {from} to {to}", row["name"]);
            }
        }
    }
}

#[test]
fn the_keep_out_regions_and_the_worst_corners_are_drawn_to_scale() {
    for seen in seen() {
        for look in looks(seen) {
            assert_eq!(look.region_names, ["bench", "lamp"]);
            let names: Vec<&str> = look.regions.iter().map(|r| r.name.as_str()).collect();
            assert_eq!(names, ["bench", "lamp"]);
            let [bench, lamp] = [&look.regions[0], &look.regions[1]];
            let px_per_m = look.shapes[0].length / 0.6;
            for size in [lamp.width, lamp.height] {
                assert!(
                    (size - 0.12 * px_per_m).abs() < 0.03 * size,
                    "a lamp of {size} px at {px_per_m} px/m"
                );
            }
            assert!(bench.width > 3.0 * lamp.width && bench.height > 10.0);
            assert_eq!(look.worst.len(), look.worst_words.len());
            for worst in &look.worst {
                assert!(worst.dashed && !worst.d.is_empty());
                assert!((worst.length / px_per_m - 0.6).abs() < LENGTH_SPREAD * 0.6);
            }
            for words in &look.worst_words {
                assert!(words.contains("bench") || words.contains("lamp"), "{words}");
            }
        }
    }
    assert_eq!(seen()[0].first.worst.len(), 2, "one for each stable branch");
}

#[test]
fn the_states_table_says_why_a_state_may_not_be_used() {
    let mut answers = [0, 0];
    for look in looks(&seen()[1]) {
        let frame = look.frame.expect("the slider stands somewhere");
        let states = &embedded()["frames"][frame]["states"];
        for (place, said) in look.usable.iter().enumerate() {
            let state = &states[place];
            let why = state["why_not"].as_str();
            assert_eq!(state["usable"] == true, why.is_none());
            match why {
                None => assert_eq!(said, "yes"),
                Some(why) => assert_eq!(*said, format!("no: {why}")),
            }
            answers[usize::from(why.is_none())] += 1;
        }
    }
    assert!(answers.iter().all(|&count| count > 0), "{answers:?}");
}

#[test]
fn wells_and_passes_lie_on_the_energy_curve() {
    for seen in seen() {
        for look in looks(seen) {
            assert!(!look.off_curve.is_empty());
            for gap in &look.off_curve {
                assert!(
                    gap.abs() < OFF_CURVE_PX,
                    "a mark lies {gap} px off the curve at {}",
                    look.setpoint
                );
            }
        }
    }
}

#[test]
fn it_fits_a_telephone_a_desk_and_a_sheet() {
    let widths: Vec<f64> = seen().iter().map(|seen| seen.width).collect();
    assert_eq!(widths, WIDTHS);
    for seen in seen() {
        for look in looks(seen).chain([&seen.after_paper]) {
            assert!(
                look.scroll_width <= seen.width,
                "{} px of page in {} px at {}",
                look.scroll_width,
                seen.width,
                look.setpoint
            );
        }
        for look in looks(seen).chain([&seen.paper]) {
            for svg in &look.svgs {
                assert!(
                    svg.smallest_text_px >= SMALLEST_TEXT_PX,
                    "{} px of type in {} at {} px",
                    svg.smallest_text_px,
                    svg.figure,
                    seen.width
                );
                assert_eq!(
                    svg.text_outside,
                    Vec::<String>::new(),
                    "cut in {} at {} px",
                    svg.figure,
                    seen.width
                );
            }
        }
        for svg in &seen.paper.svgs {
            assert!(
                svg.width <= PAPER_WIDTH_PX,
                "{} is cut on paper",
                svg.figure
            );
        }
        assert_eq!(
            seen.paper.setpoint, seen.after_paper.setpoint,
            "the sheet says which setpoint it shows"
        );
    }
}

#[test]
fn the_cautions_are_all_there() {
    let cautions = report()
        .split_once("<h2>Cautions</h2>")
        .expect("a section of cautions")
        .1;
    for word in [
        "elastic and gravity energy",
        "tip whips",
        "broken tendon",
        "Spools",
        "not a safety function",
        "independent emergency stop",
        "competent person",
        "ISO 12100",
        "ISO 13850",
        "behind a guard",
        "reduced tension",
        "without payload",
    ] {
        assert!(cautions.contains(word), "{word:?} is missing");
    }
}
