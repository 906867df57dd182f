//! Why a walk ends: at rest, at its own birth, without bound, or as the follower says; in words.

use armilla_follow::{FollowEnd, Follower};
use armilla_record::{End, EndReason, EventKind};
use armilla_stability::{CyclePoint, CycleProblem, Fault};

use crate::approach::Approach;
use crate::rest::{Motion, Rest, extrapolate_to_rest};
use crate::step_events::{Found, SUPERCONVERGENCE, unresolved};
use crate::study::Study;
use crate::walk::{CycleStation, WalkPlan};

/// An end from its parts.
pub(crate) fn end(reason: EndReason, value: f64, words: String) -> End {
    End { reason, value, words }
}

/// What the last step went through.
pub(crate) enum Passage {
    /// Nothing.
    None,
    /// An equilibrium, in a stride so long that nothing tells where: to be tried again shorter.
    TooLong,
    /// An equilibrium, with what was extrapolated, or the branch's own birth.
    End(End, Option<Rest>),
}

/// Whether the last step went through an equilibrium or through the branch's own birth; the walk is over then, and the
/// last point, already on the way back, is not kept.
pub(crate) fn passed_through(
    follower: &mut Follower<'_, CycleProblem>,
    plan: &WalkPlan<'_>,
    motions: &[Motion],
) -> Passage {
    /// Share of the largest motion of the walk that the last cycle before the passage must have fallen below.
    const SMALL: f64 = 0.3;
    let (problem, before, after) = follower.parts();
    let Some(before) = before else { return Passage::None };
    let last = before.point.unknowns.parameter;
    if problem.passed_equilibrium(&before.point, &after.point) {
        let largest = motions.iter().map(|motion| motion.size).fold(0.0, f64::max);
        if problem.motion(&before.point) > SMALL * largest || motions.len() < 4 {
            return Passage::TooLong;
        }
        let point = before.point.clone();
        let uncertainty = uncertainty(problem, &point, motions, plan);
        let Some(rest) = extrapolate_to_rest(motions, uncertainty) else { return Passage::TooLong };
        let value = rest.value;
        let words = format!("shrinks to an equilibrium at {} = {}", with_unit_name(plan), short(plan.study, value));
        return Passage::End(end(EndReason::Equilibrium { value }, last, words), Some(rest));
    }
    if plan.turns.is_multiple_of(2) && problem.passed_birth(&before.point, &after.point) {
        let value = birth_value(problem, before, after);
        let words = if plan.doubled {
            format!("returns to its parent at {} = {}", with_unit_name(plan), short(plan.study, value))
        } else {
            format!(
                "returns to the cycle of half its turns it was born from by a period doubling, at {} = {}",
                with_unit_name(plan),
                short(plan.study, value)
            )
        };
        return Passage::End(end(EndReason::ReturnsToParent, value, words), None);
    }
    Passage::None
}

/// Parameter where the split between the turns vanishes: even in the split, so linear in its square.
fn birth_value(problem: &CycleProblem, before: &CycleStation, after: &CycleStation) -> f64 {
    let squares = [before, after].map(|station| problem.split(&station.point).powi(2));
    let values = [before, after].map(|station| station.point.unknowns.parameter);
    let value = (values[0] * squares[1] - values[1] * squares[0]) / (squares[1] - squares[0]);
    let spread = (values[0] - values[1]).abs();
    // Nearly equal splits on both sides leave the quotient to roundoff; the birth lies close to both then.
    if (value - values[0]).abs() <= 10.0 * spread { value } else { values[0] }
}

/// A number for a sentence: ten digits, and 0 where it is 0 to the roundoff of the asked range.
pub(crate) fn short(study: &Study, value: f64) -> String {
    let scale = (study.range.1 - study.range.0).max(study.range.0.abs()).max(study.range.1.abs());
    let rounded = if value.abs() < 1e-11 * scale { 0.0 } else { value };
    let shown = format!("{rounded:.9e}").parse::<f64>().unwrap_or(rounded);
    format!("{shown}")
}

/// The birth of the cycle at an equilibrium as an event: the last cycle shrunk to its mean.
pub(crate) fn birth_of_cycle(before: &CycleStation, problem: &CycleProblem, rest: Rest, plan: &WalkPlan<'_>) -> Found {
    let note = "extrapolated from the last cycles".to_string();
    let mut event = unresolved(before, (rest.value, rest.error), note, plan);
    (event.point.unknowns.period, event.period_error) = (rest.period, Some(rest.period_error));
    let means = problem.profile(&before.point).means();
    for (k, node) in event.point.unknowns.nodes.iter_mut().enumerate() {
        *node = means[k % means.len()];
    }
    // One motion farther along the walk, so that the event stands behind the last point.
    event.distance = plan.sign * (before.distance + problem.motion(&before.point));
    event.kind = EventKind::Hopf;
    event
}

