//! `table-gen why` as a script reads it: the keys, the units, what has no bound, and what is wrong input.

use host_tests::program::table_gen;
use host_tests::reference::{list, parse};
use serde_json::Value;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

const WAND: &str = include_str!("../../examples/greenhouse-wand/arm.toml");

/// Requirement names with their units and the limits of the wand's file.
const REQUIREMENTS: [(&str, &str, f64); 7] = [
    ("knock_n_s", "N s", 0.010),
    ("payload_reserve_kg", "kg", 0.010),
    ("stiffness_reserve_percent", "%", 10.0),
    ("setpoint_reserve_deg", "deg", 4.0),
    ("tension_factor", "", 1.3),
    ("strain", "", 0.004),
    ("clearance_m", "m", 0.02),
];

fn example(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("../examples/{name}/arm.toml"))
}

fn why(arm_file: &Path, options: &[&str]) -> Output {
    Command::new(table_gen())
        .arg("why")
        .arg(arm_file)
        .args(options)
        .output()
        .expect("table-gen runs")
}

#[track_caller]
fn answer(arm_file: &Path, setpoint: [&str; 2]) -> Value {
    let [option, value] = setpoint;
    let output = why(arm_file, &[option, value, "--json"]);
    let message = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{message}");
    parse(&String::from_utf8(output.stdout).expect("JSON is UTF-8"))
}

/// The keys of an object in alphabetical order.
#[track_caller]
fn keys(value: &Value) -> Vec<&str> {
    let mut keys: Vec<&str> = value
        .as_object()
        .expect("an object")
        .keys()
        .map(String::as_str)
        .collect();
    keys.sort_unstable();
    keys
}

fn text<'a>(value: &'a Value, key: &str) -> &'a str {
    value[key]
        .as_str()
        .unwrap_or_else(|| panic!("{key} is text: {value}"))
}

fn real(value: &Value, key: &str) -> f64 {
    value[key]
        .as_f64()
        .unwrap_or_else(|| panic!("{key} is a number: {value}"))
}

fn requirement<'a>(branch: &'a Value, name: &str) -> &'a Value {
    let mut all = list(&branch["requirements"]).iter();
    all.find(|one| one["name"] == name)
        .unwrap_or_else(|| panic!("{name} is judged"))
}

/// The keys, whatever the values.
#[track_caller]
fn assert_shape(answer: &Value) {
    assert_eq!(keys(answer), ["branches", "nearest_usable", "setpoint"]);
    for branch in list(&answer["branches"]) {
        assert_eq!(
            keys(branch),
            ["branch", "mean_angle_rad", "requirements", "usable"]
        );
        let mut all_hold = true;
        for one in list(&branch["requirements"]) {
            assert_eq!(
                keys(one),
                ["corner", "holds", "limit", "name", "unit", "value"]
            );
            let holds = one["holds"].as_bool().expect("yes or no");
            all_hold &= holds;
            if one["value"].is_null() {
                assert!(holds, "what has no bound holds: {one}");
                assert!(one["corner"].is_null(), "no bound, no corner: {one}");
            } else {
                let (value, limit) = (real(one, "value"), real(one, "limit"));
                let met = if one["name"] == "strain" {
                    value <= limit
                } else {
                    value >= limit
                };
                assert!(met || !holds, "it does not hold: {one}");
                assert_eq!(
                    keys(&one["corner"]),
                    ["payload_kg", "stiffness_percent", "tilt_deg"]
                );
            }
        }
        assert_eq!(
            branch["usable"], all_hold,
            "usable means that all hold: {branch}"
        );
    }
}

