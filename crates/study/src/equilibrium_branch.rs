//! One branch of equilibria, both ways, as a record.

use std::collections::HashMap;

use armilla_follow::{Orientation, Problem, Station};
use armilla_record::{Branch, End, EndReason, Event, EventKind, Point, Solutions};
use armilla_stability::{EquilibriumPoint, EquilibriumProblem, EquilibriumTangent};

use crate::branch::{Finished, Lineage, Parent, Parts, Run, Switchable, Way, branch_record};
use crate::equilibrium_events::{RestBirth, RestFound, Search, neutral};
use crate::equilibrium_walk::{RestPlan, RestSink, RestWalk, at_parameter, walk};
use crate::error::StudyError;
use crate::joins::Followed;
use crate::progress::Progress;
use crate::settings::follow_settings;

/// Collects what a walk finds, names events, and passes the news on.
struct Collector<'r, 'a> {
    run: &'r mut Run<'a>,
    lineage: &'r Lineage,
    numbers: HashMap<EventKind, usize>,
    events: Vec<Event>,
    births: Vec<Switchable>,
    points: usize,
    fault: Option<StudyError>,
}

impl RestSink for Collector<'_, '_> {
    fn point(&mut self, point: &Point) {
        self.points += 1;
        self.run.points_left = self.run.points_left.saturating_sub(1);
        let (name, points) = (&self.lineage.name, self.points);
        self.run.observer.notice(Progress::Point { name, points, value: point.value, stable: point.is_stable() });
    }

    fn event(&mut self, found: RestFound) {
        let number = self.numbers.entry(found.kind).or_insert(0);
        *number += 1;
        let name = format!("{}/{}{}", self.lineage.name, found.kind.word(), number);
        let event = event_record(&found, name);
        if let Some(birth) = found.birth {
            let way = match birth {
                RestBirth::Hopf { located, form } => Way::Hopf { located, form },
                RestBirth::Crossing { located, form } => Way::Crossing { located, form },
            };
            self.births.push(Switchable { event: event.name.clone(), way });
        }
        if event.kind.is_threshold() {
            self.run.observer.notice(Progress::Event { name: &event.name, value: event.value });
        }
        if let Err(fault) = (self.run.keep)(&event) {
            self.fault.get_or_insert(fault);
        }
        self.events.push(event);
    }
}

fn event_record(found: &RestFound, name: String) -> Event {
    let state = &found.point.state;
    let (period, period_error) = found.period.map_or((0.0, None), |(period, error)| (period, Some(error)));
    Event {
        name,
        kind: found.kind,
        value: found.point.parameter,
        error: found.error,
        period,
        period_error,
        turns: usize::from(found.kind == EventKind::Hopf),
        angle: None,
        criticality: found.criticality,
        distance: found.distance,
        note: found.note.clone(),
        maxima: state.clone(),
        minima: state.clone(),
        means: state.clone(),
        spreads: vec![0.0; state.len()],
        profile: None,
    }
}

fn no_equilibrium(reason: &str) -> StudyError {
    StudyError::NoEquilibrium { reason: reason.into() }
}

fn plan<'a>(run: &Run<'a>, sign: f64, offset: f64) -> RestPlan<'a> {
    let mut settings = follow_settings(run.study);
    settings.points = run.points_left;
    RestPlan { study: run.study, settings, sign, offset, abort: run.abort }
}

fn collector<'r, 'a>(run: &'r mut Run<'a>, lineage: &'r Lineage) -> Collector<'r, 'a> {
    Collector { run, lineage, numbers: HashMap::new(), events: Vec::new(), births: Vec::new(), points: 0, fault: None }
}

/// Follows a branch both ways from an equilibrium on it.
pub(crate) fn both_ways(
    run: &mut Run<'_>,
    lineage: &Lineage,
    mut problem: EquilibriumProblem,
    start: EquilibriumPoint,
) -> Result<Finished, StudyError> {
    let stuck = || no_equilibrium("the equilibrium at the start cannot be continued in the followed parameter");
    let first = problem.describe(&start, 0.0).map_err(|_| no_equilibrium("its eigenvalues could not be computed"))?;
    let up = problem.tangent(&start, Orientation::Parameter(1.0)).map_err(|_| stuck())?;
    let mut collector = collector(run, lineage);
    collector.point(&first);
    collector.event(at_parameter(EventKind::Start, &start, 0.0));
    if collector.run.study.file.targets.contains(&start.parameter) {
        collector.event(at_parameter(EventKind::Target, &start, 0.0));
    }
    events_at_start(&mut collector, &mut problem, (&start, &up));
    let ahead = plan(collector.run, 1.0, 0.0);
    let forward = walk(&mut problem, (start.clone(), up.clone()), &ahead, &mut collector);
    // A closed branch has been seen whole.
    let backward = if forward.end.reason == EndReason::Closed {
        RestWalk { points: Vec::new(), end: forward.end.clone() }
    } else {
        let back = plan(collector.run, -1.0, 0.0);
        // The metric has followed the first walk; strides are to be measured as at the start again.
        problem.anchor(&start);
        let down = problem.tangent(&start, Orientation::Along(&up.reversed())).map_err(|_| stuck())?;
        walk(&mut problem, (start.clone(), down), &back, &mut collector)
    };
    finish(collector, problem, (backward, vec![first], forward))
}

