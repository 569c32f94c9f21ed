//! The core has no panic path: a program that calls all of it, and whose panic handler cannot be linked, links.

use std::path::Path;
use std::process::{Command, Output};

/// The symbol that the panic handler of `no-panic` refers to and nobody defines.
const UNDEFINED: &str = "a_panic_path_is_left_in_firmware_core";

/// Builds `no-panic` in a target directory of its own, so that it does not wait for the build that runs this test.
fn build(features: &[&str]) -> Output {
    let manifest = Path::new(env!("CARGO_MANIFEST_DIR")).join("no-panic/Cargo.toml");
    // `CARGO_TARGET_TMPDIR` lies in the target directory of the running build, wherever that was put.
    let target = Path::new(env!("CARGO_TARGET_TMPDIR")).join("no-panic");
    Command::new(std::env::var_os("CARGO").unwrap_or_else(|| "cargo".into()))
        .args(["build", "--release", "--manifest-path"])
        .arg(manifest)
        .arg("--target-dir")
        .arg(target)
        .args(features)
        // Flags meant for the outer build, such as coverage, would bring panic paths of their own.
        .env_remove("RUSTFLAGS")
        .env_remove("CARGO_ENCODED_RUSTFLAGS")
        .output()
        .expect("cargo runs")
}

// One test, one after the other: both builds share a target directory.
#[test]
fn links_without_panic_paths_and_only_then() {
    let plain = build(&[]);
    let messages = String::from_utf8_lossy(&plain.stderr);
    assert!(plain.status.success(), "a panic path is left:\n{messages}");

    let broken = build(&["--features", "deliberate-panic"]);
    let messages = String::from_utf8_lossy(&broken.stderr);
    assert!(
        !broken.status.success() && messages.contains(UNDEFINED),
        "a deliberate panic went unnoticed:\n{messages}"
    );
}
