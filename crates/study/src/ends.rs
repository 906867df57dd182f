//! Why a walk ends: at rest, at its own birth, without bound, or as the follower says; in words.

use armilla_follow::{FollowEnd, Follower};
use armilla_record::{End, EndReason, EventKind, Point};
use armilla_stability::{CyclePoint, CycleProblem, Fault, SplitChange, WATCH_FOLD};

use crate::approach::Approach;
use crate::rest::{Motion, Rest, birth, guess};
use crate::step_events::{Found, SUPERCONVERGENCE, unresolved};
use crate::study::Study;
use crate::walk::{CycleStation, WalkPlan, Walked};

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
    /// The branch's own birth, but the step ended on its parent: to be tried again shorter, and an end only then.
    Fell(End),
}

/// Whether the last step went through an equilibrium or through the branch's own birth; the walk is over then, and the
/// last point, already on the way back, is not kept. `motions` and `points` are what was seen before.
pub(crate) fn passed_through(
    follower: &mut Follower<'_, CycleProblem>,
    plan: &WalkPlan<'_>,
    motions: &[Motion],
    points: &[Walked],
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
        let Some(rest) = birth(problem, motions, scale(plan)) else { return Passage::TooLong };
        let rest = rest.located(problem, &before.point, width(plan));
        return Passage::End(at_rest_end(plan, last, &rest), Some(rest));
    }
    // Whatever its turns: they count crossings of one state, which may have the longer period alone.
    match problem.split_between(&before.point, &after.point) {
        SplitChange::None => Passage::None,
        SplitChange::Turned => {
            let sizes = sizes(points, before, Some(after), |point| problem.split(point));
            Passage::End(returned(&sizes, worst_profile(points, problem.profile_error(&before.point)), plan), None)
        }
        SplitChange::Gone => {
            let sizes = sizes(points, before, None, |point| problem.split(point));
            Passage::Fell(returned(&sizes, worst_profile(points, problem.profile_error(&before.point)), plan))
        }
    }
}

/// The end of a walk at an equilibrium.
fn at_rest_end(plan: &WalkPlan<'_>, last: f64, rest: &Rest) -> End {
    let value = rest.value;
    let words = format!("shrinks to an equilibrium at {} = {}", with_unit_name(plan), known(plan, (value, rest.error)));
    end(EndReason::Equilibrium { value }, last, words)
}

fn width(plan: &WalkPlan<'_>) -> f64 {
    plan.study.range.1 - plan.study.range.0
}

/// The Hopf point that a walk got stuck before, if its cycle had all but shrunk to an equilibrium and one is located there.
pub(crate) fn stuck_at_rest(
    follower: &mut Follower<'_, CycleProblem>,
    plan: &WalkPlan<'_>,
    motions: &[Motion],
) -> Option<(End, Rest)> {
    let stuck = matches!(follower.end(), Some(FollowEnd::Stuck | FollowEnd::Outside(_)));
    if !stuck || !has_shrunk(motions) {
        return None;
    }
    let (problem, _, current) = follower.parts();
    let (last, period) = (current.point.unknowns.parameter, current.point.unknowns.period);
    // No errors are known of what the walk did not reach; the range within which the located point counts is that of
    // `Rest::located` alone.
    let rest = Rest { value: guess(motions)?, error: 0.0, period, period_error: period, located: None };
    let rest = rest.located(problem, &current.point, width(plan));
    rest.located.is_some().then(|| (at_rest_end(plan, last, &rest), rest))
}

/// Whether the motion has all but come to rest.
fn has_shrunk(motions: &[Motion]) -> bool {
    let largest = motions.iter().map(|m| m.size).fold(0.0, f64::max);
    motions.last().is_some_and(|m| m.size < NEARLY_AT_REST * largest) && motions.len() > 2
}

