//! Faults of a scenario file, with their place.

use std::fmt;
use std::ops::Range;

/// Why a scenario file is not accepted: one message with file, line and column.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ScenarioError(String);

impl fmt::Display for ScenarioError {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        f.write_str(&self.0)
    }
}

impl std::error::Error for ScenarioError {}

impl ScenarioError {
    /// A fault of the file as a whole.
    pub(super) fn of_file(file_name: &str, what: impl fmt::Display) -> Self {
        Self(format!("{file_name}: {what}"))
    }
}

/// The text being read.
pub(super) struct Page<'a> {
    pub file_name: &'a str,
    pub text: &'a str,
}

impl Page<'_> {
    /// A fault at the bytes `span` of the text.
    pub fn fault(&self, span: Range<usize>, what: impl fmt::Display) -> ScenarioError {
        let start = (0..=span.start.min(self.text.len()))
            .rev()
            .find(|&at| self.text.is_char_boundary(at))
            .unwrap_or(0);
        let before = &self.text[..start];
        let line_start = before.rfind('\n').map_or(0, |at| at + 1);
        let line = before.matches('\n').count() + 1;
        let column = before[line_start..].chars().count() + 1;
        let shown = self.text[line_start..].lines().next().unwrap_or_default();
        ScenarioError(format!(
            "{}:{line}:{column}: {what}\n  | {}",
            self.file_name,
            shown.trim_end()
        ))
    }

    /// What the TOML reader found.
    pub fn toml_fault(&self, error: &toml::de::Error) -> ScenarioError {
        let message = error.message().trim().replace('\n', "; ");
        self.fault(error.span().unwrap_or(0..0), message)
    }
}
