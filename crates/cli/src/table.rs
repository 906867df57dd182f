//! The closing table of a run.

use armilla_record::{Branch, CascadeRow, Event, EventKind, Solutions, Unresolved};

use crate::columns::aligned;

/// Digits after which a 64-bit number says nothing.
const MOST_DIGITS: i32 = 15;

/// A value with the digits that its error supports and one more; 0 where the error is larger than the value.
pub fn supported(value: f64, error: Option<f64>) -> String {
    let Some(error) = error.filter(|error| *error > 0.0) else {
        let text = format!("{value:?}");
        return text.strip_suffix(".0").unwrap_or(&text).to_string();
    };
    if value.abs() < error {
        return "0".into();
    }
    let exponent = |number: f64| number.abs().log10().floor() as i32;
    let leading = exponent(value);
    let digits = (leading - exponent(error) + 2).clamp(1, MOST_DIGITS);
    if (-4..MOST_DIGITS).contains(&leading) {
        format!("{value:.*}", (digits - 1 - leading).max(0) as usize)
    } else {
        format!("{value:.*e}", (digits - 1) as usize)
    }
}

fn row(event: &Event) -> [String; 7] {
    let error = match event.error {
        Some(0.0) => "exact".to_string(),
        Some(error) => format!("{error:.1e}"),
        None => String::new(),
    };
    // An equilibrium has no period and no turns; at a Hopf point those of the cycles born are told.
    let period = match event.kind {
        EventKind::PeriodBlowUp => "unbounded".into(),
        _ if event.period == 0.0 => String::new(),
        _ => supported(event.period, event.period_error),
    };
    let turns = if event.turns == 0 { String::new() } else { event.turns.to_string() };
    [
        event.name.clone(),
        supported(event.value, event.error),
        error,
        period,
        turns,
        event.criticality.map_or(String::new(), |side| side.word().to_string()),
        event.note.clone(),
    ]
}

/// The events and ends of all branches as lines of text.
pub fn closing(branches: &[Branch]) -> String {
    let Some(first) = branches.first() else { return String::new() };
    let unit = if first.parameter.unit.is_empty() { String::new() } else { format!(" ({})", first.parameter.unit) };
    let head = [
        "event".into(),
        format!("{}{unit}", first.parameter.name),
        "error".into(),
        "period".into(),
        "turns".into(),
        "side".into(),
        "note".into(),
    ];
    let mut rows: Vec<[String; 7]> = vec![head];
    for branch in branches {
        let mut events: Vec<&Event> = branch.events.iter().collect();
        events.sort_by(|a, b| a.distance.total_cmp(&b.distance));
        rows.extend(events.into_iter().map(row));
    }
    let mut text = aligned(&rows);
    text.push('\n');
    for branch in branches {
        let stable = branch.points.iter().filter(|point| point.is_stable()).count();
        let what = if branch.of == Solutions::Equilibria { " of equilibria" } else { "" };
        let points = branch.points.len();
        text.push_str(&format!("branch {}{what}: {points} points, {stable} of them stable\n", branch.name));
        text.push_str(&format!("  one end: {}\n  other end: {}\n", branch.ends.0.words, branch.ends.1.words));
        for (event, sentence) in armilla_study::beyond(branch) {
            text.push_str(&format!("  beyond {event}: {sentence}\n"));
        }
        text.extend(not_resolved(branch));
    }
    text
}

/// A line on multipliers that are not resolved, where the branch has some.
fn not_resolved(branch: &Branch) -> Option<String> {
    let found: Vec<Unresolved> = branch.points.iter().filter_map(|point| point.unresolved).collect();
    let most = found.iter().map(|unresolved| unresolved.count).max()?;
    let below = found.iter().map(|unresolved| unresolved.below).fold(f64::NEG_INFINITY, f64::max);
    let (points, multipliers) = (plural(found.len(), "point"), plural(most, "multiplier"));
    Some(format!(
        "  not resolved at {points}: up to {multipliers}, damped more strongly than log-modulus {below:.1}; only their sum \
         is known, and stability does not depend on them\n"
    ))
}

fn plural(count: usize, word: &str) -> String {
    if count == 1 { format!("1 {word}") } else { format!("{count} {word}s") }
}

/// The doubling sequence as lines of text; empty where there is none.
pub fn sequence(rows: &[CascadeRow]) -> String {
    if rows.is_empty() {
        return String::new();
    }
    let cell = |row: &CascadeRow| {
        [
            row.turns.map_or("limit".into(), |turns| format!("{turns} to {}", 2 * turns)),
            supported(row.value, row.error),
            row.error.map_or(String::new(), |error| format!("{error:.1e}")),
            row.ratio.map_or(String::new(), |ratio| format!("{ratio:.6}")),
            row.predicted.map_or(String::new(), |value| supported(value, row.predicted_error)),
            row.predicted_error.map_or(String::new(), |error| format!("{error:.1e}")),
        ]
    };
    let head = ["turns", "threshold", "error", "ratio of intervals", "predicted", "its error"].map(String::from);
    let table: Vec<[String; 6]> = std::iter::once(head).chain(rows.iter().map(cell)).collect();
    format!("\n{}", crate::columns::section("doubling sequence", &table))
}

#[cfg(test)]
mod tests {
    use super::supported;

    #[test]
    fn no_more_digits_than_the_error_allows() {
        assert_eq!(supported(2.832_445_027_862_54, Some(3e-10)), "2.83244502786");
        assert_eq!(supported(-1e-14, Some(1e-12)), "0");
        assert_eq!(supported(2e-9, None), "2e-9");
        assert_eq!(supported(f64::INFINITY, Some(1.0)), "inf");
        assert_eq!(supported(0.5, Some(0.0)), "0.5");
        assert_eq!(supported(1.234_567e-9, Some(1e-12)), "1.2346e-9");
        assert_eq!(supported(123_456.789, Some(20.0)), "123457");
    }
}
