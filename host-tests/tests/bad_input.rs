//! Bad arm files at the command line: exit code 2, one message with the place, nothing written.

use host_tests::program::table_gen;
use std::{
    fs,
    path::{Path, PathBuf},
    process::{Command, Output},
};

const GOOD: &str = include_str!("../../examples/greenhouse-wand/arm.toml");

fn build(arm_file: &Path, out: &Path) -> Output {
    Command::new(table_gen())
        .arg("build")
        .arg(arm_file)
        .arg("--out")
        .arg(out)
        .output()
        .expect("table-gen runs")
}

/// Builds from `text` and expects a refusal that holds every one of `said`.
#[track_caller]
fn refused(text: &[u8], said: &[&str]) {
    let dir = tempfile::tempdir().expect("a temporary directory");
    let arm_file = dir.path().join("bad.toml");
    fs::write(&arm_file, text).expect("the bad file is written");
    refused_file(dir.path(), &arm_file, said);
}

#[track_caller]
fn refused_file(dir: &Path, arm_file: &Path, said: &[&str]) {
    let before = files(dir);
    let output = build(arm_file, &dir.join("out"));
    let message = String::from_utf8(output.stderr).expect("messages are UTF-8");
    assert_eq!(
        output.status.code(),
        Some(2),
        "exit code, with message:\n{message}"
    );
    for part in said {
        assert!(message.contains(part), "{part:?} is not in:\n{message}");
    }
    assert_eq!(
        message.matches("error: ").count(),
        1,
        "one error, not:\n{message}"
    );
    assert!(
        !message.contains('\u{1b}'),
        "colours outside a terminal:\n{message}"
    );
    assert_eq!(files(dir), before, "something was written");
}

/// Everything in `dir`, by name.
fn files(dir: &Path) -> Vec<PathBuf> {
    let entries = fs::read_dir(dir).expect("the directory is there");
    let mut files: Vec<_> = entries
        .map(|entry| entry.expect("an entry").path())
        .collect();
    files.sort();
    files
}

fn with(from: &str, to: &str) -> Vec<u8> {
    assert!(GOOD.contains(from), "the example does not hold {from:?}");
    GOOD.replacen(from, to, 1).into_bytes()
}

/// Without this, every refusal below could be for another reason.
#[test]
fn the_unchanged_file_builds() {
    let dir = tempfile::tempdir().expect("a temporary directory");
    let arm_file = dir.path().join("arm.toml");
    fs::write(&arm_file, GOOD).expect("the file is written");
    let out = dir.path().join("out");
    let output = build(&arm_file, &out);
    let message = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{message}");
    for name in ["table.bin", "table.json", "report.html"] {
        assert!(out.join(name).is_file(), "{name} is missing");
    }
}

#[test]
fn syntax() {
    refused(
        &with("= 0.60", "= "),
        &["bad.toml:5:12", "length_m =", "allowed: a number"],
    );
}

#[test]
fn unknown_key() {
    refused(
        &with("length_m", "lenght_m"),
        &["bad.toml:5:1", "lenght_m", "allowed: length_m"],
    );
}

#[test]
fn wrong_type() {
    refused(
        &with("0.60", "\"0.60\""),
        &["bad.toml:5:12", "found \"0.60\"", "allowed: a number"],
    );
}

#[test]
fn not_a_number() {
    refused(
        &with("0.60", "nan"),
        &["bad.toml:5:12", "found nan", "allowed: 0.01 to 20 m"],
    );
}

#[test]
fn negative_mass() {
    refused(
        &with("0.060", "-0.060"),
        &["bad.toml:18:11", "found -0.060", "0 to 200 kg"],
    );
}

#[test]
fn knots_out_of_order() {
    let knots = with("= 0.0213", "= [[0, 0.02], [0.6, 0.02], [0.4, 0.02]]");
    refused(
        &knots,
        &["bad.toml:6:52", "found 0.4", "allowed: s above 0.6"],
    );
}

#[test]
fn range_inverted() {
    let range = with("[-120.0, 120.0]", "[120.0, -120.0]");
    refused(
        &range,
        &[
            "bad.toml:32:17",
            "found [120.0, -120.0]",
            "lowest below highest",
        ],
    );
}

#[test]
fn missing_section() {
    let from = GOOD.find("[payload]").expect("the section");
    let to = GOOD.find("[base]").expect("the section after it");
    let no_payload = [&GOOD[..from], &GOOD[to..]].concat();
    refused(
        no_payload.as_bytes(),
        &["bad.toml:", "section [payload] is missing"],
    );
}

#[test]
fn payload_outside_its_range() {
    refused(
        &with("[0.050, 0.075]", "[0.065, 0.075]"),
        &["bad.toml:19:12", "[0.065, 0.075]"],
    );
}

#[test]
fn tolerance_out_of_range() {
    refused(
        &with("stiffness_percent = 10.0", "stiffness_percent = -1.0"),
        &["bad.toml:39:21", "found -1.0", "allowed: 0 to 90"],
    );
}

#[test]
fn requirement_of_the_other_drive() {
    refused(
        &with("setpoint_reserve_deg = 4.0", "setpoint_reserve_n_m = 4.0"),
        &[
            "bad.toml:45:",
            "setpoint_reserve_n_m",
            "setpoint_reserve_deg",
        ],
    );
}

#[test]
fn requirement_below_its_range() {
    refused(
        &with("tension_factor = 1.3", "tension_factor = 0.9"),
        &["bad.toml:46:18", "found 0.9", "allowed: 1 to"],
    );
}

#[test]
fn keep_out_without_extent() {
    refused(
        &with("radius_m = 0.06", "radius_m = 0.0"),
        &["bad.toml:55:", "found 0.0", "disc.radius_m"],
    );
}

#[test]
fn keep_out_without_direction() {
    refused(
        &with("normal = [0.0, 1.0]", "normal = [0.0, 0.0]"),
        &["bad.toml:51:", "normal", "found [0.0, 0.0]"],
    );
}

#[test]
fn not_text() {
    refused(b"name = \"\xff\"", &["bad.toml", "not UTF-8"]);
}

#[test]
fn absent() {
    let dir = tempfile::tempdir().expect("a temporary directory");
    let arm_file = dir.path().join("absent.toml");
    refused_file(dir.path(), &arm_file, &["absent.toml", "cannot be read"]);
}

/// A refusal leaves an earlier table as it was.
#[test]
fn earlier_table_is_kept() {
    let dir = tempfile::tempdir().expect("a temporary directory");
    let arm_file = dir.path().join("bad.toml");
    fs::write(&arm_file, with("0.60", "600")).expect("the bad file is written");
    let out = dir.path().join("out");
    fs::create_dir(&out).expect("a directory");
    fs::write(out.join("table.bin"), b"earlier").expect("a file");
    refused_file(dir.path(), &arm_file, &["bad.toml:5:12"]);
    assert_eq!(files(&out), [out.join("table.bin")]);
    assert_eq!(
        fs::read(out.join("table.bin")).expect("still there"),
        b"earlier"
    );
}
