//! One branch, both ways, as a record.

use std::collections::HashMap;
use std::sync::atomic::AtomicBool;

use armilla_follow::{Orientation, Problem};
use armilla_record::{
    BRANCH_FORMAT, Branch, End, EndReason, Event, EventKind, Point, Quantity, Solutions, StoredProfile,
};
use armilla_stability::{
    Born, BranchingForm, Crossed, CyclePoint, CycleProblem, CycleTangent, DoublingForm, EquilibriumPoint,
    EquilibriumProblem, HopfForm, Located, LocatedRest, Measures,
};

use crate::ahead::Ahead;
use crate::crossing_event::{Met, symmetry_words};
use crate::crossings::both_sides;
use crate::ends::{end, short};
use crate::equilibrium_branch;
use crate::error::StudyError;
use crate::joins::{Atlas, Followed};
use crate::late_folds::tell;
use crate::prediction::{Estimate, next_doubling};
use crate::progress::{Observer, Progress};
use crate::settings::follow_settings;
use crate::step_events::{Found, at_parameter};
use crate::study::Study;
use crate::walk::{Walk, WalkPlan, WalkSink, Walked, walk};

/// Every k-th profile is kept in a branch file; the first and the last always.
const KEEP_EVERY: usize = 10;

/// Longest first stride of a doubled branch, in distances already travelled from its birth, where the next doubling is
/// predicted: as much as a stride may grow from one to the next.
const TOWARDS_PREDICTED: f64 = 3.0;

/// Where a branch comes from.
#[derive(Clone, Debug)]
pub(crate) struct Lineage {
    pub name: String,
    pub born_at: Option<String>,
    pub doublings: usize,
    pub turns: usize,
    /// Thresholds of the doublings in a row that it descends from, its own birth last.
    pub line: Vec<Estimate>,
}

/// An event at which a branch is born.
pub(crate) struct Switchable {
    /// Name of the event.
    pub event: String,
    pub way: Way,
}

/// How the new branch is entered.
pub(crate) enum Way {
    /// By a period doubling.
    Doubling { located: Box<Located>, form: Option<DoublingForm> },
    /// As cycles born at an equilibrium.
    Hopf { located: Box<LocatedRest>, form: Option<Box<HopfForm>> },
    /// As equilibria that cross others.
    Crossing { located: Box<LocatedRest>, form: Box<BranchingForm> },
    /// Where it crosses this one.
    CyclesCross(Box<Met>),
}

impl Way {
    /// The threshold at which the branch is born.
    pub(crate) fn threshold(&self) -> Estimate {
        match self {
            Self::Doubling { located, .. } => {
                Estimate { value: located.point.unknowns.parameter, error: located.error }
            }
            Self::CyclesCross(met) => {
                Estimate { value: met.crossing.point.unknowns.parameter, error: met.crossing.error }
            }
            Self::Hopf { located, .. } | Self::Crossing { located, .. } => {
                Estimate { value: located.point.parameter, error: located.error }
            }
        }
    }
}

/// A finished branch with the events that can be switched at.
pub(crate) struct Finished {
    pub branch: Branch,
    pub births: Vec<Switchable>,
    /// To be known again by; nothing for equilibria.
    pub followed: Followed,
    pub problem: Parent,
}

/// The problem of a finished branch, at whose events others are born.
pub(crate) enum Parent {
    Cycles(Box<CycleProblem>),
    Equilibria(Box<EquilibriumProblem>),
}

/// What a branch is entered by.
pub(crate) enum Entry {
    /// A cycle; the branch goes both ways from it.
    Cycle(Box<CycleProblem>, Box<CyclePoint>),
    /// A birth on another branch; the branch goes outwards from it.
    Birth(Box<Born>),
    /// A birth at a Hopf point, with the birth as a row of the table.
    Hopf(Box<Born>, Box<Point>),
    /// An equilibrium; the branch goes both ways from it.
    Equilibrium(Box<EquilibriumProblem>, Box<EquilibriumPoint>),
    /// A branching of equilibria; the branch goes both ways along a direction.
    Crossing(Box<EquilibriumProblem>, Box<equilibrium_branch::Start>),
    /// A crossing of cycles; the branch goes both ways from it.
    CyclesCross(Box<Crossed>),
}

