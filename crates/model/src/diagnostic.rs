//! One error of an input file: where it is, what is wrong, and what to write instead.

use std::fmt;
use std::ops::Range;

/// The text of an input file with the name that messages show.
#[derive(Clone, Copy, Debug)]
pub struct Source<'a> {
    /// Name of the file as the user knows it.
    pub file: &'a str,
    /// All of its text.
    pub text: &'a str,
}

/// An error at a place of an input file.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Diagnostic {
    /// Name of the file.
    pub file: String,
    /// Line, from 1.
    pub line: usize,
    /// Column in characters, from 1.
    pub column: usize,
    /// The text of that line.
    pub source_line: String,
    /// Number of characters that the mark underlines, at least 1.
    pub width: usize,
    /// What is wrong.
    pub message: String,
    /// What to do about it.
    pub help: Option<String>,
}

impl Diagnostic {
    /// An error at a byte range of the text; a range outside of it is moved to the nearest place.
    pub fn new(source: Source<'_>, span: Range<usize>, message: impl Into<String>) -> Self {
        let text = source.text;
        let start = floor_boundary(text, span.start);
        let end = floor_boundary(text, span.end).max(start);
        let line_start = text[..start].rfind('\n').map_or(0, |at| at + 1);
        let line_end = text[start..].find('\n').map_or(text.len(), |at| start + at);
        let shown = text[line_start..line_end].trim_end_matches('\r');
        Self {
            file: source.file.to_owned(),
            line: text[..start].matches('\n').count() + 1,
            column: text[line_start..start].chars().count() + 1,
            source_line: shown.to_owned(),
            width: text[start..end.min(line_end)].chars().count().max(1),
            message: message.into(),
            help: None,
        }
    }

    /// The same error with advice.
    #[must_use]
    pub fn with_help(mut self, help: impl Into<String>) -> Self {
        self.help = Some(help.into());
        self
    }

    /// The same error with advice, where there is some.
    #[must_use]
    pub fn with_help_if(mut self, help: Option<String>) -> Self {
        self.help = help;
        self
    }

    /// An error that the reader of the file format found.
    pub fn from_ron(source: Source<'_>, error: &ron::error::SpannedError) -> Self {
        let start = byte_offset(source.text, error.span.start.line, error.span.start.col);
        let end = byte_offset(source.text, error.span.end.line, error.span.end.col);
        let (message, help) = crate::ron_text::explain(&error.code);
        let span = crate::ron_text::narrow(source.text, start..end, &error.code);
        Self::new(source, span, message).with_help_if(help)
    }

    /// Position for ordering errors of one file.
    pub(crate) fn place(&self) -> (usize, usize) {
        (self.line, self.column)
    }
}

fn floor_boundary(text: &str, at: usize) -> usize {
    let mut at = at.min(text.len());
    while !text.is_char_boundary(at) {
        at -= 1;
    }
    at
}

/// Byte offset of a line and column counted in characters from 1.
fn byte_offset(text: &str, line: usize, column: usize) -> usize {
    let mut line_start = 0;
    for _ in 1..line {
        match text[line_start..].find('\n') {
            Some(at) => line_start += at + 1,
            None => return text.len(),
        }
    }
    let rest = &text[line_start..];
    rest.char_indices().nth(column.saturating_sub(1)).map_or(text.len(), |(at, _)| line_start + at)
}

/// Longest line that is shown whole; of a longer one, the part around the mark.
const SHOWN_CHARACTERS: usize = 110;

impl fmt::Display for Diagnostic {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        writeln!(f, "{}:{}:{}: {}", self.file, self.line, self.column, self.message)?;
        let characters: Vec<char> = self.source_line.chars().map(|c| if c.is_control() { ' ' } else { c }).collect();
        let mark = self.column - 1;
        let first = if characters.len() > SHOWN_CHARACTERS {
            mark.saturating_sub(SHOWN_CHARACTERS / 2)
        } else {
            characters.iter().take_while(|c| **c == ' ').count().min(mark)
        };
        let shown: String = characters.iter().skip(first).take(SHOWN_CHARACTERS).collect();
        let width = self.width.min((first + SHOWN_CHARACTERS).saturating_sub(mark)).max(1);
        writeln!(f, "    {}", shown.trim_end())?;
        write!(f, "    {}{}", " ".repeat(mark - first), "^".repeat(width))?;
        match &self.help {
            Some(help) => write!(f, "\n    help: {help}"),
            None => Ok(()),
        }
    }
}

impl std::error::Error for Diagnostic {}

/// The candidate that `name` most likely means, if one is near enough.
///
/// Near: at most one edit (insert, delete, replace, swap of neighbours) for names up to three letters,
/// two up to seven, three beyond; upper and lower case count as equal.
pub fn nearest_name<'a>(name: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let lower = name.to_lowercase();
    let length = name.chars().count();
    let allowed = match length {
        0..=3 => 1,
        4..=7 => 2,
        _ => 3,
    };
    candidates
        .into_iter()
        .map(|candidate| (edit_distance(&lower, &candidate.to_lowercase()), candidate))
        .filter(|(distance, candidate)| {
            // A name of one letter replaced by another is no resemblance.
            *distance <= allowed && *distance < length.max(candidate.chars().count())
        })
        .min_by_key(|(distance, _)| *distance)
        .map(|(_, candidate)| candidate)
}

/// Optimal string alignment distance: edits and swaps of neighbours.
fn edit_distance(a: &str, b: &str) -> usize {
    /// Names longer than this are compared by their beginnings, to bound the work.
    const LONGEST: usize = 64;
    let a: Vec<char> = a.chars().take(LONGEST).collect();
    let b: Vec<char> = b.chars().take(LONGEST).collect();
    let mut before: Vec<usize> = Vec::new();
    let mut last: Vec<usize> = (0..=b.len()).collect();
    for i in 1..=a.len() {
        let mut row = vec![i; b.len() + 1];
        for j in 1..=b.len() {
            let replaced = last[j - 1] + usize::from(a[i - 1] != b[j - 1]);
            row[j] = replaced.min(last[j] + 1).min(row[j - 1] + 1);
            if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                row[j] = row[j].min(before[j - 2] + 1);
            }
        }
        before = std::mem::replace(&mut last, row);
    }
    last[b.len()]
}

#[cfg(test)]
mod tests {
    use super::{Diagnostic, Source, byte_offset, nearest_name};

    #[test]
    fn near_names() {
        let known = ["gain", "lag", "level", "τ"];
        assert_eq!(nearest_name("gian", known), Some("gain"));
        assert_eq!(nearest_name("Level", known), Some("level"));
        assert_eq!(nearest_name("lvel", known), Some("level"));
        assert_eq!(nearest_name("x", known), None);
        assert_eq!(nearest_name("pressure", known), None);
    }

    #[test]
    fn places_count_characters() {
        let text = "τ = 1\nänd x";
        let diagnostic = Diagnostic::new(Source { file: "a", text }, text.len() - 1..text.len(), "m");
        assert_eq!((diagnostic.line, diagnostic.column), (2, 5));
        assert_eq!(byte_offset(text, 2, 5), text.len() - 1);
        // Beyond the text, and inside a character.
        for span in [500..600, 1..2, 0..0] {
            let shown = Diagnostic::new(Source { file: "a", text }, span, "m").to_string();
            assert!(shown.contains('^'));
        }
    }
}
