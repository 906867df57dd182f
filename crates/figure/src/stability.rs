//! Where along a branch it is stable: exactly from event to event.

use armilla_record::{Branch, Event, EventKind, Point};

/// A part of a branch with one number of unstable multipliers or eigenvalues.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Stretch {
    pub(crate) from: f64,
    pub(crate) to: f64,
    pub(crate) unstable_count: usize,
}

/// The stretches of a branch in order of distance, each at most from one point to the next.
pub(crate) fn stretches(branch: &Branch) -> Vec<Stretch> {
    let mut points: Vec<&Point> = branch.points.iter().filter(|point| point.distance.is_finite()).collect();
    points.sort_by(|a, b| a.distance.total_cmp(&b.distance));
    let mut events: Vec<&Event> =
        branch.events.iter().filter(|event| event.kind.is_threshold() && event.distance.is_finite()).collect();
    events.sort_by(|a, b| a.distance.total_cmp(&b.distance));
    points
        .windows(2)
        .flat_map(|pair| between(pair[0], pair[1], &events))
        .filter(|stretch| stretch.to > stretch.from)
        .collect()
}

/// The parts between two neighbouring points.
fn between(before: &Point, after: &Point, events: &[&Event]) -> Vec<Stretch> {
    // An event that was itself made a point has its distance to the last bits only.
    let slack = 1e-9 * (after.distance - before.distance);
    let inside: Vec<&Event> = events
        .iter()
        .copied()
        .filter(|event| event.distance > before.distance + slack && event.distance < after.distance - slack)
        .collect();
    let (from, to) = (before.distance, after.distance);
    if inside.is_empty() {
        let at_end = events.iter().any(|event| (event.distance - to).abs() <= slack);
        let at_begin = events.iter().any(|event| (event.distance - from).abs() <= slack);
        let unstable_count = match (at_begin, at_end) {
            (_, true) => before.unstable_count,
            (true, false) => after.unstable_count,
            // A change without an event: better drawn unstable than falsely stable.
            (false, false) => before.unstable_count.max(after.unstable_count),
        };
        return vec![Stretch { from, to, unstable_count }];
    }
    let counts = counts_between(before.unstable_count, after.unstable_count, &inside);
    let mut places = vec![from];
    places.extend(inside.iter().map(|event| event.distance));
    places.push(to);
    places
        .windows(2)
        .zip(counts)
        .map(|(ends, unstable_count)| Stretch { from: ends[0], to: ends[1], unstable_count })
        .collect()
}

/// Number of unstable multipliers or eigenvalues before, between and after the events of one stride.
///
/// Each kind of event moves a known number of multipliers; the first way of signs that leads from the
/// count before to the count after is taken. Where none does, the last event carries the change.
fn counts_between(before: usize, after: usize, events: &[&Event]) -> Vec<usize> {
    // A stride with more events than this is not resolved anyhow; the search doubles with each.
    const MOST: usize = 10;
    let mut counts = vec![before];
    if events.len() <= MOST && extend(&mut counts, after, events) {
        return counts;
    }
    let mut counts = vec![before; events.len()];
    counts.push(after);
    counts
}

fn extend(counts: &mut Vec<usize>, after: usize, events: &[&Event]) -> bool {
    let here = *counts.last().expect("starts with one count");
    let Some((event, rest)) = events.split_first() else {
        return here == after;
    };
    let moves: &[isize] = match event.kind {
        EventKind::Torus => &[2, -2],
        EventKind::Unresolved => &[1, -1, 2, -2, 0],
        // Cycles end there without a change; equilibria change by a pair.
        EventKind::Hopf => &[0, 2, -2],
        EventKind::PeriodBlowUp => &[0],
        // A branch that turns back at a pitchfork keeps its count.
        EventKind::Pitchfork | EventKind::Branching => &[1, -1, 0],
        _ => &[1, -1],
    };
    for change in moves {
        let Some(next) = here.checked_add_signed(*change) else {
            continue;
        };
        counts.push(next);
        if extend(counts, after, rest) {
            return true;
        }
        counts.pop();
    }
    false
}

/// The smaller count of the stretches that meet at a distance; zero means that the branch is at the limit of
/// stability there.
pub(crate) fn least_count_at(stretches: &[Stretch], distance: f64) -> Option<usize> {
    let slack = |stretch: &Stretch| 1e-9 * (stretch.to - stretch.from);
    stretches
        .iter()
        .filter(|stretch| distance >= stretch.from - slack(stretch) && distance <= stretch.to + slack(stretch))
        .map(|stretch| stretch.unstable_count)
        .min()
}
