//! Rehearsals: the shipped scenarios on the greenhouse wand, the page, wrong scenario files, and drawn cases.

use firmware_core::supervisor::{Events, Mode};
use firmware_core::{SurveyBand, Table};
use host_tests::arms::crossing;
use host_tests::rehearsal::closed_loop::{Run, play};
use host_tests::rehearsal::random_cases::{Counts, monte_carlo};
use host_tests::rehearsal::scenario::{self, SHIPPED, Scenario};
use host_tests::rehearsal::stage::Stage;
use host_tests::rehearsal::timeline::Who;
use host_tests::rehearsal::{page, verdict};
use std::path::Path;
use std::process::Command;
use std::sync::OnceLock;
use table_gen::arm_file::{self, Arm};
use table_gen::table::crossings::{SliceCrossings, with_crossings};
use table_gen::table::tabulate;

const ARM: &str = include_str!("../../examples/greenhouse-wand/arm.toml");
const SEED: u64 = 1;

fn arm() -> Arm {
    arm_file::parse(ARM, "greenhouse-wand/arm.toml").expect("the example is good")
}

/// The wand with crossings about the upright, tuned by hand, wherever it may rest there: the planner takes longer than a test
/// may.
fn stage() -> &'static Stage {
    static STAGE: OnceLock<Stage> = OnceLock::new();
    STAGE.get_or_init(|| {
        let tabulation = tabulate(&arm(), &|_| {}).expect("the example can be tabulated");
        let table = Table::new(&tabulation.bytes).expect("a sound table");
        let crossings: Vec<SliceCrossings> = table
            .slices()
            .map(|slice| SliceCrossings {
                survey: SurveyBand { lo: 0.85, hi: 1.15 },
                crossings: [crossing(0, 2), crossing(2, 0)]
                    .into_iter()
                    .filter(|plan| slice.stretch_at(plan.to, plan.rest_setpoint).is_some())
                    .collect(),
            })
            .collect();
        let bytes = with_crossings(&tabulation.bytes, &crossings).expect("fits the format");
        Stage::of(&tabulation, bytes).expect("made from this arm")
    })
}

fn shipped() -> Vec<Scenario> {
    scenario::read_all(Path::new(SHIPPED), &arm()).expect("shipped scenarios are good")
}

fn named(name: &str) -> Scenario {
    let all = shipped();
    let found = all.into_iter().find(|scenario| scenario.name == name);
    found.expect("a shipped scenario")
}

fn played(scenario: &Scenario) -> Run {
    play(stage(), scenario, SEED).expect("can be played")
}

fn told(run: &Run) -> String {
    let lines: Vec<String> = run
        .timeline
        .iter()
        .map(|line| format!("{:.2} {:?} {}", line.at_s, line.who, line.text))
        .collect();
    lines.join("\n")
}

#[test]
fn every_shipped_scenario_goes_as_expected() {
    for scenario in shipped() {
        let run = played(&scenario);
        let unmet = verdict::unmet(&run);
        assert!(
            unmet.is_empty(),
            "{}: {unmet:?}\n{}",
            scenario.name,
            told(&run)
        );
    }
}

#[test]
fn every_shipped_scenario_goes_as_expected_without_plans() {
    for mut scenario in shipped()
        .into_iter()
        .filter(|s| s.expect_without_plan.is_some())
    {
        scenario.plans = false;
        let run = played(&scenario);
        assert!(!run.planned);
        let unmet = verdict::unmet(&run);
        assert!(
            unmet.is_empty(),
            "{}: {unmet:?}\n{}",
            scenario.name,
            told(&run)
        );
    }
}

#[test]
fn what_does_not_go_as_expected_is_said() {
    let mut scenario = named("move");
    scenario.expect.mode = Mode::Stopped;
    scenario.expect.branch = Some(2);
    scenario.expect.tip = Some((0.0, 0.01));
    scenario.expect.refused = vec!["no-plan"];
    scenario.expect.must = Events::TENDON_SLACK;
    scenario.expect.must_not = Events::REARMED;
    let unmet = verdict::unmet(&played(&scenario)).join("\n");
    for part in [
        "mode at the end: hold, expected stopped",
        "on branch 0, expected branch 2",
        "tip at the end: -",
        "crossing refused at the end: not at all, expected no-plan",
        "did not occur: tendon slack",
        "occurred and must not: armed",
    ] {
        assert!(unmet.contains(part), "{part} is missing from:\n{unmet}");
    }
}