/// The end of a walk at the birth of its branch by a period doubling.
fn returned(sizes: &[(f64, f64)], profile_error: f64, plan: &WalkPlan<'_>) -> End {
    let limit = even_limit(sizes, profile_error, plan);
    let at = format!("{} = {}", with_unit_name(plan), known(plan, limit));
    let words = if plan.doubled {
        format!("returns to its parent at {at}")
    } else {
        format!("returns to the cycle of half its period that it was born from by a period doubling, at {at}")
    };
    end(EndReason::ReturnsToParent, limit.0, words)
}

/// Sizes of what vanishes, with the parameter, at the last stations: in the metric of now, which may not be that of each
/// station when it was passed.
fn sizes(
    points: &[Walked],
    before: &CycleStation,
    after: Option<&CycleStation>,
    size: impl Fn(&CyclePoint) -> f64,
) -> Vec<(f64, f64)> {
    /// Difference of two sizes, relative, below which their weights are roundoff.
    const DIFFERENT: f64 = 0.1;
    // `before` is the last of the points, unless it is the first station of the walk.
    let earlier = &points[points.len().saturating_sub(EVEN_POINTS + WITNESSES)..];
    let mut stations: Vec<&CyclePoint> = earlier.iter().map(|walked| &walked.cycle).collect();
    if stations.is_empty() {
        stations.push(&before.point);
    }
    stations.extend(after.map(|after| &after.point));
    let mut kept: Vec<(f64, f64)> = Vec::new();
    for point in stations {
        let found = (size(point), point.unknowns.parameter);
        // Of two of about the same size the smaller one, nearer to the end.
        kept.retain(|(other, _)| (other - found.0).abs() > DIFFERENT * other.max(found.0) || *other < found.0);
        if kept.iter().all(|(other, _)| (other - found.0).abs() > DIFFERENT * other.max(found.0)) {
            kept.push(found);
        }
    }
    kept
}

/// Largest error of a profile among the last stations.
fn worst_profile(points: &[Walked], last: f64) -> f64 {
    let earlier = &points[points.len().saturating_sub(EVEN_POINTS + WITNESSES)..];
    earlier.iter().map(|walked| walked.point.profile_error).fold(last, f64::max)
}

/// A limit with its error, in the digits that the error leaves; the error is rounded up, with what the digits leave out.
fn known(plan: &WalkPlan<'_>, (value, error): (f64, f64)) -> String {
    let shown = if value.abs() < error {
        0.0
    } else if error > 0.0 {
        let digits = (value.abs().log10().floor() - error.log10().floor()).clamp(0.0, 14.0) as usize + 1;
        format!("{value:.digits$e}").parse::<f64>().unwrap_or(value)
    } else {
        return short(plan.study, value);
    };
    format!("{shown} ± {}", rounded_up(error + (shown - value).abs()))
}

/// A positive number in one digit, rounded up.
pub(crate) fn rounded_up(number: f64) -> String {
    let near = format!("{number:.0e}");
    if near.parse::<f64>().is_ok_and(|near| near >= number) {
        return near;
    }
    // The next digit up; 9 turns into 1 of the next decade.
    let decade = number.log10().floor();
    let digit = (number / 10f64.powf(decade)).floor() + 1.0;
    if digit > 9.0 { format!("1e{}", decade + 1.0) } else { format!("{digit}e{decade}") }
}

/// A number for a sentence: ten digits, and 0 where it is 0 to the roundoff of the asked range.
pub(crate) fn short(study: &Study, value: f64) -> String {
    shown(study.range, value)
}

/// [`short`] for an asked range.
pub(crate) fn shown(range: (f64, f64), value: f64) -> String {
    let scale = (range.1 - range.0).max(range.0.abs()).max(range.1.abs());
    let rounded = if value.abs() < 1e-11 * scale { 0.0 } else { value };
    let shown = format!("{rounded:.9e}").parse::<f64>().unwrap_or(rounded);
    format!("{shown}")
}

/// Stations a limit is told from.
const EVEN_POINTS: usize = 3;
/// Further stations its error is told from: one could agree by chance where two orders cancel.
const WITNESSES: usize = 2;
/// Factor on the change that a further station makes to a limit: the change is its error to leading order.
const ORDER_MARGIN: f64 = 2.0;

