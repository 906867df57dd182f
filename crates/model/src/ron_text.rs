//! Words for the errors of the file format's reader, and reading of its plain values.

use std::ops::Range;

use ron::error::Error;

use crate::diagnostic::nearest_name;

/// Message and help for a reader's error.
pub(crate) fn explain(error: &Error) -> (String, Option<String>) {
    match error {
        Error::NoSuchStructField { expected, found, outer } => {
            let place = outer.as_ref().map_or_else(String::new, |outer| format!(" of a {outer}"));
            let near = nearest_name(found, expected.iter().copied())
                .map_or_else(String::new, |name| format!("did you mean `{name}`? "));
            (format!("`{found}` is not a field{place}"), Some(format!("{near}the fields are {}", listed(expected))))
        }
        Error::NoSuchEnumVariant { expected, found, outer } => {
            let place = outer.as_ref().map_or_else(String::new, |outer| format!(" for {outer}"));
            let near = nearest_name(found, expected.iter().copied())
                .map_or_else(String::new, |name| format!("did you mean `{name}`? "));
            (format!("`{found}` is not a choice{place}"), Some(format!("{near}the choices are {}", listed(expected))))
        }
        Error::MissingStructField { field, outer } => {
            let place = outer.as_ref().map_or_else(String::new, |outer| format!(" of the {outer}"));
            (
                format!("the field `{field}`{place} is missing"),
                Some(format!("add `{field}: …` before this closing bracket")),
            )
        }
        Error::DuplicateStructField { field, .. } => {
            (format!("the field `{field}` is given twice"), Some("keep one of them".to_owned()))
        }
        Error::ExceededRecursionLimit => ("the file is nested too deep".to_owned(), None),
        Error::ExpectedStructLike | Error::ExpectedNamedStructLike(_) | Error::ExpectedDifferentStructName { .. } => {
            ("an opening `(` is expected".to_owned(), Some("fields stand between `(` and `)`".to_owned()))
        }
        Error::ExpectedComma => (
            "a comma or a closing bracket is expected before this".to_owned(),
            Some("entries are separated by commas, and texts end with a quote".to_owned()),
        ),
        Error::ExpectedStructLikeEnd => {
            ("a closing `)` or a comma is expected".to_owned(), Some("fields are separated by commas".to_owned()))
        }
        Error::ExpectedMap => ("an opening `{` is expected".to_owned(), None),
        Error::ExpectedMapEnd => {
            ("a closing `}` or a comma is expected".to_owned(), Some("entries are separated by commas".to_owned()))
        }
        Error::ExpectedMapColon => ("a colon is expected between a name and its value".to_owned(), None),
        Error::ExpectedString | Error::ExpectedStringEnd => ("a text in double quotes is expected".to_owned(), None),
        Error::Eof => ("the file ends too early".to_owned(), Some("a closing bracket is missing".to_owned())),
        Error::TrailingCharacters => ("text after the end of the outermost `( … )`".to_owned(), None),
        other => (lower_first(&other.to_string()), None),
    }
}

/// The span to mark: the reader's own often starts before white space or ends after it.
pub(crate) fn narrow(text: &str, span: Range<usize>, error: &Error) -> Range<usize> {
    let name = match error {
        Error::NoSuchStructField { found, .. } | Error::NoSuchEnumVariant { found, .. } => Some(found.as_str()),
        Error::ExpectedDifferentStructName { found, .. } => Some(found.as_str()),
        Error::DuplicateStructField { field, .. } => Some(*field),
        _ => None,
    };
    let end = span.end.min(text.len());
    if let Some(name) = name.filter(|name| !name.is_empty()) {
        // The reader stops right after the name, so it is the last occurrence before the end.
        if let Some(at) = text[..end].rfind(name) {
            return at..at + name.len();
        }
    }
    let before = text[..end].trim_end();
    if matches!(error, Error::MissingStructField { .. } | Error::Message(_)) && before.ends_with([')', '}']) {
        return before.len() - 1..before.len();
    }
    // Elsewhere the place where reading stopped is the spot.
    let rest = &text[end..];
    let skipped = rest.len() - rest.trim_start().len();
    let at = if skipped < rest.len() { end + skipped } else { text.trim_end().len() };
    at..at
}

fn listed(names: &[&str]) -> String {
    names.iter().map(|name| format!("`{name}`")).collect::<Vec<_>>().join(", ")
}

fn lower_first(text: &str) -> String {
    let mut characters = text.chars();
    characters.next().map_or_else(String::new, |first| first.to_lowercase().chain(characters).collect())
}
