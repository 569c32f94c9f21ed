//! The `table-gen` program, run as a person would.

use serde_json::Value;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::OnceLock;

/// The program, built in the target directory and profile of the test that asks for it.
///
/// `cargo test` alone does not build another package's program.
pub fn table_gen() -> &'static Path {
    static PROGRAM: OnceLock<PathBuf> = OnceLock::new();
    PROGRAM.get_or_init(|| {
        let this = std::env::current_exe().expect("this test runs from a file");
        let profile_dir = this.ancestors().nth(2).expect("target/PROFILE/deps/this");
        let target_dir = profile_dir.parent().expect("target/PROFILE");
        let mut cargo = Command::new(env!("CARGO"));
        cargo
            .args(["build", "--locked", "--package", "table-gen"])
            .args(["--bin", "table-gen"])
            .args(["--message-format", "json-render-diagnostics"])
            .arg("--manifest-path")
            .arg(concat!(env!("CARGO_MANIFEST_DIR"), "/../Cargo.toml"))
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
            .filter_map(|line| serde_json::from_str::<Value>(line).ok())
            .find_map(|message| message["executable"].as_str().map(PathBuf::from))
            .expect("cargo names the program it built")
    })
}
