//! The events of one step: located, bracketed, or narrowed, before they have names.

use armilla_follow::{Landing, Step};
use armilla_record::{Criticality, EventKind};
use armilla_stability::{
    CriticalKind, CyclePoint, CycleProblem, DoublingForm, Located, WATCH_DOUBLING, WATCH_FOLD, WATCH_TORUS,
};

use crate::walk::{CycleStation, WalkPlan};

/// An event as found, before it has a name.
pub(crate) struct Found {
    pub kind: EventKind,
    pub point: CyclePoint,
    pub distance: f64,
    pub error: Option<f64>,
    pub period_error: Option<f64>,
    pub angle: Option<f64>,
    pub criticality: Option<Criticality>,
    pub note: String,
    /// What a switch needs.
    pub located: Option<Located>,
    /// Normal form of a doubling.
    pub form: Option<DoublingForm>,
}

/// Whether the events of a step account for the change of the unstable count: each fold or doubling moves one multiplier
/// across the unit circle, a torus point two. A pair that crosses in the same step as a fold or doubling leaves the count
/// ambiguous; a shorter stride separates them.
pub(crate) fn is_explained(step: &Step) -> bool {
    let count = |index: usize| step.crossings.iter().filter(|crossing| crossing.index == index).count();
    let single = count(WATCH_FOLD) + count(WATCH_DOUBLING);
    let change = step.unstable.0.abs_diff(step.unstable.1);
    match (single, count(WATCH_TORUS)) {
        (0, 0) => change == 0,
        (0, _) => change == 0 || change == 2,
        (_, 0) => change <= single && change % 2 == single % 2,
        (_, _) => false,
    }
}

