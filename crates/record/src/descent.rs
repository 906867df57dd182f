//! Who descends from whom: the order of branches and events that does not depend on time.
//!
//! A branch comes before its children, and its children in the order of the events they were born at
//! along it (distance, kind, number), each followed at once by its own children.

use std::cmp::Ordering;
use std::collections::{HashMap, HashSet};

use crate::{Branch, Event, EventKind};

/// Takes `<branch>/<kind><number>` apart.
pub(crate) fn split_event(name: &str) -> Option<(&str, EventKind, usize)> {
    let (branch, event) = name.rsplit_once('/')?;
    let word = event.trim_end_matches(|c: char| c.is_ascii_digit());
    let digits = &event[word.len()..];
    if branch.is_empty() || digits.starts_with('0') {
        return None;
    }
    let kind = EventKind::ALL.into_iter().find(|kind| kind.word() == word)?;
    Some((branch, kind, digits.parse().ok()?))
}

/// Along the branch, then by kind, then by number.
pub(crate) fn along_branch(a: &Event, b: &Event) -> Ordering {
    // Adding zero makes -0 and +0 one distance.
    (a.distance + 0.0).total_cmp(&(b.distance + 0.0)).then(a.kind.cmp(&b.kind)).then_with(|| by_name(&a.name, &b.name))
}

/// Names with the numbers in them counted: `a.doubling2` before `a.doubling10`.
fn by_name(a: &str, b: &str) -> Ordering {
    parts(a).cmp(parts(b)).then_with(|| a.cmp(b))
}

/// Runs of digits as numbers (by length, then text), all else as text.
fn parts(name: &str) -> impl Iterator<Item = (bool, usize, &str)> {
    let mut rest = name;
    std::iter::from_fn(move || {
        let digit = rest.starts_with(|c: char| c.is_ascii_digit());
        let end = rest.find(|c: char| c.is_ascii_digit() != digit).unwrap_or(rest.len());
        let (part, after) = rest.split_at(end);
        rest = after;
        (!part.is_empty()).then_some((digit, if digit { part.len() } else { 0 }, part))
    })
}

/// Indices of branches in order of descent.
///
/// A branch whose parent is not among them counts as a first one; the first ones are ordered by name.
/// Every index appears once, whatever the branches claim.
pub fn descent_order(branches: &[Branch]) -> Vec<usize> {
    let index: HashMap<&str, usize> =
        branches.iter().enumerate().map(|(k, branch)| (branch.name.as_str(), k)).collect();
    let parent = |k: usize| {
        let event = branches[k].born_at.as_deref()?;
        let parent = *index.get(event.rsplit_once('/')?.0)?;
        (parent != k).then_some(parent)
    };
    let mut children = vec![Vec::new(); branches.len()];
    let mut firsts = Vec::new();
    for k in 0..branches.len() {
        match parent(k) {
            Some(parent) => children[parent].push(k),
            None => firsts.push(k),
        }
    }
    firsts.sort_by(|&a, &b| by_name(&branches[a].name, &branches[b].name));
    for (k, of_one) in children.iter_mut().enumerate() {
        of_one.sort_by(|&a, &b| siblings(&branches[k], &branches[a], &branches[b]));
    }
    let mut order = Vec::with_capacity(branches.len());
    let mut seen = HashSet::new();
    // Starting from every branch in turn at the end reaches those that claim to descend in a circle.
    let all = firsts.into_iter().chain(0..branches.len());
    for first in all {
        let mut waiting = vec![first];
        while let Some(k) = waiting.pop() {
            if seen.insert(k) {
                order.push(k);
                waiting.extend(children[k].iter().rev());
            }
        }
    }
    order
}

/// The order of two children of one branch.
fn siblings(parent: &Branch, a: &Branch, b: &Branch) -> Ordering {
    let birth = |child: &Branch| parent.events.iter().find(|event| Some(&event.name) == child.born_at.as_ref());
    match (birth(a), birth(b)) {
        (Some(a), Some(b)) => along_branch(a, b),
        // An event that the parent does not know comes last.
        (a, b) => b.is_some().cmp(&a.is_some()),
    }
    .then_with(|| by_name(&a.name, &b.name))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn event_names_come_apart() {
        assert_eq!(split_event("a.doubling1/fold12"), Some(("a.doubling1", EventKind::Fold, 12)));
        assert_eq!(split_event("a/period-blow-up1"), Some(("a", EventKind::PeriodBlowUp, 1)));
        for bad in ["a", "a/fold", "a/fold0", "a/fold01", "/fold1", "a/bend1", "a/Fold1", "a/fold1x"] {
            assert_eq!(split_event(bad), None, "{bad}");
        }
    }

    #[test]
    fn numbers_in_names_are_counted() {
        let mut names = ["a.doubling10", "b", "a.doubling2.fold1", "a", "a.doubling2"];
        names.sort_by(|a, b| by_name(a, b));
        assert_eq!(names, ["a", "a.doubling2", "a.doubling2.fold1", "a.doubling10", "b"]);
    }
}