/// What every branch of a run shares.
pub(crate) struct Run<'a> {
    pub study: &'a Study,
    pub abort: &'a AtomicBool,
    pub observer: &'a mut dyn Observer,
    /// Called with each event as it is located.
    pub keep: &'a mut dyn FnMut(&Event) -> Result<(), StudyError>,
    /// Whether every branch ends at its first doubling.
    pub to_first_doubling: bool,
    /// Points still allowed.
    pub points_left: usize,
    /// The branches followed before.
    pub atlas: &'a Atlas,
}

/// Collects what a walk finds, names events, and passes the news on.
pub(crate) struct Collector<'r, 'a> {
    pub(crate) run: &'r mut Run<'a>,
    pub(crate) lineage: &'r Lineage,
    numbers: HashMap<EventKind, usize>,
    events: Vec<Event>,
    births: Vec<Switchable>,
    points: usize,
    fault: Option<StudyError>,
}

impl Collector<'_, '_> {
    fn name(&mut self, kind: EventKind) -> String {
        let number = self.numbers.entry(kind).or_insert(0);
        *number += 1;
        format!("{}/{}{}", self.lineage.name, kind.word(), number)
    }
}

impl WalkSink for Collector<'_, '_> {
    fn point(&mut self, point: &Point) {
        self.points += 1;
        self.run.points_left = self.run.points_left.saturating_sub(1);
        let (name, points) = (&self.lineage.name, self.points);
        self.run.observer.notice(Progress::Point { name, points, value: point.value, stable: point.is_stable() });
    }

