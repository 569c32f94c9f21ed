//! The program brings its own entry point.

fn main() {
    println!("cargo:rustc-link-arg-bins=-nostartfiles");
    // For memcpy and its relatives, which the compiler calls.
    println!("cargo:rustc-link-arg-bins=-lc");
    println!("cargo:rerun-if-changed=build.rs");
}
