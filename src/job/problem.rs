//! What is wrong with a job file: every problem at once, each with its place.

use super::keys::quoted_list;
use annotate_snippets::renderer::DecorStyle;
use annotate_snippets::{AnnotationKind, Level, Renderer, Snippet};
use std::fmt;
use std::ops::Range;

/// Problems printed in full; the rest of a long list is counted.
const SHOWN_MAX: usize = 25;
/// Longest part of a line shown around a place, bytes on either side.
const CONTEXT_BYTES: usize = 120;

/// What is wrong at one place.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum Cause {
    /// The text is not TOML there.
    #[error("{what}")]
    Syntax {
        /// What the TOML reader says.
        what: String,
    },
    /// The file is larger than a job file can be.
    #[error("the file has {bytes} bytes; a job file has at most {max} bytes")]
    TooLarge {
        /// Size of the file, bytes.
        bytes: usize,
        /// Largest size, bytes.
        max: usize,
    },
    /// The file holds no key at all.
    #[error("the file is empty: it has no [set] with a title and no [skin] with times")]
    Empty,
    /// No such table.
    #[error("there is no table `{key}`; the tables are {allowed}")]
    UnknownTable {
        /// As typed.
        key: String,
        /// The tables there are.
        allowed: String,
    },
    /// No such key.
    #[error("there is no key `{key}`; the keys of this table are {allowed}")]
    UnknownKey {
        /// Dotted, as typed.
        key: String,
        /// The keys there are.
        allowed: String,
    },
    /// A key that must be given is absent.
    #[error("`{key}` is missing; give it {allowed}")]
    Missing {
        /// Dotted.
        key: String,
        /// What is allowed.
        allowed: String,
    },
    /// The value is of another type.
    #[error("`{key}` is {found}, but must be {allowed}")]
    WrongType {
        /// Dotted.
        key: String,
        /// The type found and the value.
        found: String,
        /// What is allowed.
        allowed: String,
    },
    /// The value has the right type but is not allowed.
    #[error("`{key}` is {value}, but must be {allowed}")]
    OutOfRange {
        /// Dotted.
        key: String,
        /// As typed.
        value: String,
        /// What is allowed.
        allowed: String,
    },
    /// Two keys do not go together.
    #[error("`{key}` is {value} mm, but must be at most {limit:.4} mm: {rule} `{other}` ({other_value} mm)")]
    Together {
        /// Dotted.
        key: String,
        /// mm.
        value: f64,
        /// Largest value allowed, mm.
        limit: f64,
        /// `a quarter of`.
        rule: &'static str,
        /// The other key, dotted.
        other: String,
        /// Its value, mm.
        other_value: f64,
    },
    /// A name nobody knows.
    #[error("`{key}` is {value}, which is not known; known are {}", quoted_list(.known))]
    UnknownName {
        /// Dotted.
        key: String,
        /// As typed.
        value: String,
        /// The names there are.
        known: Vec<String>,
    },
    /// The same entry twice in a list.
    #[error("`{key}` has {value} twice; each may stand there once")]
    Double {
        /// Dotted.
        key: String,
        /// As typed.
        value: String,
    },
}

/// One problem and its place.
#[derive(Clone, Debug, PartialEq)]
pub struct Problem {
    /// Bytes of the text it is about.
    pub span: Range<usize>,
    /// Line, from 1.
    pub line: usize,
    /// Column in characters, from 1.
    pub column: usize,
    /// What is wrong.
    pub cause: Cause,
    /// The nearest known key or name.
    pub nearest: Option<String>,
}

/// All problems of one job file; prints itself with the lines they stand on.
#[derive(Clone, Debug, PartialEq)]
pub struct JobErrors {
    file_name: String,
    text: String,
    problems: Vec<Problem>,
}

impl JobErrors {
    /// Orders the problems by place.
    pub(super) fn new(file_name: &str, text: &str, mut problems: Vec<Problem>) -> Self {
        problems.sort_by_key(|p| (p.span.start, p.span.end));
        Self { file_name: file_name.to_owned(), text: text.to_owned(), problems }
    }

    /// The problems, in the order of the file.
    #[must_use]
    pub fn problems(&self) -> &[Problem] {
        &self.problems
    }

    /// The messages as text, with terminal colours when `colour`.
    #[must_use]
    pub fn render(&self, colour: bool) -> String {
        let renderer = if colour { Renderer::styled() } else { Renderer::plain() };
        let renderer = renderer.decor_style(DecorStyle::Ascii);
        let mut out = String::new();
        for p in self.problems.iter().take(SHOWN_MAX) {
            // A line of its own with the place: annotate-snippets cuts long lines and then counts columns
            // from the cut.
            let (source, span) = window(&self.text, &p.span);
            let place = format!("{}:{}:{}", self.file_name, p.line, p.column);
            let label = p.nearest.as_ref().map(|n| format!("did you mean `{n}`?"));
            let mut annotation = AnnotationKind::Primary.span(span);
            if let Some(label) = &label {
                annotation = annotation.label(label);
            }
            let title = format!("{place}: {}", p.cause);
            let group = Level::ERROR
                .primary_title(title)
                .element(Snippet::source(source).line_start(p.line).annotation(annotation));
            out.push_str(&renderer.render(&[group]));
            out.push('\n');
        }
        let hidden = self.problems.len().saturating_sub(SHOWN_MAX);
        if hidden > 0 {
            out.push_str(&format!("... and {hidden} more problems\n"));
        }
        out
    }
}

impl fmt::Display for JobErrors {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.render(false).trim_end())
    }
}

impl std::error::Error for JobErrors {}

/// Line and column, both from 1 and in characters, of a byte of the text.
pub(super) fn line_column(text: &str, byte: usize) -> (usize, usize) {
    let byte = floor_boundary(text, byte);
    let before = &text[..byte];
    let start = before.rfind('\n').map_or(0, |i| i + 1);
    (before.matches('\n').count() + 1, before[start..].chars().count() + 1)
}

/// The line of `span`'s start (cut around it when long), and the span within that piece.
fn window<'t>(text: &'t str, span: &Range<usize>) -> (&'t str, Range<usize>) {
    let start = floor_boundary(text, span.start);
    let line_start = text[..start].rfind('\n').map_or(0, |i| i + 1);
    let line_end = text[start..].find('\n').map_or(text.len(), |i| start + i);
    let from = floor_boundary(text, line_start.max(start.saturating_sub(CONTEXT_BYTES)));
    let to = floor_boundary(text, line_end.min(start + CONTEXT_BYTES));
    let end = floor_boundary(text, span.end).clamp(start, to);
    (&text[from..to], start - from..end - from)
}

/// The greatest character boundary not after `byte`.
pub(super) fn floor_boundary(text: &str, byte: usize) -> usize {
    let mut b = byte.min(text.len());
    while !text.is_char_boundary(b) {
        b -= 1;
    }
    b
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn places_count_characters_not_bytes() {
        let text = "a\nüü x";
        assert_eq!(line_column(text, text.find('x').unwrap()), (2, 4));
        assert_eq!(line_column(text, 0), (1, 1));
        assert_eq!(line_column(text, 3), (2, 1)); // the middle of a character
        assert_eq!(line_column("", 9), (1, 1));
    }

    #[test]
    fn a_long_line_is_cut_around_the_place() {
        let text = format!("first\n{}X{}", "é".repeat(1000), "ü".repeat(1000));
        let at = text.find('X').unwrap();
        let (piece, span) = window(&text, &(at..at + 1));
        assert!(piece.len() <= 2 * CONTEXT_BYTES + 4);
        assert_eq!(&piece[span], "X");
    }
}
