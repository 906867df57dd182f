//! Branches entered at crossings: followed both ways from there, and never twice.

use std::collections::VecDeque;

use armilla_follow::{Orientation, Problem};
use armilla_record::{Branch, End, EndReason, Event, EventKind, Point};
use armilla_stability::{Crossed, CrossedWay, CyclePoint, CycleProblem};

use crate::branch::{
    Collector, Finished, Lineage, Parent, Run, Switchable, Way, collector, finish, plan, walk_shifted,
};
use crate::ends::end;
use crate::error::StudyError;
use crate::step_events::at_parameter;
use crate::trace::Waiting;
use crate::walk::{WalkSink, Walked};

/// Follows a branch that crosses another one, both ways from the crossing.
pub(crate) fn both_sides(run: &mut Run<'_>, lineage: &Lineage, crossed: Crossed) -> Result<Finished, StudyError> {
    let Crossed { mut problem, birth, ways: [ahead, behind] } = crossed;
    let mut middle = described(&mut problem, &birth, lineage, 0.0)?;
    let mut collector = collector(run, lineage);
    let (forward, end) = one_side(&mut collector, &mut problem, &ahead, 1.0)?;
    // At the crossing itself one multiplier is 1 to roundoff.
    if let Some(first) = forward.first() {
        middle.unstable_count = first.point.unstable_count;
    }
    collector.point(&middle);
    // A closed branch has been seen whole.
    let (backward, other_end) = if end.reason == EndReason::Closed {
        (Vec::new(), end.clone())
    } else {
        one_side(&mut collector, &mut problem, &behind, -1.0)?
    };
    let mut walked: Vec<Walked> = backward.into_iter().rev().collect();
    walked.push(Walked { point: middle, cycle: birth });
    walked.extend(forward);
    finish(collector, problem, walked, (other_end, end))
}

fn described(
    problem: &mut CycleProblem,
    at: &CyclePoint,
    lineage: &Lineage,
    distance: f64,
) -> Result<Point, StudyError> {
    problem.describe(at, lineage.turns, distance).map_err(|fault| StudyError::NoCycle { reason: fault.to_string() })
}

/// The points of one side from its first cycle on, and its end; none where it leads out of the range at once.
fn one_side(
    collector: &mut Collector<'_, '_>,
    problem: &mut CycleProblem,
    way: &CrossedWay,
    sign: f64,
) -> Result<(Vec<Walked>, End), StudyError> {
    let lineage = collector.lineage;
    let value = way.point.unknowns.parameter;
    let (low, high) = collector.run.study.range;
    if value < low || value > high {
        let words = format!(
            "leads out of the asked range at the crossing, {} = {value}",
            collector.run.study.file.follow.parameter
        );
        return Ok((Vec::new(), end(EndReason::Edge, value, words)));
    }
    problem.anchor(&way.point);
    let distance = sign * way.amplitude;
    let first = described(problem, &way.point, lineage, distance)?;
    collector.point(&first);
    let mut start = at_parameter(problem, EventKind::Start, &way.point, distance);
    start.note = lineage.born_at.as_ref().map(|event| format!("first cycle beyond {event}")).unwrap_or_default();
    collector.event(problem, &start);
    let stuck = |_| StudyError::NoCycle { reason: "the cycle beside the crossing cannot be continued".into() };
    let tangent = problem.tangent(&way.point, Orientation::Along(&way.outwards)).map_err(stuck)?;
    let mut plan = plan(collector.run, lineage, sign);
    plan.settings.initial = way.amplitude.clamp(plan.settings.shortest, plan.settings.longest);
    let walk = walk_shifted(problem, (way.point.clone(), tangent), &plan, collector, distance);
    let first = Walked { point: first, cycle: way.point.clone() };
    Ok((std::iter::once(first).chain(walk.points).collect(), walk.end))
}

/// Leaves out the branches that cross a finished one and are known already: at a crossing met on two branches, each is the
/// other's. A branch that waits to be entered there is the finished one.
pub(crate) fn leave_out_known(finished: &mut Finished, others: &[Branch], queue: &mut VecDeque<Waiting>) {
    let mut kept = Vec::new();
    for birth in std::mem::take(&mut finished.births) {
        let known = match &birth.way {
            Way::CyclesCross(_) => met_before(finished, &birth, others),
            _ => None,
        };
        let Some((name, branch)) = known else {
            kept.push(birth);
            continue;
        };
        queue.retain(|waiting| waiting.lineage.born_at.as_deref() != Some(&name));
        let event = finished.branch.events.iter_mut().find(|event| event.name == birth.event);
        if let Some(event) = event {
            event.note.push_str(&format!("; the branch that crosses is {branch}, at its {name}"));
        }
    }
    finished.births = kept;
}

/// The crossing of another branch, or an earlier one of the same, at which a crossing stands; with the branch's name.
fn met_before(finished: &Finished, birth: &Switchable, others: &[Branch]) -> Option<(String, String)> {
    let Parent::Cycles(problem) = &finished.problem else { return None };
    let own = &finished.branch;
    let event = own.events.iter().find(|event| event.name == birth.event)?;
    let number = own.events.iter().position(|event| event.name == birth.event)?;
    let earlier = own.events[..number].iter().map(|event| (event, own));
    let elsewhere = others.iter().flat_map(|branch| branch.events.iter().map(move |event| (event, branch)));
    let found = elsewhere.chain(earlier).find(|(other, _)| is_same(problem, event, other))?;
    Some((found.0.name.clone(), found.1.name.clone()))
}

fn is_same(problem: &CycleProblem, a: &Event, b: &Event) -> bool {
    /// Distance, relative to the size of cycles, within which two crossings are one.
    const SAME: f64 = 1e-5;
    let crosses = matches!(b.kind, EventKind::Pitchfork | EventKind::Transcritical | EventKind::Branching);
    let (Some(here), Some(there)) = (&a.profile, &b.profile) else { return false };
    crosses && a.turns == b.turns && problem.is_same_cycle((here, a.value), (there, b.value), SAME)
}
