//! The caption, kept inside the file for readers and for those who cannot see the picture.

use armilla_record::{Branch, Quantity, Solutions};

use crate::number::plain;
use crate::text;

/// Names listed before the rest is told by its number.
const LISTED: usize = 20;

/// What the model and the computation say about every figure.
pub(crate) fn setting(branches: &[Branch]) -> String {
    let first = &branches[0];
    let fixed: Vec<String> =
        first.fixed.iter().map(|(name, value)| format!("{} = {}", text::clean(name), plain(*value))).collect();
    let fixed = if fixed.is_empty() { "none".to_string() } else { fixed.join(", ") };
    let accuracy = branches.iter().map(|branch| branch.accuracy).fold(first.accuracy, f64::max);
    format!(
        "Model: {}. Fixed parameters, in the units of the model: {fixed}. Asked accuracy: {}, relative.",
        text::clean(&first.model_title),
        plain(accuracy)
    )
}

/// What was not looked for.
pub(crate) fn not_searched(branches: &[Branch]) -> String {
    let first = &branches[0];
    let (lo, hi) =
        branches.iter().fold(first.range, |(lo, hi), branch| (lo.min(branch.range.0), hi.max(branch.range.1)));
    format!(
        "Followed: {}, for {} from {} to {}. Not searched: {}, tori, and anything outside this range.",
        listed(branches.iter().map(|branch| branch.name.as_str())),
        quantity(&first.parameter),
        plain(lo),
        plain(hi),
        if has(branches, Solutions::Equilibria) {
            "equilibria and cycles not connected to these"
        } else {
            "cycles not connected to these, equilibria"
        }
    )
}

/// What was followed, in a word or two.
pub(crate) fn solutions(branches: &[Branch]) -> &'static str {
    match (has(branches, Solutions::Cycles), has(branches, Solutions::Equilibria)) {
        (true, true) => "cycles and equilibria",
        (false, true) => "equilibria",
        _ => "cycles",
    }
}

fn has(branches: &[Branch], of: Solutions) -> bool {
    branches.iter().any(|branch| branch.of == of)
}

/// Name and unit of a quantity in running text.
pub(crate) fn quantity(quantity: &Quantity) -> String {
    let unit = text::clean(&quantity.unit);
    let label = text::clean(&quantity.label);
    if unit.is_empty() { label } else { format!("{label} ({unit})") }
}

/// Names with the rest told by its number.
pub(crate) fn listed<'a>(names: impl Iterator<Item = &'a str>) -> String {
    let names: Vec<String> = names.map(text::clean).collect();
    match names.len().saturating_sub(LISTED) {
        0 => names.join(", "),
        more => format!("{} and {more} more", names[..LISTED].join(", ")),
    }
}
