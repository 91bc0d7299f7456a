//! One thing wrong in a configuration, shown where it stands.

use std::fmt;
use std::ops::Range;

use super::reader::printable;

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
    /// The part of the line that is shown, and the caret's place and width in it, in characters.
    shown: String,
    caret: usize,
    width: usize,
}

/// How much of a long line is shown, in characters.
const SHOWN: usize = 120;

impl Mistake {
    /// At a span of bytes of the text.
    #[must_use]
    pub fn at(file: &str, text: &str, span: &Range<usize>, what: String) -> Self {
        let start = boundary(text, span.start);
        let end = boundary(text, span.end).max(start);
        let (before, from_here) = text.split_at(start);
        let line_start = before.rfind('\n').map_or(0, |it| it + 1);
        let lead = before.get(line_start..).unwrap_or("");
        let line: Vec<char> = lead.chars().chain(from_here.chars().take_while(|it| *it != '\n')).collect();
        let column = lead.chars().count();
        let marked = text.get(start..end).unwrap_or("").lines().next().unwrap_or("").chars().count();
        let cut = if line.len() > SHOWN { column.saturating_sub(SHOWN / 2) } else { 0 };
        let shown: String = line.iter().skip(cut).take(SHOWN).collect();
        let caret = column - cut;
        Self {
            file: file.into(),
            line: before.matches('\n').count() + 1,
            column: column + 1,
            what,
            // A tab counts as one column: show it as one, so that the caret stands under what it means.
            shown: printable(&shown.replace('\t', " ").replace('\r', "")),
            caret,
            width: marked.min(SHOWN.saturating_sub(caret)).max(1),
        }
    }
}

/// The character boundary at or before a byte.
fn boundary(text: &str, at: usize) -> usize {
    (0..=at.min(text.len())).rev().find(|&it| text.is_char_boundary(it)).unwrap_or(0)
}

impl fmt::Display for Mistake {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self { file, line, column, what, shown, caret, width } = self;
        writeln!(f, "{file}:{line}:{column}: {what}")?;
        writeln!(f, "{line:>5} | {shown}")?;
        write!(f, "      | {:caret$}{}", "", "^".repeat(*width))
    }
}