/// The event of a walk whose period grows without bound, at the limit, and its end.
pub(crate) fn blown_up(current: &CycleStation, plan: &WalkPlan<'_>, approach: Approach) -> (Found, End) {
    let law = approach.law.words();
    let mut event = unresolved(current, (approach.limit, approach.error), format!("the period grows {law}"), plan);
    event.kind = EventKind::PeriodBlowUp;
    let name = with_unit_name(plan);
    let words =
        format!("the period grows without bound towards {name} = {} ({law})", short(plan.study, approach.limit));
    (event, end(EndReason::PeriodBlowUp, current.point.unknowns.parameter, words))
}

/// Errors of the parameter and of the period of a small cycle on its own mesh, at its size of motion: from how both move
/// on the mesh with every interval halved, at the same parameter.
fn uncertainty(problem: &mut CycleProblem, point: &CyclePoint, motions: &[Motion], plan: &WalkPlan<'_>) -> (f64, f64) {
    /// What moves one way here may move the other way at a neighbour.
    const MARGIN: f64 = 4.0;
    /// Units in the last place. The conditioning of a small cycle would tell some hundred times more: it counts roundoff
    /// that turns the phase, which neither parameter nor period see.
    const UNITS: f64 = 64.0;
    let (period, scale) = (point.unknowns.period, scale(plan));
    let Ok((fine, _)) = problem.refine(point) else {
        let relative = SUPERCONVERGENCE * problem.profile_error(point);
        return (relative * scale, relative * period);
    };
    let square = |size: f64| size * size;
    // The last point lies beyond the equilibrium; the two before tell how the parameter goes with the motion.
    let slope = match motions {
        [.., far, near, _] => (far.parameter - near.parameter) / (square(far.size) - square(near.size)),
        _ => 0.0,
    };
    let moved = slope * (square(problem.motion(&fine)) - square(problem.motion(point)));
    let drift = (fine.unknowns.period - period).abs() / period;
    let relative = MARGIN * drift + UNITS * f64::EPSILON;
    (MARGIN * moved.abs() + relative * scale, relative * period)
}

/// Size of the parameter for roundoff.
fn scale(plan: &WalkPlan<'_>) -> f64 {
    let (low, high) = plan.study.range;
    (high - low).max(low.abs()).max(high.abs())
}

fn with_unit_name(plan: &WalkPlan<'_>) -> String {
    plan.study.file.follow.parameter.clone()
}

/// What stopped the evaluation, with the names of the model.
fn fault_words(study: &Study, fault: &Fault) -> String {
    match fault {
        Fault::NotFinite { state, states, .. } => {
            let name = &study.model.states()[*state].name;
            let at = crate::words::listed(&crate::start::named(study, states));
            let formula = study.model.rates().get(*state).map(|f| format!(", {},", f.text)).unwrap_or_default();
            format!("the rate of `{name}`{formula} or a derivative of it is not finite at {at},")
        }
        Fault::Singular(_) => "the linear system is singular".into(),
    }
}

/// Motion, relative to the largest along the walk, below which a walk that is stuck has shrunk to an equilibrium.
const NEARLY_AT_REST: f64 = 0.02;

pub(crate) fn end_of_follower(follower: &Follower<'_, CycleProblem>, plan: &WalkPlan<'_>, motions: &[Motion]) -> End {
    let value = follower.current().point.unknowns.parameter;
    let name = with_unit_name(plan);
    let here = short(plan.study, value);
    let largest = motions.iter().map(|m| m.size).fold(0.0, f64::max);
    let shrunk = motions.last().is_some_and(|m| m.size < NEARLY_AT_REST * largest) && motions.len() > 2;
    match follower.end() {
        Some(FollowEnd::Edge(edge)) => {
            end(EndReason::Edge, *edge, format!("reaches the edge of the asked range, {name} = {edge}"))
        }
        Some(FollowEnd::Closed) => end(EndReason::Closed, value, "closed upon itself: its start was met again".into()),
        Some(FollowEnd::Budget) => {
            end(EndReason::Budget, value, format!("all points allowed by `pursue` were used at {name} = {here}"))
        }
        Some(FollowEnd::Stuck | FollowEnd::Outside(_)) if shrunk => {
            let accuracy = plan.study.file.accuracy * scale(plan);
            let rest = extrapolate_to_rest(motions, (accuracy, accuracy)).map_or(value, |rest| rest.value);
            let words = format!("shrinks to an equilibrium at {name} = {}", short(plan.study, rest));
            end(EndReason::Equilibrium { value: rest }, value, words)
        }
        Some(FollowEnd::Outside(fault)) => {
            end(EndReason::NotFinite, value, format!("{} beyond {name} = {here}", fault_words(plan.study, fault)))
        }
        Some(FollowEnd::Stuck) => {
            end(EndReason::Stuck, value, format!("the corrector fails at the shortest stride at {name} = {here}"))
        }
        None => end(EndReason::Stuck, value, format!("the multipliers could not be computed at {name} = {here}")),
    }
}