/// Parameter where a size vanishes, and its error: near a Hopf point the parameter is an even function of the amplitude
/// (Hopf 1942), near a period doubling of the difference between the turns, so a polynomial in the square of the size
/// through the nearest stations is extrapolated; further stations tell what it is off. Errors of the sizes, integrals over
/// the cycle, and of the parameter converge as fast as thresholds do.
fn even_limit(sizes: &[(f64, f64)], profile_error: f64, plan: &WalkPlan<'_>) -> (f64, f64) {
    let mut sizes = sizes.to_vec();
    sizes.sort_by(|a, b| a.0.total_cmp(&b.0));
    sizes.truncate(EVEN_POINTS + WITNESSES);
    // Where stations are few, the last one stays a witness.
    let told = EVEN_POINTS.min(sizes.len() - 1).max(1);
    let value = at_rest(&sizes[..told]);
    let moved = (told..=sizes.len()).map(|count| (at_rest(&sizes[..count]) - value).abs()).fold(0.0, f64::max);
    let by_order = ORDER_MARGIN * moved;
    let scale = (plan.study.range.1 - plan.study.range.0).max(value.abs());
    (value, by_order + (SUPERCONVERGENCE * profile_error + ROUNDOFF_UNITS * f64::EPSILON) * scale)
}

/// Units in the last place that a parameter is known to.
const ROUNDOFF_UNITS: f64 = 16.0;

/// Lagrange's polynomial in the square of the size, at 0.
fn at_rest(sizes: &[(f64, f64)]) -> f64 {
    let mut value = 0.0;
    for (i, (size, parameter)) in sizes.iter().enumerate() {
        let others = sizes.iter().enumerate().filter(|(j, _)| *j != i);
        let weight: f64 = others.map(|(_, (other, _))| other * other / (other * other - size * size)).product();
        value += weight * parameter;
    }
    // Two equal sizes leave no weights; the last station then stands for the end.
    if value.is_finite() { value } else { sizes[sizes.len() - 1].1 }
}

/// The birth of the cycle at an equilibrium as an event: the last cycle shrunk to the equilibrium, or to its mean where that
/// was not located.
pub(crate) fn birth_of_cycle(before: &CycleStation, problem: &CycleProblem, rest: Rest, plan: &WalkPlan<'_>) -> Found {
    let means = problem.profile(&before.point).means();
    let (state, criticality, note) = match rest.located {
        Some(birth) => (birth.state, birth.criticality, birth.note),
        None => (means, None, "extrapolated from the last cycles".to_string()),
    };
    let mut event = unresolved(before, (rest.value, rest.error), note, plan);
    (event.point.unknowns.period, event.period_error) = (rest.period, Some(rest.period_error));
    for (k, node) in event.point.unknowns.nodes.iter_mut().enumerate() {
        *node = state[k % state.len()];
    }
    // One motion farther along the walk, so that the event stands behind the last point.
    event.distance = plan.sign * (before.distance + problem.motion(&before.point));
    (event.kind, event.criticality) = (EventKind::Hopf, criticality);
    event
}

/// The event of a walk whose period grows without bound, at the limit, and its end.
pub(crate) fn blown_up(current: &CycleStation, plan: &WalkPlan<'_>, approach: Approach) -> (Found, End) {
    let law = approach.law.words();
    let mut event = unresolved(current, (approach.limit, approach.error), format!("the period grows {law}"), plan);
    event.kind = EventKind::PeriodBlowUp;
    event.period_error = None;
    let name = with_unit_name(plan);
    let limit = known(plan, (approach.limit, approach.error));
    let words = format!("the period grows without bound towards {name} = {limit} ({law})");
    (event, end(EndReason::PeriodBlowUp, current.point.unknowns.parameter, words))
}

/// Size of the parameter for roundoff.
fn scale(plan: &WalkPlan<'_>) -> f64 {
    let (low, high) = plan.study.range;
    (high - low).max(low.abs()).max(high.abs())
}

