//! Bad arm files at the command line: exit code 2, one message with the place, nothing written.

use std::{
    fs,
    path::{Path, PathBuf},
    process::{Command, Output},
    sync::OnceLock,
};

const GOOD: &str = include_str!("../../examples/greenhouse-wand/arm.toml");

/// The `table-gen` program, built in the same target directory and profile as this test.
///
/// `cargo test` alone does not build another package's program.
fn table_gen() -> &'static Path {
    static PROGRAM: OnceLock<PathBuf> = OnceLock::new();
    PROGRAM.get_or_init(|| {
        let this = std::env::current_exe().expect("this test runs from a file");
        let profile_dir = this.ancestors().nth(2).expect("target/PROFILE/deps/this");
        let target_dir = profile_dir.parent().expect("target/PROFILE");
        let mut cargo = Command::new(env!("CARGO"));
        cargo
            .args([
                "build",
                "--locked",
                "--package",
                "table-gen",
                "--bin",
                "table-gen",
            ])
            .args(["--message-format", "json-render-diagnostics"])
            .args([
                "--manifest-path",
                concat!(env!("CARGO_MANIFEST_DIR"), "/../Cargo.toml"),
            ])
            .arg("--target-dir")
            .arg(target_dir);
        if profile_dir.ends_with("release") {
            cargo.arg("--release");
        }
        let output = cargo.output().expect("cargo runs");
        let errors = String::from_utf8_lossy(&output.stderr);
        assert!(
            output.status.success(),
            "table-gen does not build:\n{errors}"
        );
        String::from_utf8_lossy(&output.stdout)
            .lines()
            .filter_map(|line| serde_json::from_str::<serde_json::Value>(line).ok())
            .find_map(|message| message["executable"].as_str().map(PathBuf::from))
            .expect("cargo names the program it built")
    })
}

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
            "bad.toml:30:17",
            "found [120.0, -120.0]",
            "lowest below highest",
        ],
    );
}

#[test]
fn missing_section() {
    let no_payload = with("[payload]\nmass_kg = 0.060\n", "");
    refused(&no_payload, &["bad.toml:", "section [payload] is missing"]);
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
