//! One direction of one branch: steps, events, the reason of the end.

use std::sync::atomic::{AtomicBool, Ordering};

use armilla_follow::{FollowEnd, Follower, Landing, Outcome, Settings, Station, Step};
use armilla_record::{Criticality, End, EndReason, EventKind, Point};
use armilla_stability::{
    CriticalKind, CyclePoint, CycleProblem, CycleTangent, DoublingForm, Fault, Located, WATCH_DOUBLING, WATCH_FOLD,
    WATCH_TORUS,
};

use crate::approach::{Approach, approach};
use crate::near_miss::{Sample, near_miss};
use crate::study::Study;

pub(crate) type CycleStation = Station<CyclePoint, CycleTangent>;

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

/// A point with its cycle.
pub(crate) struct Walked {
    pub point: Point,
    pub cycle: CyclePoint,
}

/// What a walk needs to know besides the problem.
pub(crate) struct WalkPlan<'a> {
    pub study: &'a Study,
    pub settings: Settings,
    pub turns: usize,
    /// Whether the branch was born at a doubling and may return to its parent.
    pub doubled: bool,
    /// +1 where distances grow with the walk, -1 where they fall.
    pub sign: f64,
    pub abort: &'a AtomicBool,
    /// Whether the walk ends at its first doubling.
    pub to_first_doubling: bool,
}

/// What a walk brings back.
pub(crate) struct Walk {
    pub points: Vec<Walked>,
    pub events: Vec<Found>,
    pub end: End,
}

/// Takes the points and events of a walk as they come.
pub(crate) trait WalkSink {
    fn point(&mut self, point: &Point);
    fn event(&mut self, problem: &CycleProblem, found: &Found);
}

/// Strides halved at most this often where the unstable count changes by something no event explains.
const RETRIES: usize = 8;

/// Walks from `first` to the end of this direction. The first station itself is not among the points.
pub(crate) fn walk(
    problem: &mut CycleProblem,
    first: (CyclePoint, CycleTangent),
    plan: &WalkPlan<'_>,
    sink: &mut dyn WalkSink,
) -> Walk {
    let start_value = first.0.unknowns.parameter;
    let mut walk =
        Walk { points: Vec::new(), events: Vec::new(), end: end(EndReason::Stuck, start_value, String::new()) };
    let mut follower = match Follower::start_along(problem, first.0, first.1, plan.settings.clone()) {
        Ok(follower) => follower,
        Err(_) => {
            walk.end.words = "the multipliers at its first cycle could not be computed".into();
            return walk;
        }
    };
    let mut retries = 0;
    // Distance up to which the last doubt reaches.
    let mut doubt_until = 0.0f64;
    let mut motions = vec![motion(&mut follower)];
    let mut periods = vec![period(&follower)];
    let mut samples = vec![samples_at(&follower)];
    loop {
        if plan.abort.load(Ordering::Relaxed) {
            let value = follower.current().point.unknowns.parameter;
            walk.end = end(EndReason::Interrupted, value, "stopped by the user".into());
            return walk;
        }
        let Outcome::Step(mut step) = follower.step() else { break };
        if retries == 0 {
            drop_idle_turns(&mut step);
        }
        match passed_through(&mut follower, plan, &mut motions) {
            Passage::None => {}
            Passage::TooLong if retries < RETRIES && follower.retract() => {
                motions.pop();
                retries += 1;
                continue;
            }
            Passage::TooLong => {}
            Passage::End(ended, rest) => {
                if let Some(rest) = rest {
                    let (problem, before, _) = follower.parts();
                    let event = birth_of_cycle(before.expect("a step has a station before it"), problem, rest, plan);
                    sink.event(problem, &event);
                    walk.events.push(event);
                }
                walk.end = ended;
                return walk;
            }
        }
        samples.truncate(walk.points.len() + 1);
        samples.push(samples_at(&follower));
        let doubtful = !is_explained(&step) || touches_zero(&samples);
        let reached = follower.current().distance;
        if doubtful && retries < RETRIES && follower.retract() {
            motions.pop();
            retries += 1;
            doubt_until = doubt_until.max(reached);
            continue;
        }
        let (problem, before, after) = follower.parts();
        let before = before.expect("a step has a station before it").clone();
        let after = after.clone();
        let found = events_of_step(problem, &step, (&before, &after), plan);
        // A fold beyond the edge: the walk should have ended on the edge before it, and does so in shorter strides.
        let beyond = |event: &Found| {
            let value = event.point.unknowns.parameter;
            event.kind == EventKind::Fold && (value < plan.study.range.0 || value > plan.study.range.1)
        };
        if found.iter().any(beyond) && retries < RETRIES && follower.retract() {
            motions.pop();
            retries += 1;
            doubt_until = doubt_until.max(reached);
            continue;
        }
        // The budget of retries belongs to the whole stretch that was in doubt, or the walk would creep towards a
        // singular point in ever shorter strides.
        if reached >= doubt_until {
            retries = 0;
        }
        let doubles = found.iter().any(|event| event.kind == EventKind::Doubling);
        let (problem, _, _) = follower.parts();
        for event in found {
            sink.event(problem, &event);
            walk.events.push(event);
        }
        match problem.describe(&after.point, plan.turns, plan.sign * after.distance) {
            Ok(point) => {
                sink.point(&point);
                walk.points.push(Walked { point, cycle: after.point });
            }
            Err(_) => break,
        }
        if plan.to_first_doubling && doubles {
            let value = follower.current().point.unknowns.parameter;
            walk.end = end(EndReason::Budget, value, "followed to its first doubling only, as a cascade asks".into());
            return walk;
        }
        periods.push(period(&follower));
        if follower.end().is_none()
            && let Some(approach) = approach(&periods, plan.study.range.1 - plan.study.range.0)
        {
            return blown_up(walk, &mut follower, plan, approach, sink);
        }
    }
    walk.end = end_of_follower(&mut follower, plan, &motions);
    walk
}