fn with_unit_name(plan: &WalkPlan<'_>) -> String {
    plan.study.file.follow.parameter.clone()
}

/// The end of a walk whose last cycle is not resolved any more: what follows from it would be the mesh's doing.
pub(crate) fn resolution_lost(point: &Point, plan: &WalkPlan<'_>) -> Option<End> {
    /// Error of a profile, relative to the range of a state, that shows in a figure. Accuracies asked for lie below, and a
    /// mesh that may grow keeps to them; one fixed by the study, or at its limit, may come here.
    const LOST: f64 = 1e-2;
    // Written so that NaN is lost, too.
    let resolved = point.profile_error <= LOST.max(plan.study.file.accuracy);
    let words = || {
        format!(
            "resolution limit: the cycle is not resolved any more at {} = {}: on {} intervals its error is {:.1e} of its range",
            with_unit_name(plan),
            short(plan.study, point.value),
            point.intervals,
            point.profile_error
        )
    };
    (!resolved).then(|| end(EndReason::ResolutionLost, point.value, words()))
}

/// What stopped the evaluation, with the names of the model.
pub(crate) fn fault_words(study: &Study, fault: &Fault) -> String {
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

/// Words for a second multiplier that is 1 where a walk is stuck.
fn second_multiplier_at_one(follower: &mut Follower<'_, CycleProblem>) -> &'static str {
    /// |log mu| that no fold on the way leaves at a shortest stride.
    const NEAR: f64 = 1e-4;
    /// Parameter component of the tangent that a fold leaves none of.
    const MOVES: f64 = 1e-3;
    let (problem, _, current) = follower.parts();
    let moves = current.watch.values[WATCH_FOLD].value.abs() > MOVES;
    let (point, near) = (current.point.clone(), |log: f64| log.abs() < NEAR);
    let at_one = problem.spectrum(&point).ok().and_then(|spectrum| spectrum.nearest_to_one()).is_some_and(near);
    if moves && at_one { "; a second multiplier comes to 1 there, as where cycles fill a continuum" } else { "" }
}

pub(crate) fn end_of_follower(
    follower: &mut Follower<'_, CycleProblem>,
    plan: &WalkPlan<'_>,
    motions: &[Motion],
) -> End {
    let no_multipliers = follower.parts().0.spectrum_fault().map(ToString::to_string);
    let beside_one = second_multiplier_at_one(follower);
    let value = follower.current().point.unknowns.parameter;
    let name = with_unit_name(plan);
    let here = short(plan.study, value);
    // A motion under a forcing has no state of rest to shrink to.
    let shrunk = !follower.parts().0.is_forced() && has_shrunk(motions);
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
            let rest = (guess(motions).unwrap_or(value), accuracy);
            let words = format!("shrinks to an equilibrium at {name} = {}", known(plan, rest));
            end(EndReason::Equilibrium { value: rest.0 }, value, words)
        }
        Some(FollowEnd::Outside(fault)) => {
            end(EndReason::NotFinite, value, format!("{} beyond {name} = {here}", fault_words(plan.study, fault)))
        }
        Some(FollowEnd::Stuck) | None => {
            let words = match no_multipliers {
                Some(why) => format!("the multipliers could not be computed beyond {name} = {here}: {why}"),
                None => format!(
                    "resolution limit: the corrector fails at the shortest stride at {name} = {here}{beside_one}"
                ),
            };
            end(EndReason::Stuck, value, words)
        }
    }
}

#[cfg(test)]
mod tests {
    use super::rounded_up;

    #[test]
    fn errors_are_rounded_up() {
        for (number, text) in
            [(1.2e-9, "2e-9"), (9.4e-3, "1e-2"), (3e-7, "3e-7"), (0.96, "1e0"), (5.5, "6e0"), (1e-12, "1e-12")]
        {
            let shown = rounded_up(number);
            assert_eq!(shown, text);
            assert!(shown.parse::<f64>().expect("a number") >= number);
        }
    }
}
