//! What a person sees when the arm file is wrong.

use std::{fmt, ops::Range};

use annotate_snippets::{AnnotationKind, Level, Renderer, Snippet};

/// Columns of the rendered message: fits a terminal beside an editor.
const WIDTH: usize = 100;
/// Longest piece of the file repeated inside a sentence (characters).
const LONGEST_QUOTE: usize = 60;
/// Longest sentence of a message (characters).
const LONGEST_SENTENCE: usize = 400;

/// Why an arm file was not accepted: one message for the person who wrote it.
///
/// `Display` gives the message without colours; it begins with `error:` and needs no frame.
#[derive(Clone, Debug, PartialEq)]
pub struct ArmFileError(Kind);

#[derive(Clone, Debug, PartialEq)]
enum Kind {
    /// There is no text to point into.
    Unreadable {
        file_name: String,
        reason: String,
    },
    Fault(Box<Fault>),
}

/// A fault at one place of the text.
#[derive(Clone, Debug, PartialEq)]
struct Fault {
    file_name: String,
    /// The line of the fault, without its line end.
    line: String,
    /// Counted from 1.
    line_number: usize,
    /// Bytes of `line` at fault.
    span: Range<usize>,
    what: String,
    found: String,
    allowed: String,
}

impl ArmFileError {
    pub(super) fn unreadable(file_name: &str, reason: impl Into<String>) -> Self {
        Self(Kind::Unreadable {
            file_name: printable(file_name, LONGEST_SENTENCE),
            reason: reason.into(),
        })
    }

    /// The fault is at bytes `span` of `text`; of a span over several lines the first is shown.
    pub(super) fn at(
        (file_name, text): (&str, &str),
        span: Range<usize>,
        what: &str,
        found: &str,
        allowed: &str,
    ) -> Self {
        let start = char_boundary(text, span.start);
        let line_start = text[..start].rfind('\n').map_or(0, |at| at + 1);
        let rest = &text[line_start..];
        let line = rest.split('\n').next().unwrap_or_default();
        let line = line.strip_suffix('\r').unwrap_or(line);
        let in_line = |at: usize| char_boundary(line, at.saturating_sub(line_start));
        let from = in_line(start);
        Self(Kind::Fault(Box::new(Fault {
            file_name: printable(file_name, LONGEST_SENTENCE),
            line: line.to_owned(),
            line_number: text[..line_start].matches('\n').count() + 1,
            span: from..in_line(span.end).max(from),
            what: printable(what, LONGEST_SENTENCE),
            found: printable(found, LONGEST_QUOTE),
            allowed: printable(allowed, LONGEST_SENTENCE),
        })))
    }

    /// The message for people: `file:line:column`, the line with the place marked, the value found
    /// and what is allowed. `color` adds terminal colours.
    pub fn render(&self, color: bool) -> String {
        let renderer = if color {
            Renderer::styled()
        } else {
            Renderer::plain()
        };
        let renderer = renderer.term_width(WIDTH);
        match &self.0 {
            Kind::Unreadable { file_name, reason } => {
                let title = Level::ERROR.primary_title(format!("{file_name}: {reason}"));
                renderer.render(&[annotate_snippets::Group::with_title(title)])
            }
            Kind::Fault(fault) => {
                let place = AnnotationKind::Primary
                    .span(fault.span.clone())
                    .label(fault.found.as_str());
                let source = Snippet::source(fault.line.as_str())
                    .path(fault.file_name.as_str())
                    .line_start(fault.line_number)
                    .annotation(place);
                let group = Level::ERROR
                    .primary_title(fault.what.as_str())
                    .element(source);
                let group = if fault.allowed.is_empty() {
                    group
                } else {
                    group.element(
                        Level::NOTE
                            .with_name("allowed")
                            .message(fault.allowed.as_str()),
                    )
                };
                renderer.render(&[group])
            }
        }
    }
}

impl fmt::Display for ArmFileError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.render(false))
    }
}

impl std::error::Error for ArmFileError {}

/// The last boundary between characters at or before byte `at`.
fn char_boundary(text: &str, at: usize) -> usize {
    let at = at.min(text.len());
    (0..=at)
        .rev()
        .find(|&at| text.is_char_boundary(at))
        .unwrap_or(0)
}

/// `text` on one line, without characters that would act on a terminal, cut at `longest` characters.
fn printable(text: &str, longest: usize) -> String {
    let shown = |c: char| if c.is_control() { ' ' } else { c };
    let mut line: String = text.chars().take(longest).map(shown).collect();
    if text.chars().nth(longest).is_some() {
        line.push_str(" ...");
    }
    line
}
