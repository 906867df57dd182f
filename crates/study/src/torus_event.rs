//! Torus points as events: angle, side, strong resonances, in words.

use armilla_record::{Criticality, EventKind};
use armilla_stability::{CycleProblem, LocatedTorus, TorusForm};

use crate::ends::rounded_up;
use crate::step_events::Found;
use crate::walk::{CycleStation, WalkPlan};

/// Angle from the real axis within which a pair may be two real multipliers that the accuracy does not tell apart.
pub(crate) const REAL: f64 = 1e-4;

/// The torus point between two stations; none where it is not located.
pub(crate) fn between(
    problem: &mut CycleProblem,
    (before, after): (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
) -> Option<Found> {
    let located = problem.locate_torus(before, after).ok()?;
    let distance = before.distance + located.share * (after.distance - before.distance);
    event(problem, located, distance, plan)
}

/// The torus point a station stands on.
pub(crate) fn at(problem: &mut CycleProblem, station: &CycleStation, plan: &WalkPlan<'_>) -> Option<Found> {
    let located = problem.locate_torus_at(station)?;
    event(problem, located, station.distance, plan)
}

fn event(problem: &mut CycleProblem, located: LocatedTorus, distance: f64, plan: &WalkPlan<'_>) -> Option<Found> {
    if located.angle < REAL || located.angle > std::f64::consts::PI - REAL {
        return None;
    }
    let (criticality, note) = side(problem, &located, plan.study.file.accuracy);
    Some(Found {
        kind: EventKind::Torus,
        distance: plan.sign * distance,
        error: Some(located.error),
        period_error: Some(located.period_error),
        angle: Some(located.angle),
        criticality,
        note: format!("angle known to {}; {note}", rounded_up(located.angle_error)),
        located: None,
        form: None,
        crossing: None,
        point: located.point,
    })
}

/// The side on which the torus is born, where it may be claimed, and what is said of it.
fn side(problem: &mut CycleProblem, located: &LocatedTorus, accuracy: f64) -> (Option<Criticality>, String) {
    if let Some(order) = located.strong_resonance(accuracy) {
        return (None, resonance_words(order));
    }
    let Some(form) = problem.torus_form(located) else {
        return (None, "the normal form could not be computed, so no side is claimed".into());
    };
    let TorusForm { d: (re, im), error, .. } = form;
    let shown = format!("normal form coefficient d = {re:.6e} {} {:.6e} i", if im < 0.0 { '-' } else { '+' }, im.abs());
    match () {
        () if !(re.abs() > error) => {
            (None, format!("{shown}, its real part known to {}, so no side is claimed", rounded_up(error)))
        }
        () if re < 0.0 => (Some(Criticality::Supercritical), shown),
        () => (Some(Criticality::Subcritical), shown),
    }
}

fn resonance_words(order: usize) -> String {
    let angle = match order {
        1 => "0",
        2 => "pi",
        3 => "2 pi/3",
        _ => "pi/2",
    };
    format!(
        "strong resonance of order {order}: the angle cannot be told from {angle}, where the normal form decides nothing; \
         no side is claimed"
    )
}