/// A start that stands on an event has nothing to compare with on either side.
fn events_at_start(
    collector: &mut Collector<'_, '_>,
    problem: &mut EquilibriumProblem,
    (start, tangent): (&EquilibriumPoint, &EquilibriumTangent),
) {
    let Ok(watch) = problem.watch(start, tangent) else { return };
    let station = Station { point: start.clone(), tangent: tangent.clone(), watch, distance: 0.0 };
    if neutral(problem, &station) == Some(0) {
        return;
    }
    let mut search = Search::new(collector.run.study);
    search.at(problem, &station);
    search.found.into_iter().for_each(|found| collector.event(found));
}

/// Where a branch of equilibria begins that goes through a branching.
pub(crate) struct Start {
    /// The branching.
    pub birth: EquilibriumPoint,
    /// Direction of the branch there.
    pub direction: EquilibriumTangent,
    /// Error of the states there, relative to their sizes.
    pub state_error: f64,
}

/// Follows a branch both ways from the branching that it goes through.
pub(crate) fn through_branching(
    run: &mut Run<'_>,
    lineage: &Lineage,
    mut problem: EquilibriumProblem,
    from: Start,
) -> Result<Finished, StudyError> {
    let Start { birth, direction, state_error } = from;
    let unknown = || no_equilibrium("the eigenvalues where it is born could not be computed");
    let mut at_birth = problem.describe(&birth, 0.0).map_err(|_| unknown())?;
    // Its states are known from the defining system: the branch's own equations are singular there.
    at_birth.profile_error = state_error;
    let mut collector = collector(run, lineage);
    let mut sides = Vec::new();
    for sign in [1.0, -1.0] {
        let closed = matches!(&sides[..], [Some(RestWalk { end, .. })] if end.reason == EndReason::Closed);
        problem.anchor(&birth);
        let along = if sign > 0.0 { direction.clone() } else { direction.reversed() };
        let entered = if closed { None } else { problem.enter(&birth, &along) };
        sides.push(entered.and_then(|entered| one_side(&mut collector, &mut problem, entered, sign)));
    }
    let [forward, backward] = <[_; 2]>::try_from(sides).map_err(|_| unknown())?;
    if forward.is_none() && backward.is_none() {
        return Err(no_equilibrium("no equilibrium of the crossing branch was found beside the branching"));
    }
    let parent = lineage.born_at.clone().unwrap_or_default();
    let nothing = |reason: EndReason, words: String| RestWalk {
        points: Vec::new(),
        end: End { reason, value: birth.parameter, words },
    };
    let closed = forward.as_ref().is_some_and(|walk| walk.end.reason == EndReason::Closed);
    let missing = || {
        if closed {
            nothing(EndReason::Closed, "closed upon itself: its start was met again".into())
        } else {
            nothing(EndReason::Edge, format!("leads out of the asked range from {parent} on"))
        }
    };
    let (forward, backward) = (forward.unwrap_or_else(missing), backward.unwrap_or_else(missing));
    // At the birth itself one eigenvalue is 0 to roundoff: the branch has the stability of its neighbours.
    let neighbour = forward.points.first().or(backward.points.first());
    at_birth.unstable_count = neighbour.map_or(at_birth.unstable_count, |point| point.unstable_count);
    collector.point(&at_birth);
    finish(collector, problem, (backward, vec![at_birth], forward))
}

/// The part of a branch on one side of its birth, its first equilibrium among the points; none outside the range.
fn one_side(
    collector: &mut Collector<'_, '_>,
    problem: &mut EquilibriumProblem,
    (first, tangent, distance): (EquilibriumPoint, EquilibriumTangent, f64),
    sign: f64,
) -> Option<RestWalk> {
    let (low, high) = collector.run.study.range;
    if !(first.parameter >= low && first.parameter <= high) {
        return None;
    }
    let point = problem.describe(&first, sign * distance).ok()?;
    let plan = plan(collector.run, sign, distance);
    let note = collector.lineage.born_at.as_ref().map(|parent| format!("first equilibrium beyond {parent}"));
    let start = at_parameter(EventKind::Start, &first, sign * distance);
    collector.point(&point);
    collector.event(RestFound { note: note.unwrap_or_default(), ..start });
    let mut walk = walk(problem, (first, tangent), &plan, collector);
    walk.points.insert(0, point);
    Some(walk)
}

fn finish(
    collector: Collector<'_, '_>,
    problem: EquilibriumProblem,
    (backward, middle, forward): (RestWalk, Vec<Point>, RestWalk),
) -> Result<Finished, StudyError> {
    let Collector { run, lineage, mut events, births, fault, .. } = collector;
    if let Some(fault) = fault {
        return Err(fault);
    }
    events.sort_by(|a, b| a.distance.total_cmp(&b.distance));
    let points: Vec<Point> = backward.points.into_iter().rev().chain(middle).chain(forward.points).collect();
    run.observer.notice(Progress::Finished { name: &lineage.name, points: points.len() });
    let parts = Parts { points, events, ends: (backward.end, forward.end), profiles: Vec::new() };
    let branch = Branch { of: Solutions::Equilibria, ..branch_record(run.study, lineage, parts) };
    Ok(Finished { branch, births, followed: Followed::default(), problem: Parent::Equilibria(Box::new(problem)) })
}
