//! From the name of a branch or figure to the name of its file.

use crate::RecordError;
use crate::seal::hex_sum;

/// Longest file name without its ending, in bytes. File systems allow 255; the rest is for endings.
const LONGEST_STEM: usize = 240;
/// Hexadecimal digits that stand for the rest of a longer name: 64 bits, so that a run with 1e6 long
/// names meets two equal ones with probability 3e-8.
const DIGITS: usize = 16;

/// What names of branches look like.
pub(crate) const NAMES_ALLOWED: &str =
    "lower-case letters, digits, `_`, `-` and single dots between them, beginning with a letter";

/// Whether a name can be that of a branch: safe as a file name on every system, and never hidden.
pub(crate) fn is_branch_name(name: &str) -> bool {
    let good = |c: char| c.is_ascii_lowercase() || c.is_ascii_digit() || matches!(c, '_' | '-' | '.');
    name.starts_with(|c: char| c.is_ascii_lowercase())
        && name.chars().all(good)
        && !name.ends_with('.')
        && !name.contains("..")
}

/// The file name, without its ending, under which a branch is kept.
///
/// The name itself, unless it is longer than file systems allow: then its beginning, `~` (which no name
/// contains) and 16 digits that depend on the whole name. The full name stands in the file.
///
/// # Errors
/// [`RecordError::BadName`] for what cannot be the name of a branch.
pub fn branch_file_stem(name: &str) -> Result<String, RecordError> {
    if !is_branch_name(name) {
        return Err(RecordError::BadName { name: name.to_string(), allowed: NAMES_ALLOWED });
    }
    if name.len() <= LONGEST_STEM {
        return Ok(name.to_string());
    }
    let kept = &name[..LONGEST_STEM - DIGITS - 1];
    Ok(format!("{kept}~{}", &hex_sum(name.as_bytes())[..DIGITS]))
}

/// The file name of a figure, with its ending.
pub(crate) fn figure_file_name(name: &str) -> Result<String, RecordError> {
    let stem = name.strip_suffix(".svg").unwrap_or(name);
    let good = |c: char| c.is_ascii_alphanumeric() || matches!(c, '_' | '-' | '.');
    if stem.is_empty() || stem.len() > LONGEST_STEM || stem.starts_with('.') || !stem.chars().all(good) {
        return Err(RecordError::BadName {
            name: name.to_string(),
            allowed: "up to 240 ASCII letters, digits, `_`, `-` and dots, not beginning with a dot",
        });
    }
    Ok(format!("{stem}.svg"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_cascade_ten_deep_keeps_its_name() {
        let name = format!("a{}", ".doubling1".repeat(10));
        assert_eq!(branch_file_stem(&name).expect("a name"), name);
    }

    #[test]
    fn longer_names_are_shortened_and_stay_apart() {
        let long = |last: &str| format!("a{}{last}", ".doubling1".repeat(40));
        let (one, two) = (branch_file_stem(&long(".fold1")), branch_file_stem(&long(".fold2")));
        let (one, two) = (one.expect("a name"), two.expect("a name"));
        assert_ne!(one, two);
        assert!(one.len() == LONGEST_STEM && two.len() == LONGEST_STEM);
        assert_eq!(one, branch_file_stem(&long(".fold1")).expect("a name"), "stable");
        assert!(!is_branch_name(&one), "a shortened name is never the name of another branch");
    }

    #[test]
    fn names_that_leave_the_folder_are_refused() {
        for name in ["", "..", "../a", "a/b", "a\\b", ".a", "a..b", "a.", "A", "a b", "a\0", "ä", "1"] {
            branch_file_stem(name).expect_err(name);
        }
        for name in ["", "..", "../a", "a/b", ".svg", ".hidden", "a b", "c:a"] {
            figure_file_name(name).expect_err(name);
        }
        assert_eq!(figure_file_name("1-diagram").expect("a name"), "1-diagram.svg");
        assert_eq!(figure_file_name("Map.svg").expect("a name"), "Map.svg");
    }
}
