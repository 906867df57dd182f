//! What a branch's points and events must say together, whatever the model.

use armilla_record::{Branch, Event, EventKind};
use armilla_study::Traced;
use armilla_tests::branch;

/// Events of a kind on a branch, in the order along it.
pub fn of<'a>(traced: &'a Traced, name: &str, kind: EventKind) -> Vec<&'a Event> {
    branch(traced, name).events.iter().filter(|event| event.kind == kind).collect()
}

/// Values of these events, rising.
pub fn values(traced: &Traced, name: &str, kind: EventKind) -> Vec<f64> {
    let mut values: Vec<f64> = of(traced, name, kind).iter().map(|event| event.value).collect();
    values.sort_by(f64::total_cmp);
    values
}

/// Names of everything on a branch that is a threshold, or none.
pub fn thresholds(branch: &Branch) -> Vec<EventKind> {
    branch.events.iter().map(|event| event.kind).filter(|kind| kind.is_threshold()).collect()
}

/// Every change of the unstable count between neighbouring points of a branch has events between them that make it up:
/// one each for folds, doublings and crossings, two for torus points.
pub fn adds_up(branch: &Branch) {
    for pair in branch.points.windows(2) {
        let (from, to) = (&pair[0], &pair[1]);
        let change = to.unstable_count as i64 - from.unstable_count as i64;
        // An event on a point to roundoff may belong to either side of it.
        let slack = 1e-9;
        let between = |event: &&Event| event.distance >= from.distance - slack && event.distance <= to.distance + slack;
        let on = |event: &Event| [from, to].iter().any(|point| (point.distance - event.distance).abs() <= slack);
        let (mut least, mut most, mut unresolved) = (0i64, 0i64, false);
        for event in branch.events.iter().filter(between) {
            let size = match event.kind {
                EventKind::Fold
                | EventKind::Doubling
                | EventKind::Branching
                | EventKind::Pitchfork
                | EventKind::Transcritical => 1,
                EventKind::Torus => 2,
                EventKind::Unresolved => {
                    unresolved = true;
                    0
                }
                _ => 0,
            };
            (least, most) = (least - size, most + size);
            unresolved |= size > 0 && on(event) && (least..=most).contains(&change);
        }
        assert!(
            unresolved || (least..=most).contains(&change) && (most - change) % 2 == 0,
            "{}: {} unstable at {}, {} at {}, events allow {least} to {most}",
            branch.name,
            from.unstable_count,
            from.value,
            to.unstable_count,
            to.value
        );
    }
}