    fn event(&mut self, problem: &CycleProblem, found: &Found) {
        let event = event_record(problem, found, self.name(found.kind), self.lineage.turns);
        // Without a cubic term the branch stands on one parameter value.
        let stands = found.form.is_some_and(|form| form.c == 0.0);
        if let (EventKind::Doubling, Some(located), false) = (found.kind, &found.located, stands) {
            let way = Way::Doubling { located: Box::new(located.clone()), form: found.form };
            self.births.push(Switchable { event: event.name.clone(), way });
        }
        if let Some(met) = &found.crossing {
            self.births.push(Switchable { event: event.name.clone(), way: Way::CyclesCross(met.clone()) });
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

fn event_record(problem: &CycleProblem, found: &Found, name: String, turns: usize) -> Event {
    let profile = problem.profile(&found.point);
    let measures = Measures::of(&profile);
    Event {
        name,
        kind: found.kind,
        value: found.point.unknowns.parameter,
        error: found.error,
        period: found.point.unknowns.period,
        period_error: found.period_error,
        turns,
        angle: found.angle,
        criticality: found.criticality,
        distance: found.distance,
        note: found.note.clone(),
        maxima: measures.maxima,
        minima: measures.minima,
        means: measures.means,
        spreads: measures.spreads,
        profile: Some(profile),
    }
}

/// Follows one branch to its ends.
pub(crate) fn follow_branch(run: &mut Run<'_>, lineage: &Lineage, entry: Entry) -> Result<Finished, StudyError> {
    run.observer.notice(Progress::Branch { name: &lineage.name });
    match entry {
        Entry::Cycle(problem, point) => both_ways(run, lineage, *problem, *point),
        Entry::Birth(doubled) => outwards(run, lineage, *doubled, None),
        Entry::Hopf(born, birth) => outwards(run, lineage, *born, Some(*birth)),
        Entry::Equilibrium(problem, point) => equilibrium_branch::both_ways(run, lineage, *problem, *point),
        Entry::Crossing(problem, from) => equilibrium_branch::through_branching(run, lineage, *problem, *from),
        Entry::CyclesCross(crossed) => both_sides(run, lineage, *crossed),
    }
}

pub(crate) fn plan<'a>(run: &Run<'a>, lineage: &Lineage, sign: f64) -> WalkPlan<'a> {
    let mut settings = follow_settings(run.study);
    settings.points = run.points_left;
    WalkPlan {
        study: run.study,
        settings,
        turns: lineage.turns,
        doubled: !lineage.line.is_empty(),
        sign,
        abort: run.abort,
        atlas: run.atlas,
        to_first_doubling: run.to_first_doubling,
        ahead: None,
    }
}

/// Whether the logarithms of all multipliers add up to nothing though there are several.
fn keeps_volume_along(point: &Point) -> bool {
    /// Sum, relative to the largest and at least absolute, that is rounding.
    const ZERO: f64 = 1e-9;
    let logs = point.multipliers.iter().map(|mu| mu.log_modulus);
    let largest = logs.clone().map(f64::abs).fold(1.0, f64::max);
    point.multipliers.len() > 1 && point.unresolved.is_none() && logs.sum::<f64>().abs() <= ZERO * largest
}

fn both_ways(
    run: &mut Run<'_>,
    lineage: &Lineage,
    mut problem: CycleProblem,
    start: CyclePoint,
) -> Result<Finished, StudyError> {
    let no_cycle = |reason: String| StudyError::NoCycle { reason };
    let first = problem.describe(&start, lineage.turns, 0.0).map_err(|fault| no_cycle(fault.to_string()))?;
    let stuck = || no_cycle("the cycle at the start cannot be continued in the followed parameter".into());
    let up = problem.tangent(&start, Orientation::Parameter(1.0)).map_err(|_| stuck())?;
    let mut collector = collector(run, lineage);
    collector.point(&first);
    let plans = (plan(collector.run, lineage, 1.0), -1.0);
    let mut found = at_parameter(&mut problem, EventKind::Start, &start, 0.0);
    if let Some(symmetry) = problem.symmetry(&start) {
        found.note = format!("symmetric: {}", symmetry_words(&symmetry, &collector.run.study.model));
    }
    if keeps_volume_along(&first) {
        let both = if found.note.is_empty() { "" } else { "; " };
        found.note.push_str(both);
        found.note.push_str("conservative: the divergence integrates to zero over the cycle");
    }
    collector.event(&problem, &found);
    if plans.0.settings.targets.contains(&start.unknowns.parameter) {
        let target = Found { kind: EventKind::Target, ..at_parameter(&mut problem, EventKind::Target, &start, 0.0) };
        collector.event(&problem, &target);
    }
    let forward = walk(&mut problem, (start.clone(), up), &plans.0, &mut collector);
    // A closed branch has been seen whole.
    let backward = if forward.end.reason == EndReason::Closed {
        Walk { points: Vec::new(), events: Vec::new(), end: forward.end.clone() }
    } else {
        let back = plan(collector.run, lineage, plans.1);
        problem.anchor(&start);
        let down = problem.tangent(&start, Orientation::Parameter(-1.0)).map_err(|_| stuck())?;
        walk(&mut problem, (start.clone(), down), &back, &mut collector)
    };
    let mut walked: Vec<Walked> = backward.points.into_iter().rev().collect();
    walked.push(Walked { point: first, cycle: start });
    walked.extend(forward.points);
    finish(collector, problem, walked, (backward.end, forward.end))
}

/// `at_birth` is the birth as a row, where it is no cycle with multipliers of its own.
fn outwards(run: &mut Run<'_>, lineage: &Lineage, born: Born, at_birth: Option<Point>) -> Result<Finished, StudyError> {
    let Born { mut problem, birth, point, outwards, amplitude } = born;
    let no_cycle = |reason: String| StudyError::NoCycle { reason };
    let at_rest = at_birth.is_some();
    let mut first = match at_birth {
        Some(row) => Point { intervals: birth.intervals(), degree: birth.degree, choice: birth.choice, ..row },
        None => problem.describe(&birth, lineage.turns, 0.0).map_err(|fault| no_cycle(fault.to_string()))?,
    };
    let second = problem.describe(&point, lineage.turns, amplitude).map_err(|fault| no_cycle(fault.to_string()))?;
    // At the birth itself one multiplier is 1 to roundoff: the branch has the stability of its neighbouring cycles.
    first.unstable_count = second.unstable_count;
    let tangent = problem
        .tangent(&point, Orientation::Along(&outwards))
        .map_err(|_| no_cycle("its first cycle cannot be continued".into()))?;
    let mut collector = collector(run, lineage);
    collector.point(&first);
    collector.point(&second);
    let mut plan = plan(collector.run, lineage, 1.0);
    plan.ahead = next_doubling(&lineage.line).map(|predicted| Ahead {
        birth: birth.unknowns.parameter,
        value: predicted.value,
        offset: amplitude,
    });
    let known = plan.ahead.is_some_and(|ahead| ahead.leads_from(point.unknowns.parameter));
    let initial = if known { TOWARDS_PREDICTED * amplitude } else { amplitude };
    plan.settings.initial = initial.clamp(plan.settings.shortest, plan.settings.longest);
    let mut found = at_parameter(&mut problem, EventKind::Start, &point, amplitude);
    found.note = lineage.born_at.as_ref().map(|parent| format!("first cycle beyond {parent}")).unwrap_or_default();
    collector.event(&problem, &found);
    let forward = walk_shifted(&mut problem, (point.clone(), tangent), &plan, &mut collector, amplitude);
    let parent = lineage.born_at.clone().unwrap_or_default();
    let value = birth.unknowns.parameter;
    let (reason, what) = if at_rest {
        (EndReason::Equilibrium { value }, "shrinks to an equilibrium")
    } else {
        (EndReason::ReturnsToParent, "returns to its parent")
    };
    let words = format!("{what}: born at {parent}, {} = {}", run_parameter(&plan), short(plan.study, value));
    let born = end(reason, value, words);
    let mut walked = vec![Walked { point: first, cycle: birth }, Walked { point: second, cycle: point }];
    walked.extend(forward.points);
    finish(collector, problem, walked, (born, forward.end))
}

fn run_parameter(plan: &WalkPlan<'_>) -> String {
    plan.study.file.follow.parameter.clone()
}

/// A walk whose distances count from the birth instead of from its first cycle.
pub(crate) fn walk_shifted(
    problem: &mut CycleProblem,
    first: (CyclePoint, CycleTangent),
    plan: &WalkPlan<'_>,
    collector: &mut Collector<'_, '_>,
    shift: f64,
) -> Walk {
    let events_before = collector.events.len();
    let mut walk = walk(problem, first, plan, collector);
    walk.points.iter_mut().for_each(|walked| walked.point.distance += shift);
    collector.events[events_before..].iter_mut().for_each(|event| event.distance += shift);
    walk
}

pub(crate) fn collector<'r, 'a>(run: &'r mut Run<'a>, lineage: &'r Lineage) -> Collector<'r, 'a> {
    Collector { run, lineage, numbers: HashMap::new(), events: Vec::new(), births: Vec::new(), points: 0, fault: None }
}

pub(crate) fn finish(
    collector: Collector<'_, '_>,
    problem: CycleProblem,
    walked: Vec<Walked>,
    ends: (End, End),
) -> Result<Finished, StudyError> {
    let Collector { run, lineage, mut events, births, fault, .. } = collector;
    if let Some(fault) = fault {
        return Err(fault);
    }
    events.sort_by(|a, b| a.distance.total_cmp(&b.distance));
    let last = walked.len() - 1;
    let keep = |index: usize| index.is_multiple_of(KEEP_EVERY) || index == last;
    let profiles = walked
        .iter()
        .enumerate()
        .filter(|(index, _)| keep(*index))
        .map(|(point, walked)| StoredProfile { point, profile: problem.profile(&walked.cycle) })
        .collect();
    let (points, cycles): (Vec<Point>, _) = walked.into_iter().map(|walked| (walked.point, walked.cycle)).unzip();
    let followed = Followed::of(&lineage.name, &points, cycles);
    tell(&mut events, &points, run.study.range.1 - run.study.range.0);
    run.observer.notice(Progress::Finished { name: &lineage.name, points: points.len() });
    let branch = branch_record(run.study, lineage, Parts { points, events, ends, profiles });
    Ok(Finished { branch, births, followed, problem: Parent::Cycles(Box::new(problem)) })
}

/// What walks bring to the record of a branch.
pub(crate) struct Parts {
    pub points: Vec<Point>,
    pub events: Vec<Event>,
    pub ends: (End, End),
    pub profiles: Vec<StoredProfile>,
}

/// A branch of cycles from its parts.
pub(crate) fn branch_record(study: &Study, lineage: &Lineage, parts: Parts) -> Branch {
    let quantity =
        |name: &str, label: &str, unit: &str| Quantity { name: name.into(), label: label.into(), unit: unit.into() };
    let model = &study.model;
    let followed = &model.parameters()[study.free];
    let others = model.parameters().iter().zip(&study.parameters).enumerate();
    Branch {
        format: BRANCH_FORMAT,
        armilla: env!("CARGO_PKG_VERSION").into(),
        name: lineage.name.clone(),
        born_at: lineage.born_at.clone(),
        model_title: model.title().into(),
        model_fingerprint: model.fingerprint().into(),
        states: model.states().iter().map(|s| quantity(&s.name, &s.label, &s.unit)).collect(),
        parameter: quantity(&followed.name, &followed.label, &followed.unit),
        range: study.range,
        fixed: others
            .filter(|(index, _)| *index != study.free)
            .map(|(_, (p, value))| (p.name.clone(), *value))
            .collect(),
        accuracy: study.file.accuracy,
        points: parts.points,
        events: parts.events,
        ends: parts.ends,
        profiles: parts.profiles,
        of: Solutions::Cycles,
    }
}
