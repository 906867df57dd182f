//! Why a figure could not be drawn.

use std::fmt;

use crate::spec::WIDTHS_MM;

/// Why a figure could not be drawn.
#[derive(Clone, Debug, PartialEq)]
pub enum FigureError {
    /// There is no branch to draw.
    NoBranches,
    /// The branches are not of one model, or do not follow one parameter.
    Mixed {
        /// Name of the branch that does not fit the first one.
        branch: String,
        /// What is not the same.
        what: &'static str,
    },
    /// A state is asked for that the model does not have.
    UnknownState {
        /// The name asked for.
        asked: String,
        /// The names there are.
        known: Vec<String>,
    },
    /// An orbit is asked for that no event keeps.
    UnknownOrbit {
        /// The event asked for.
        asked: String,
        /// Events that keep an orbit.
        known: Vec<String>,
    },
    /// No event keeps an orbit.
    NoOrbits,
    /// A range that is not one.
    Range {
        /// The field of the figure.
        field: &'static str,
        /// The range asked for.
        asked: (f64, f64),
        /// Whether the scale is logarithmic.
        logarithmic: bool,
    },
    /// A width that no page has.
    Width {
        /// The width asked for, in mm.
        asked: f64,
    },
    /// Nothing lies inside the asked range.
    NothingInside {
        /// What is drawn.
        what: String,
        /// Extent to the right of what there is, where there is anything finite.
        x: Option<(f64, f64)>,
        /// Extent upwards of what there is.
        y: Option<(f64, f64)>,
    },
}

impl fmt::Display for FigureError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::NoBranches => write!(f, "a figure was asked of no branches: give at least one"),
            Self::Mixed { branch, what } => write!(
                f,
                "branch `{branch}` does not have the same {what} as the first branch: draw only branches of one study"
            ),
            Self::UnknownState { asked, known } => {
                write!(f, "the model has no state `{asked}`; it has {}", listed(known))?;
                suggest(f, asked, known)
            }
            Self::UnknownOrbit { asked, known } => {
                write!(f, "no event `{asked}` keeps an orbit; these do: {}", listed(known))?;
                suggest(f, asked, known)
            }
            Self::NoOrbits => write!(
                f,
                "no event on these branches keeps an orbit to draw: ask for `targets` in the study and trace again"
            ),
            Self::Range { field, asked: (lo, hi), logarithmic } => {
                let positive = if *logarithmic { " positive" } else { "" };
                write!(
                    f,
                    "the range `{field}: ({lo}, {hi})` must be two{positive} finite numbers, the smaller one first"
                )
            }
            Self::Width { asked } => {
                write!(f, "a figure cannot be {asked} mm wide: choose {} to {} mm", WIDTHS_MM.0, WIDTHS_MM.1)
            }
            Self::NothingInside { what, x: Some(x), y: Some(y) } => write!(
                f,
                "nothing of {what} lies inside the range: there is something from {} to {} along x and from {} to {} \
                 along y; change `x` and `y` of the figure or leave them out",
                short(x.0),
                short(x.1),
                short(y.0),
                short(y.1)
            ),
            Self::NothingInside { what, .. } => {
                write!(f, "{what} has no finite value that can be drawn on this scale: choose another measure or scale")
            }
        }
    }
}

impl std::error::Error for FigureError {}

/// More names than this are told by their number.
const LISTED: usize = 12;

fn listed(known: &[String]) -> String {
    let names: Vec<String> = known.iter().take(LISTED).map(|name| format!("`{name}`")).collect();
    match known.len().saturating_sub(LISTED) {
        0 => names.join(", "),
        more => format!("{} and {more} more", names.join(", ")),
    }
}

/// A number to six digits, enough to choose a range by.
fn short(value: f64) -> f64 {
    format!("{value:.5e}").parse().unwrap_or(value)
}

fn suggest(f: &mut fmt::Formatter<'_>, asked: &str, known: &[String]) -> fmt::Result {
    match nearest(asked, known) {
        Some(name) => write!(f, "; did you mean `{name}`?"),
        None => Ok(()),
    }
}

/// The known name that takes the fewest changed letters, where a third of the letters is enough.
fn nearest<'a>(asked: &str, known: &'a [String]) -> Option<&'a str> {
    let (edits, name) = known.iter().map(|name| (edits(asked, name), name)).min()?;
    (edits <= 1.max(asked.chars().count() / 3)).then_some(name.as_str())
}

/// Number of inserted, deleted and exchanged letters (Levenshtein 1966, Sov. Phys. Dokl. 10:707).
fn edits(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, letter) in a.chars().enumerate() {
        let mut diagonal = row[0];
        row[0] = i + 1;
        for (j, other) in b.iter().enumerate() {
            let changed = diagonal + usize::from(letter != *other);
            diagonal = row[j + 1];
            row[j + 1] = changed.min(diagonal + 1).min(row[j] + 1);
        }
    }
    row[b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_misspelt_state_is_told_with_the_known_and_the_nearest() {
        let known = vec!["level".to_string(), "flow".to_string()];
        let told = FigureError::UnknownState { asked: "levle".into(), known: known.clone() }.to_string();
        assert_eq!(told, "the model has no state `levle`; it has `level`, `flow`");
        let told = FigureError::UnknownState { asked: "leve".into(), known }.to_string();
        assert!(told.ends_with("did you mean `level`?"), "{told}");
    }

    /// Source: the standard example (kitten, sitting), from memory; three edits.
    #[test]
    fn edit_distance_of_the_standard_example() {
        assert_eq!(edits("kitten", "sitting"), 3);
        assert_eq!(edits("", "abc"), 3);
    }
}