fn motion(follower: &mut Follower<'_, CycleProblem>) -> (f64, f64) {
    let (problem, _, current) = follower.parts();
    (problem.motion(&current.point), current.point.unknowns.parameter)
}

fn period(follower: &Follower<'_, CycleProblem>) -> (f64, f64) {
    let unknowns = &follower.current().point.unknowns;
    (unknowns.parameter, unknowns.period)
}

/// The end of a walk whose period grows without bound, with its event at the limit.
fn blown_up(
    mut walk: Walk,
    follower: &mut Follower<'_, CycleProblem>,
    plan: &WalkPlan<'_>,
    approach: Approach,
    sink: &mut dyn WalkSink,
) -> Walk {
    let (problem, _, current) = follower.parts();
    let mut event = unresolved(
        current,
        (approach.limit, approach.error),
        format!("the period grows {}", approach.law.words()),
        plan,
    );
    event.kind = EventKind::PeriodBlowUp;
    sink.event(problem, &event);
    let name = with_unit_name(plan);
    let words = format!(
        "the period grows without bound towards {name} = {} ({})",
        short(plan.study, approach.limit),
        approach.law.words()
    );
    walk.events.push(event);
    walk.end = end(EndReason::PeriodBlowUp, current.point.unknowns.parameter, words);
    walk
}

/// What the last step went through.
enum Passage {
    /// Nothing.
    None,
    /// An equilibrium, in a stride so long that nothing tells where: to be tried again shorter.
    TooLong,
    /// An equilibrium, with the value and error of its parameter, or the branch's own birth.
    End(End, Option<(f64, f64)>),
}

