//! One thing wrong in a configuration, shown where it stands.

use std::fmt;
use std::ops::Range;

/// What was read, why it cannot be and what would do, with its place.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Mistake {
    /// Name of the file.
    pub file: String,
    /// Line, counted from 1.
    pub line: usize,
    /// Column, counted from 1 in characters.
    pub column: usize,
    /// The words.
    pub what: String,
    text: String,
    width: usize,
}

impl Mistake {
    /// At a span of bytes of the text.
    #[must_use]
    pub fn at(file: &str, text: &str, span: &Range<usize>, what: String) -> Self {
        let start = (0..=span.start.min(text.len())).rev().find(|&it| text.is_char_boundary(it)).unwrap_or(0);
        let before = &text[..start];
        let line_start = before.rfind('\n').map_or(0, |it| it + 1);
        let line_text = text[line_start..].lines().next().unwrap_or("").to_owned();
        let column = before[line_start..].chars().count() + 1;
        let left = line_text.chars().count().saturating_sub(column - 1).max(1);
        let end =
            (start..=span.end.min(text.len())).rev().find(|&it| text.is_char_boundary(it)).unwrap_or(start);
        let width = text[start..end].lines().next().unwrap_or("").chars().count().clamp(1, left);
        Self {
            file: file.into(),
            line: before.matches('\n').count() + 1,
            column,
            what,
            text: line_text,
            width,
        }
    }
}

impl fmt::Display for Mistake {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self { file, line, column, what, text, width } = self;
        writeln!(f, "{file}:{line}:{column}: {what}")?;
        writeln!(f, "{line:>5} | {text}")?;
        write!(f, "      | {:>1$}{2}", "", column - 1, "^".repeat(*width))
    }
}
