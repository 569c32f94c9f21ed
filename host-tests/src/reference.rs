//! Reading of the reference values in `reference/`.
//!
//! Numbers there are JSON numbers, or strings when they have more digits than a double, or multiples
//! of pi.

use serde_json::Value;
use std::f64::consts::PI;

/// The content of a reference file.
pub fn parse(text: &str) -> Value {
    serde_json::from_str(text).unwrap_or_else(|error| panic!("a reference file: {error}"))
}

/// The rows of a table; there must be some, or the test that walks them would check nothing.
#[track_caller]
pub fn rows(table: &Value) -> &[Value] {
    let rows = table["rows"].as_array().expect("a table has rows");
    assert!(!rows.is_empty(), "a table without rows checks nothing");
    rows
}

/// The entries of a list, at least one.
#[track_caller]
pub fn list(value: &Value) -> &[Value] {
    let entries = value.as_array().expect("a list");
    assert!(!entries.is_empty(), "an empty list checks nothing");
    entries
}

/// A number: `0.5`, `"0.5"`, `"pi"`, `"pi/2"`, `"2pi"` or `"2*pi"`.
#[track_caller]
pub fn number(value: &Value) -> f64 {
    if let Some(number) = value.as_f64() {
        return number;
    }
    let text = value.as_str().expect("a number, or one in a string");
    match text {
        "pi" => PI,
        "pi/2" => PI / 2.0,
        "2pi" | "2*pi" => 2.0 * PI,
        _ => text.parse().expect("a number in a string"),
    }
}