/// The events of a step, in the order of the walk.
pub(crate) fn events_of_step(
    problem: &mut CycleProblem,
    step: &Step,
    (before, after): (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
) -> Vec<Found> {
    let mut found = Vec::new();
    // The parameter turns back, yet no multiplier changes side: the mirror image of this branch goes on from there.
    let turns_at_crossing =
        step.unstable.0 == step.unstable.1 && step.crossings.len() == 1 && step.crossings[0].index == WATCH_FOLD;
    // Where none is near +1 at all, the parameter stands still to roundoff and its direction is noise.
    let idle = turns_at_crossing && !is_near_one(problem, after) && !is_near_one(problem, before);
    for crossing in step.crossings.iter().filter(|_| !idle) {
        let kind = match crossing.index {
            WATCH_FOLD => CriticalKind::Fold,
            WATCH_DOUBLING => CriticalKind::Doubling,
            _ => continue,
        };
        found.push(match problem.locate(kind, crossing.index, before, after) {
            Ok(located) => located_event(problem, located, (before, after), plan),
            Err(fault) => bracketed(problem, kind, fault.bracket, (before, after), plan),
        });
    }
    if turns_at_crossing && let Some(event) = found.last_mut() {
        event.kind = EventKind::Branching;
        event.located = None;
        event.note = "the parameter turns back but no multiplier changes side: another branch crosses here, as at a \
                      pitchfork met from one of its two sides; not followed"
            .into();
    }
    if let Some(event) = remaining_change(problem, step, (before, after), plan) {
        found.push(event);
    }
    found.sort_by(|a, b| (plan.sign * a.distance).total_cmp(&(plan.sign * b.distance)));
    if let Some(landing) = step.landing {
        found.push(landing_event(problem, landing, after, plan));
    }
    found
}

/// Whether some real multiplier is near +1, as it must be beside a crossing of branches.
fn is_near_one(problem: &mut CycleProblem, station: &CycleStation) -> bool {
    /// |log mu| that no multiplier stays beyond within a stride of a crossing.
    const NEAR: f64 = 1.0;
    problem
        .spectrum(&station.point)
        .ok()
        .and_then(|spectrum| spectrum.nearest_to_one())
        .is_some_and(|log| log.abs() < NEAR)
}

/// Note of an event that its bracket holds to the asked accuracy.
pub(crate) const LOCATED_BY_BRACKET: &str = "located by its bracket";

/// An event known by its bracket alone. Where the branch turns so sharply that Newton's method finds no footing, the
/// bracket may still hold the value to the asked accuracy; then it is the event, else it is unresolved.
fn bracketed(
    problem: &mut CycleProblem,
    kind: CriticalKind,
    (a, b): (f64, f64),
    (before, after): (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
) -> Found {
    let width = plan.study.range.1 - plan.study.range.0;
    let scale = width.max(a.abs());
    let profile_error = problem.profile_error(&before.point).max(problem.profile_error(&after.point));
    // A fold may lie beyond both ends of its bracket; over the whole step it lies within the change of the parameter.
    let (p, q) = (before.point.unknowns.parameter, after.point.unknowns.parameter);
    let spread = if kind == CriticalKind::Fold { (p - q).abs() } else { 0.5 * (a - b).abs() };
    let error = spread + profile_error * scale * SUPERCONVERGENCE + 1e2 * f64::EPSILON * scale;
    let tight = error <= plan.study.file.accuracy * scale;
    let (word, event_kind, angle) = match kind {
        CriticalKind::Fold => ("fold", EventKind::Fold, 0.0),
        CriticalKind::Doubling => ("period doubling", EventKind::Doubling, std::f64::consts::PI),
    };
    let note = if tight {
        LOCATED_BY_BRACKET.to_string()
    } else {
        format!("a {word} lies in this interval but was not located")
    };
    let mut event = unresolved(before, (0.5 * (a + b), error), note, plan);
    if tight {
        (event.kind, event.angle) = (event_kind, Some(angle));
    }
    event
}

/// Thresholds are far more accurate than profiles (order 2m against m+1), as long as the profile is resolved; a
/// thousandth of the profile's error is a cautious share.
pub(crate) const SUPERCONVERGENCE: f64 = 1e-3;

fn located_event(
    problem: &mut CycleProblem,
    located: Located,
    (before, after): (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
) -> Found {
    let distance = before.distance + located.share * (after.distance - before.distance);
    let mut form = None;
    let (kind, angle, criticality, note) = match located.kind {
        CriticalKind::Fold => {
            let note = problem.fold_form(&located).map(|b| format!("normal form coefficient b = {b:.6e}"));
            (EventKind::Fold, 0.0, None, note)
        }
        CriticalKind::Doubling => match problem.doubling_form(&located) {
            Some(found) => {
                form = Some(found);
                let note = format!("normal form coefficient c = {:.6e}", found.c);
                (EventKind::Doubling, std::f64::consts::PI, Some(criticality(found.c)), Some(note))
            }
            None => (EventKind::Doubling, std::f64::consts::PI, None, None),
        },
    };
    Found {
        kind,
        point: located.point.clone(),
        distance: plan.sign * distance,
        error: Some(located.error),
        period_error: Some(located.period_error),
        angle: Some(angle),
        criticality,
        note: note.unwrap_or_default(),
        located: Some(located),
        form,
    }
}

fn criticality(c: f64) -> Criticality {
    if c < 0.0 { Criticality::Supercritical } else { Criticality::Subcritical }
}

/// A change of the unstable count that folds and doublings leave over: narrowed by bisection and told as what crosses.
fn remaining_change(
    problem: &mut CycleProblem,
    step: &Step,
    (before, after): (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
) -> Option<Found> {
    let single = step.crossings.iter().filter(|c| c.index == WATCH_FOLD || c.index == WATCH_DOUBLING).count();
    let change = step.unstable.0.abs_diff(step.unstable.1);
    // With folds or doublings in the same step the count cannot be split; they were located above.
    if change == 0 || (single > 0 && is_explained(step)) {
        return None;
    }
    let count = before.watch.unstable_count;
    let (low, high) = problem.narrow(before, after, |station| station.watch.unstable_count == count);
    let (a, b) = (low.point.unknowns.parameter, high.point.unknowns.parameter);
    // The count itself hangs on multipliers of profiles with their own error.
    let resolution = SUPERCONVERGENCE * problem.profile_error(&high.point);
    let scale = (plan.study.range.1 - plan.study.range.0).max(a.abs());
    let half_width = 0.5 * (a - b).abs() + (resolution + f64::EPSILON) * scale;
    let critical = problem.spectrum(&high.point).ok().and_then(|spectrum| {
        spectrum.multipliers.into_iter().min_by(|x, y| x.log_modulus.abs().total_cmp(&y.log_modulus.abs()))
    });
    let (kind, angle, note) = match critical {
        Some(mu) if change == 2 && mu.angle != 0.0 && mu.angle != std::f64::consts::PI => {
            (EventKind::Torus, Some(mu.angle.abs()), "located by bisection of the unstable count")
        }
        Some(mu) if change == 1 && mu.angle == 0.0 => (
            EventKind::Branching,
            Some(0.0),
            "a multiplier passes +1 without a fold; located by bisection, kind not decided, crossing branch not followed",
        ),
        _ => (EventKind::Unresolved, None, "the number of unstable multipliers changes here for a reason not resolved"),
    };
    let mut event = unresolved(&low, (0.5 * (a + b), half_width), note.into(), plan);
    (event.kind, event.angle) = (kind, angle);
    event.period_error = Some(period_error_between(problem, &low, &high));
    Some(event)
}

/// Error of the period at the lower end of an interval for one anywhere inside: the change over the interval, and the error
/// of the cycle itself on its own mesh.
fn period_error_between(problem: &mut CycleProblem, low: &CycleStation, high: &CycleStation) -> f64 {
    let period = low.point.unknowns.period;
    let own = match problem.refine(&low.point) {
        Ok((fine, error)) => (fine.unknowns.period - period).abs() + error,
        Err(_) => PERIOD_OF_INTERVAL * period,
    };
    (high.point.unknowns.period - period).abs() + own
}

/// An event that is known by an interval of the parameter; its period is that of the station, known to its profile's
/// accuracy only.
pub(crate) fn unresolved(
    station: &CycleStation,
    (value, half_width): (f64, f64),
    note: String,
    plan: &WalkPlan<'_>,
) -> Found {
    let mut point = station.point.clone();
    let period_error = PERIOD_OF_INTERVAL * point.unknowns.period;
    point.unknowns.parameter = value;
    Found {
        kind: EventKind::Unresolved,
        point,
        distance: plan.sign * station.distance,
        error: Some(half_width),
        period_error: Some(period_error),
        angle: None,
        criticality: None,
        note,
        located: None,
        form: None,
    }
}

fn landing_event(problem: &mut CycleProblem, landing: Landing, after: &CycleStation, plan: &WalkPlan<'_>) -> Found {
    let kind = match landing {
        Landing::Edge(_) => EventKind::Edge,
        Landing::Target(_) => EventKind::Target,
    };
    at_parameter(problem, kind, &after.point, plan.sign * after.distance)
}

/// An event at a given parameter value: the value is exact, the period's error from a refined mesh.
pub(crate) fn at_parameter(problem: &mut CycleProblem, kind: EventKind, point: &CyclePoint, distance: f64) -> Found {
    let (point, period_error) = match problem.refine(point) {
        Ok((fine, error)) => (fine, Some(error)),
        Err(_) => (point.clone(), None),
    };
    Found {
        kind,
        point,
        distance,
        error: Some(0.0),
        period_error,
        angle: None,
        criticality: None,
        note: String::new(),
        located: None,
        form: None,
    }
}

/// Relative error claimed for the period of an event known by an interval: the period varies along a stride of some
/// hundredths, and nothing better was computed.
const PERIOD_OF_INTERVAL: f64 = 1e-3;