/// Whether the last step went through an equilibrium or through the branch's own birth; the walk is over then, and the
/// last point, already on the way back, is not kept.
fn passed_through(
    follower: &mut Follower<'_, CycleProblem>,
    plan: &WalkPlan<'_>,
    motions: &mut Vec<(f64, f64)>,
) -> Passage {
    /// Share of the largest motion of the walk that the last cycle before the passage must have fallen below.
    const SMALL: f64 = 0.3;
    motions.push(motion(follower));
    let (problem, before, after) = follower.parts();
    let Some(before) = before else { return Passage::None };
    let last = before.point.unknowns.parameter;
    if problem.passed_equilibrium(&before.point, &after.point) {
        let largest = motions.iter().map(|motion| motion.0).fold(0.0, f64::max);
        if problem.motion(&before.point) > SMALL * largest || motions.len() < 4 {
            return Passage::TooLong;
        }
        let value = extrapolate_to_rest(motions);
        let words = format!("shrinks to an equilibrium at {} = {}", with_unit_name(plan), short(plan.study, value));
        let error = rest_error(motions, value, plan);
        return Passage::End(end(EndReason::Equilibrium { value }, last, words), Some((value, error)));
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

/// Parameter at amplitude 0 from the last three points: near a Hopf point the parameter is an even function of the
/// amplitude (Hopf 1942), so a polynomial in its square through them is extrapolated.
fn extrapolate_to_rest(motions: &[(f64, f64)]) -> f64 {
    let last = &motions[motions.len().saturating_sub(3)..];
    let mut value = 0.0;
    for (i, (motion, parameter)) in last.iter().enumerate() {
        let weight: f64 = last
            .iter()
            .enumerate()
            .filter(|(j, _)| *j != i)
            .map(|(_, (other, _))| other * other / (other * other - motion * motion))
            .product();
        value += weight * parameter;
    }
    // Two equal amplitudes leave no weights; the last point then stands for the end.
    if value.is_finite() { value } else { last[last.len() - 1].1 }
}

/// The values that folds and doublings are watched by, at the present station.
fn samples_at(follower: &Follower<'_, CycleProblem>) -> [Sample; 2] {
    let station = follower.current();
    [WATCH_FOLD, WATCH_DOUBLING]
        .map(|index| Sample { distance: station.distance, value: station.watch.values[index].value })
}

/// Whether one of the watched values may have touched zero and turned back within the last step.
fn touches_zero(samples: &[[Sample; 2]]) -> bool {
    let [.., a, b, c] = samples else { return false };
    (0..2).any(|watched| near_miss([a[watched], b[watched], c[watched]]))
}

/// Takes out turnings of the parameter that are none: where it stands still to roundoff over a whole stride (in the
/// middle of a canard explosion, say) its sign flips at random, and no multiplier passes 1.
fn drop_idle_turns(step: &mut Step) {
    /// Parameter component of the unit tangent that no true fold stays below at both ends of a stride.
    const IDLE: f64 = 1e-6;
    if step.unstable.0 == step.unstable.1 {
        step.crossings.retain(|c| c.index != WATCH_FOLD || c.before.abs() > IDLE || c.after.abs() > IDLE);
    }
}

/// Estimated error of the extrapolated birth: how far the value moves when the point farthest from rest is left out, and
/// the share of the profiles' own error.
fn rest_error(motions: &[(f64, f64)], value: f64, plan: &WalkPlan<'_>) -> f64 {
    let last = &motions[motions.len().saturating_sub(3)..];
    let farthest = last.iter().enumerate().max_by(|a, b| a.1.0.total_cmp(&b.1.0)).map_or(0, |(index, _)| index);
    let without: Vec<(f64, f64)> =
        last.iter().enumerate().filter(|(index, _)| *index != farthest).map(|(_, motion)| *motion).collect();
    let scale = (plan.study.range.1 - plan.study.range.0).max(value.abs());
    (extrapolate_to_rest(&without) - value).abs() + SUPERCONVERGENCE * plan.study.file.accuracy * scale
}

/// The birth of the cycle at an equilibrium as an event: the last cycle shrunk to its mean.
fn birth_of_cycle(
    before: &CycleStation,
    problem: &CycleProblem,
    (value, error): (f64, f64),
    plan: &WalkPlan<'_>,
) -> Found {
    let note = "extrapolated from the last cycles".to_string();
    let mut event = unresolved(before, (value, error), note, plan);
    let means = problem.profile(&before.point).means();
    for (k, node) in event.point.unknowns.nodes.iter_mut().enumerate() {
        *node = means[k % means.len()];
    }
    // One motion farther along the walk, so that the event stands behind the last point.
    event.distance = plan.sign * (before.distance + problem.motion(&before.point));
    event.kind = EventKind::Hopf;
    event
}

/// Whether the events of a step account for the change of the unstable count: each fold or doubling moves one multiplier
/// across the unit circle, a torus point two. A pair that crosses in the same step as a fold or doubling leaves the count
/// ambiguous; a shorter stride separates them.
fn is_explained(step: &Step) -> bool {
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

fn events_of_step(
    problem: &mut CycleProblem,
    step: &Step,
    (before, after): (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
) -> Vec<Found> {
    let mut found = Vec::new();
    // The parameter turns back, yet no multiplier changes side: the mirror image of this branch goes on from there.
    let turns_at_crossing =
        step.unstable.0 == step.unstable.1 && step.crossings.len() == 1 && step.crossings[0].index == WATCH_FOLD;
    for crossing in &step.crossings {
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
const SUPERCONVERGENCE: f64 = 1e-3;

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
    Some(event)
}

/// An event that is known by an interval of the parameter; its period is that of the station, known to its profile's
/// accuracy only.
fn unresolved(station: &CycleStation, (value, half_width): (f64, f64), note: String, plan: &WalkPlan<'_>) -> Found {
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

pub(crate) fn end(reason: EndReason, value: f64, words: String) -> End {
    End { reason, value, words }
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

fn end_of_follower(follower: &mut Follower<'_, CycleProblem>, plan: &WalkPlan<'_>, motions: &[(f64, f64)]) -> End {
    let value = follower.current().point.unknowns.parameter;
    let name = with_unit_name(plan);
    let here = short(plan.study, value);
    let largest = motions.iter().map(|m| m.0).fold(0.0, f64::max);
    let shrunk = motions.last().is_some_and(|m| m.0 < NEARLY_AT_REST * largest) && motions.len() > 2;
    match follower.end() {
        Some(FollowEnd::Edge(edge)) => {
            end(EndReason::Edge, *edge, format!("reaches the edge of the asked range, {name} = {edge}"))
        }
        Some(FollowEnd::Closed) => end(EndReason::Closed, value, "closed upon itself: its start was met again".into()),
        Some(FollowEnd::Budget) => {
            end(EndReason::Budget, value, format!("all points allowed by `pursue` were used at {name} = {here}"))
        }
        Some(FollowEnd::Stuck | FollowEnd::Outside(_)) if shrunk => {
            let rest = extrapolate_to_rest(motions);
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