#[test]
fn the_same_seed_gives_the_same_run() {
    let scenario = named("swing over");
    let pages = [1, 1, 2].map(|seed| {
        page::render(
            stage(),
            &play(stage(), &scenario, seed).expect("can be played"),
        )
    });
    assert!(pages[0] == pages[1]);
    assert!(pages[0] != pages[2]);
}

#[test]
fn the_timeline_tells_the_story_in_order() {
    let run = played(&named("knocked over and recovered"));
    let story = told(&run);
    let mut rest = story.as_str();
    for part in [
        "Caller switches the firmware on",
        "Firmware holds on branch 0",
        "Caller permits swinging",
        "Arm is knocked across the tip with 0.3 N s",
        "Firmware notes: knocked over",
        "Firmware rests and finds out",
        "Firmware swings the arm up",
        "Firmware brakes on the other side",
        "Firmware holds on branch 0",
    ] {
        let at = rest.find(part);
        rest = &rest[at.unwrap_or_else(|| panic!("{part} is missing or too early in:\n{story}"))..];
    }
    assert!(
        run.timeline
            .windows(2)
            .all(|pair| pair[0].at_s <= pair[1].at_s)
    );
    assert!(run.timeline.iter().any(|line| line.who == Who::Arm));
}

#[test]
fn the_page_stands_alone_and_holds_the_run() {
    let mut scenario = named("tendon broken");
    scenario.shows = "</script><script>alert(1)</script>{{data}}".into();
    let run = played(&scenario);
    let page = page::render(stage(), &run);
    for outside in [
        "src=",
        "href=",
        "@import",
        "url(http",
        "fetch(",
        "XMLHttpRequest",
    ] {
        assert!(!page.contains(outside), "{outside}");
    }
    assert!(!page.contains("<script>alert") && page.contains("&lt;script&gt;alert(1)"));
    let begin =
        page.find("id=\"rehearsal-data\">").expect("the data") + "id=\"rehearsal-data\">".len();
    let end = begin + page[begin..].find("</script>").expect("its end");
    let data: serde_json::Value = serde_json::from_str(&page[begin..end]).expect("JSON");
    let moments = &data["moments"];
    let count = run.moments.len();
    assert_eq!(count, 240);
    for column in [
        "time_s",
        "tip_rad",
        "mid_rad",
        "couple_n_m",
        "tension_a_n",
        "tension_b_n",
        "mode",
        "shape_mm",
    ] {
        assert_eq!(
            moments[column].as_array().map(Vec::len),
            Some(count),
            "{column}"
        );
    }
    let broken = |i: usize| moments["tension_a_n"][i].as_f64().expect("a number");
    assert!(broken(100) > 2.5 && broken(count - 1) == 0.0);
    assert_eq!(moments["mode"][count - 1], "stopped");
    assert_eq!(
        data["lines"].as_array().map(Vec::len),
        Some(run.timeline.len())
    );
    for line in &run.timeline {
        assert!(page.contains(&line.text), "{}", line.text);
    }
}

