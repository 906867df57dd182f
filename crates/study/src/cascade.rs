//! The doubling sequence told from the branches.

use armilla_record::{Branch, CascadeRow, Event, EventKind};

use crate::prediction::{Estimate, accumulation, next_doubling};

/// The longest line of first doublings, wherever it starts: `a/doubling1`, `a.doubling1/doubling1`, and so on, each with what was predicted of it, and the extrapolated limit as the last row. Empty where fewer than three
/// doublings follow each other.
pub(crate) fn cascade(branches: &[Branch]) -> Vec<CascadeRow> {
    let Some(events) = longest_line(branches).filter(|line| line.len() >= 3) else { return Vec::new() };
    let line: Vec<Estimate> = events.iter().map(|event| estimate(event.value, event.error)).collect();
    let mut rows: Vec<CascadeRow> = events.iter().enumerate().map(|(k, event)| row(event, &line[..=k])).collect();
    let limit = accumulation(&line).expect("three thresholds or more");
    rows.push(CascadeRow {
        event: "accumulation".into(),
        turns: None,
        value: limit.value,
        error: Some(limit.error),
        ratio: None,
        predicted: None,
        predicted_error: None,
    });
    rows
}

/// A threshold as a member of a line.
pub(crate) fn estimate(value: f64, error: Option<f64>) -> Estimate {
    Estimate { value, error: error.unwrap_or(0.0) }
}

/// The row of the last member of `line`.
fn row(event: &Event, line: &[Estimate]) -> CascadeRow {
    let ratio = match line {
        [.., a, b, c] => Some((b.value - a.value) / (c.value - b.value)),
        _ => None,
    };
    let predicted = next_doubling(&line[..line.len() - 1]);
    CascadeRow {
        event: event.name.clone(),
        turns: Some(event.turns),
        value: event.value,
        error: event.error,
        ratio: ratio.filter(|ratio| ratio.is_finite()),
        predicted: predicted.map(|found| found.value),
        predicted_error: predicted.map(|found| found.error),
    }
}

/// The chain of events with the most members.
fn longest_line(branches: &[Branch]) -> Option<Vec<&Event>> {
    // A line that starts inside another one is shorter.
    let doublings = branches.iter().flat_map(doublings_of);
    doublings.map(|event| line_from(branches, event)).max_by_key(Vec::len)
}

fn doublings_of(branch: &Branch) -> impl Iterator<Item = &Event> {
    branch.events.iter().filter(|event| event.kind == EventKind::Doubling)
}

/// An event and, on each branch born in turn, the doubling nearest to that branch's birth.
fn line_from<'a>(branches: &'a [Branch], first: &'a Event) -> Vec<&'a Event> {
    let mut line = vec![first];
    while let Some(child) = branches.iter().find(|branch| branch.born_at.as_ref() == Some(&line[line.len() - 1].name)) {
        match doublings_of(child).min_by(|a, b| a.distance.total_cmp(&b.distance)) {
            Some(next) => line.push(next),
            None => break,
        }
    }
    line
}