#[test]
fn usable_setpoint_of_the_wand() {
    let answer = answer(&example("greenhouse-wand"), ["--hold-tip-deg", "40"]);
    assert_shape(&answer);
    assert_eq!(real(&answer, "setpoint"), 40f64.to_radians());
    assert_eq!(answer["nearest_usable"], answer["setpoint"]);
    let branches = list(&answer["branches"]);
    assert_eq!(branches.len(), 1, "beyond the fold there is one");
    let branch = &branches[0];
    assert_eq!(branch["branch"], 2);
    assert_eq!(branch["usable"], true);
    assert!(real(branch, "mean_angle_rad") > 1.0);
    let names: Vec<&str> = list(&branch["requirements"])
        .iter()
        .map(|one| text(one, "name"))
        .collect();
    for (name, unit, limit) in REQUIREMENTS {
        assert_eq!(
            names.iter().filter(|other| **other == name).count(),
            1,
            "{name} once"
        );
        let one = requirement(branch, name);
        assert_eq!(text(one, "unit"), unit, "{name}");
        assert!((real(one, "limit") - limit).abs() < 1e-12, "{name}: {one}");
        let corner = &one["corner"];
        if corner.is_object() {
            assert!(
                (0.05..=0.075).contains(&real(corner, "payload_kg")),
                "{one}"
            );
            assert!(
                real(corner, "stiffness_percent").abs() <= 10.0 + 1e-9,
                "{one}"
            );
            assert!(real(corner, "tilt_deg").abs() <= 2.0 + 1e-9, "{one}");
        }
    }
    assert_eq!(names.len(), REQUIREMENTS.len(), "no other: {names:?}");
    // The stiffest reserve counts from the softest corner.
    let stiffness = requirement(branch, "stiffness_reserve_percent");
    if stiffness["corner"].is_object() {
        assert!((real(&stiffness["corner"], "stiffness_percent") + 10.0).abs() < 1e-9);
    }
}

#[test]
fn unusable_setpoint_names_the_nearest_usable() {
    // Straight up both shapes may be lost in some corner.
    let answer = answer(&example("greenhouse-wand"), ["--hold-tip-deg", "-1"]);
    assert_shape(&answer);
    let branches = list(&answer["branches"]);
    assert_eq!(branches.len(), 2, "left and right");
    let right = branches
        .iter()
        .find(|b| real(b, "mean_angle_rad") > 0.0)
        .expect("one to the right");
    assert_eq!(right["usable"], false);
    let reserve = requirement(right, "setpoint_reserve_deg");
    assert_eq!(reserve["holds"], false);
    assert!(real(reserve, "value") < 4.0);
    let left = branches
        .iter()
        .find(|b| real(b, "mean_angle_rad") < 0.0)
        .expect("one to the left");
    let nearest = real(&answer, "nearest_usable");
    let off = (nearest + 1f64.to_radians()).abs();
    match left["usable"].as_bool() {
        Some(true) => assert_eq!(off, 0.0),
        _ => assert!(off > 0.0 && off < 0.2, "nearest usable {nearest} rad"),
    }
}

/// A hanging arm: nothing it can fall over from, so there are no bounds.
#[test]
fn reserves_without_bound_are_null() {
    let answer = answer(&example("tank-lance"), ["--hold-tip-deg", "0"]);
    assert_shape(&answer);
    for branch in list(&answer["branches"]) {
        let knock = requirement(branch, "knock_n_s");
        assert!(knock["value"].is_null(), "there is one shape: {knock}");
        assert_eq!(knock["holds"], true);
    }
}

#[test]
fn wrong_questions_are_refused() {
    let wand = example("greenhouse-wand");
    let dir = tempfile::tempdir().expect("a temporary directory");
    let bad = dir.path().join("bad.toml");
    std::fs::write(
        &bad,
        WAND.replacen("knock_n_s = 0.010", "knock_n_s = -0.010", 1),
    )
    .expect("written");
    let absent = dir.path().join("absent.toml");
    let questions: [(&Path, &[&str], &[&str]); 6] = [
        (
            &wand,
            &["--couple-n-m", "0.01", "--json"],
            &["--couple-n-m", "--hold-tip-deg"],
        ),
        (&wand, &["--hold-tip-deg", "130"], &["130", "-120", "120"]),
        (
            &wand,
            &["--hold-tip-deg", "nan"],
            &["--hold-tip-deg", "nan"],
        ),
        (&wand, &[], &["--hold-tip-deg"]),
        (
            &bad,
            &["--hold-tip-deg", "0"],
            &["bad.toml:42:13", "found -0.010"],
        ),
        (&absent, &["--hold-tip-deg", "0"], &["absent.toml"]),
    ];
    for (arm_file, options, said) in questions {
        let output = why(arm_file, options);
        let message = String::from_utf8(output.stderr).expect("messages are UTF-8");
        assert_eq!(output.status.code(), Some(2), "{options:?}: {message}");
        for part in said {
            assert!(message.contains(part), "{part:?} is not in:\n{message}");
        }
        assert!(output.stdout.is_empty(), "an answer was printed");
    }
}