#[test]
fn wrong_scenario_files_are_told_with_their_place() {
    let good = "name = \"x\"\nshows = \"y\"\nlasts_s = 3.0\n[start]\nbranch = 0\nsetpoint_deg = 0.0\n[expect]\nmode = \"hold\"\n";
    scenario::parse(good, "x.toml", &arm()).expect("good");
    let cases = [
        (
            "[start]\n",
            "[start]\nbrunch = 1\n",
            "x.toml:5:1: unknown field `brunch`",
        ),
        (
            "lasts_s = 3.0",
            "lasts_s = 1e9",
            "x.toml:3:11: lasts_s = 1000000000; 0.1 to 600 s is allowed",
        ),
        (
            "lasts_s = 3.0",
            "lasts_s = nan",
            "x.toml:3:11: lasts_s = NaN",
        ),
        ("lasts_s = 3.0\n", "", "missing field `lasts_s`"),
        (
            "mode = \"hold\"",
            "mode = \"float\"",
            "x.toml:8:8: mode = \"float\"; allowed is hold, survey",
        ),
        (
            "mode = \"hold\"",
            "mode = \"hold\"\nmust = [\"knocked\"]",
            "x.toml:9:9: no event is called \"knocked\"; there are: knocked over",
        ),
        (
            "mode = \"hold\"",
            "mode = \"hold\"\nrefused = [\"maybe\"]",
            "x.toml:9:12: refused = \"maybe\"; allowed is not-permitted",
        ),
        (
            "setpoint_deg = 0.0",
            "setpoint_n_m = 0.0",
            "x.toml:6:16: the setpoint of this arm is given by setpoint_deg",
        ),
        (
            "setpoint_deg = 0.0\n",
            "",
            "x.toml:4:1: [start] lacks setpoint_deg",
        ),
        ("branch = 0", "branch = -1", "x.toml:5:10: branch = -1"),
        (
            "[start]",
            "[[do]]\nat_s = 4.0\nstop = true\n[start]",
            "x.toml:5:8: at_s = 4; 0 to 3 s is allowed",
        ),
        (
            "[start]",
            "[[do]]\nat_s = 1.0\n[start]",
            "x.toml:4:1: nothing happens here",
        ),
        (
            "[start]",
            "[[do]]\nat_s = 1.0\nfault = \"frozen\"\n[start]",
            "x.toml:6:9: fault needs sensor",
        ),
        (
            "[start]",
            "[[do]]\nat_s = 1.0\nsensor = \"tension-a\"\noffset_deg = 1.0\n[start]",
            "x.toml:7:14: sensor = \"tension-a\" needs fault or offset_n",
        ),
        (
            "[start]",
            "[[do]]\nat_s = 1.0\nbreak_tendon = \"c\"\n[start]",
            "x.toml:6:16: break_tendon = \"c\"; allowed is a, b",
        ),
        (
            "[start]",
            "[told]\npayload = \"heavy\"\n[start]",
            "x.toml:5:11: payload = \"heavy\"; only \"unknown\"",
        ),
        ("name = \"x\"", "name = \"x", "x.toml:1:"),
    ];
    for (from, to, message) in cases {
        let text = good.replacen(from, to, 1);
        let error = scenario::parse(&text, "x.toml", &arm())
            .expect_err(message)
            .to_string();
        assert!(error.contains(message), "expected {message:?} in:\n{error}");
    }
}

#[test]
fn the_program_ends_with_its_exit_codes() {
    let program = env!("CARGO_BIN_EXE_rehearse");
    let folder = tempfile::tempdir().expect("a folder");
    let arm_path = folder.path().join("arm.toml");
    std::fs::write(&arm_path, ARM).expect("written");
    let bad = folder.path().join("bad.toml");
    std::fs::write(&bad, "name = \"x\"\ncolour = 1\n").expect("written");
    let outcome = |arguments: &[&str]| {
        let output = Command::new(program)
            .arg(&arm_path)
            .args(arguments)
            .current_dir(&folder)
            .output()
            .expect("it runs");
        let text = [output.stdout, output.stderr].concat();
        (
            output.status.code(),
            String::from_utf8(text).expect("UTF-8"),
        )
    };
    let (code, text) = outcome(&["--scenario", bad.to_str().expect("UTF-8")]);
    assert!(
        code == Some(2) && text.contains("bad.toml:2:1: unknown field `colour`"),
        "{code:?} {text}"
    );
    let (code, text) = outcome(&["--scenario", "none such"]);
    assert!(
        code == Some(2) && text.contains("there are:"),
        "{code:?} {text}"
    );
    let (code, text) = outcome(&[]);
    assert!(
        code == Some(0) && text.contains("recovery refused"),
        "{code:?} {text}"
    );

    // Its own table, as a file: not tabulated again.
    let table = folder.path().join("table.bin");
    std::fs::write(&table, "not a table").expect("written");
    let with_table = ["--table", table.to_str().expect("UTF-8")];
    let (code, text) = outcome(&[&with_table[..], &["--all"]].concat());
    assert!(code == Some(2) && text.contains("table"), "{code:?} {text}");
}

#[test]
fn no_drawn_case_ends_on_the_wrong_side_or_breaks_a_limit_unnoticed() {
    let outcomes = monte_carlo(stage(), 40, SEED, &|| ()).expect("cases can be run");
    let counts = Counts::of(&outcomes);
    let rows = counts.rows();
    assert_eq!((counts.wrong_side, counts.under_way), (0, 0), "{rows:?}");
    // Crossings tuned by hand promise nothing about limits in the corners of the tolerances.
    let mut by_itself = outcomes.iter().filter(|outcome| !outcome.begun);
    assert!(
        by_itself.all(|outcome| outcome.unnoticed.is_none()),
        "{rows:?}"
    );
    assert!(counts.moves > 5 && counts.crossings_asked > 10, "{rows:?}");
    assert!(
        outcomes
            .iter()
            .any(|outcome| outcome.begun && outcome.on_wanted),
        "{rows:?}"
    );
}
