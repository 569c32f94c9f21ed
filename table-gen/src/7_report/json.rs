//! The report's data as JSON that can stand inside a page.

use serde_json::{Number, Value};

use super::ReportData;

/// The data as JSON with six significant digits, safe inside a `<script>` element.
///
/// Six digits are finer than any screen or sheet and halve the page. `<` is escaped so that no text of the arm file can
/// end the element; U+2028 and U+2029 because older script engines end a line at them.
pub(super) fn embedded(data: &ReportData) -> String {
    // The structs hold no map with other than text keys, the only thing that serialising into a value can refuse.
    let mut value = serde_json::to_value(data).unwrap_or(Value::Null);
    round(&mut value);
    value
        .to_string()
        .replace('<', "\\u003c")
        .replace('\u{2028}', "\\u2028")
        .replace('\u{2029}', "\\u2029")
}

fn round(value: &mut Value) {
    match value {
        Value::Number(number) if number.is_f64() => {
            let rounded = number
                .as_f64()
                .and_then(|exact| format!("{exact:.5e}").parse().ok())
                .and_then(Number::from_f64);
            if let Some(rounded) = rounded {
                *number = rounded;
            }
        }
        Value::Array(items) => items.iter_mut().for_each(round),
        Value::Object(fields) => fields.values_mut().for_each(round),
        _ => {}
    }
}
