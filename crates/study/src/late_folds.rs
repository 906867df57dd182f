//! Folds that only the whole branch tells.
//!
//! In a canard explosion the parameter stands still to rounding over a long stretch of branch, and where a multiplier
//! passes +1 there its direction is noise: a fold and a crossing of branches look alike. Which of the two it was shows when
//! the branch has come away from that value: on the side it came from, and it was a fold; on the other, and it was not.

use armilla_record::{Event, EventKind, Point};

/// Note of an event at which a multiplier passes +1 and nothing tells whether the parameter turns.
pub(crate) const PASSES_ONE: &str =
    "a multiplier passes +1; located by bisection, kind not decided, no crossing branch found";
/// Errors of the event's value from which a point of the branch counts as away from it.
const AWAY: f64 = 10.0;
/// The same as a share of the range: what rounding leaves of a parameter that stands still.
const STILL: f64 = 1e-11;

/// Calls those events folds at which the branch turns back; `points` and `events` are in order along the branch.
pub(crate) fn tell(events: &mut [Event], points: &[Point], width: f64) {
    let mut folds = events.iter().filter(|event| event.kind == EventKind::Fold).count();
    for event in events.iter_mut().filter(|event| event.kind == EventKind::Branching && event.note == PASSES_ONE) {
        let least = AWAY * event.error.unwrap_or(0.0) + STILL * width;
        let away = |point: &&Point| (point.value - event.value).abs() > least;
        let before = points.iter().rev().filter(|point| point.distance < event.distance).find(away);
        let after = points.iter().filter(|point| point.distance > event.distance).find(away);
        let (Some(before), Some(after)) = (before, after) else { continue };
        if (before.value - event.value) * (after.value - event.value) <= 0.0 {
            continue;
        }
        folds += 1;
        event.kind = EventKind::Fold;
        event.note =
            "located by bisection; the parameter stands still to rounding, that it turns is told by points away \
                      from here"
                .into();
        let branch = event.name.split('/').next().unwrap_or_default().to_string();
        event.name = format!("{branch}/{}{folds}", EventKind::Fold.word());
    }
}
