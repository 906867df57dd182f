//! The events between two equilibria of a branch: every change of the unstable count is explained by located events.
//!
//! Three things are known at a station: the side to which the parameter goes, the sign of the bordered determinant, and the
//! number of eigenvalues to the right of the imaginary axis. A fold changes the first and the count by 1; a branching the
//! second and the count by 1, or the first two where the branch itself turns back there; a Hopf point the count by 2. Real
//! eigenvalues whose sum is 0 change nothing, so that no neutral saddle is taken for a Hopf point. What is none of these is
//! cut in halves until it is; what changes nothing is cut where an eigenvalue comes near the axis and goes back.

use armilla_follow::{Hermite, Problem, Station};
use armilla_record::{Criticality, EventKind};
use armilla_stability::{
    BranchingForm, CriticalSlope, Crossing, EquilibriumPoint, EquilibriumProblem, EquilibriumTangent, HopfForm,
    LocatedRest, RestEvent, SIDE, WATCH_CROSSING, WATCH_TURN,
};

use crate::near_miss::near_miss_by_mean;
use crate::step_events::LOCATED_BY_BRACKET;
use crate::study::Study;

pub(crate) type RestStation = Station<EquilibriumPoint, EquilibriumTangent>;

/// An event as found, before it has a name.
pub(crate) struct RestFound {
    pub kind: EventKind,
    pub point: EquilibriumPoint,
    /// Distance from the start of the walk, along it.
    pub distance: f64,
    pub error: Option<f64>,
    /// Period of the cycles born at a Hopf point, with its error.
    pub period: Option<(f64, f64)>,
    pub criticality: Option<Criticality>,
    pub note: String,
    /// What a switch needs.
    pub birth: Option<RestBirth>,
}

/// What is born at an event of equilibria.
#[derive(Clone)]
pub(crate) enum RestBirth {
    /// Cycles.
    Hopf { located: Box<LocatedRest>, form: Option<Box<HopfForm>> },
    /// Another branch of equilibria.
    Crossing { located: Box<LocatedRest>, form: Box<BranchingForm> },
}

/// What changes between two stations.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
struct Change {
    turns: bool,
    crosses: bool,
    count: isize,
}

impl Change {
    fn between(before: &RestStation, after: &RestStation) -> Self {
        let changes = |index: usize| before.watch.values[index].value * after.watch.values[index].value < 0.0;
        let count = |station: &RestStation| station.watch.unstable_count as isize;
        Self { turns: changes(WATCH_TURN), crosses: changes(WATCH_CROSSING), count: count(after) - count(before) }
    }

    fn is_none(self) -> bool {
        !self.turns && !self.crosses && self.count == 0
    }

    /// The one event that explains it, if one does.
    fn event(self) -> Option<RestEvent> {
        match (self.turns, self.crosses, self.count.abs()) {
            (true, false, 1) => Some(RestEvent::Fold),
            (false, true, 1) | (true, true, 0) => Some(RestEvent::Branching),
            (false, false, 2) => Some(RestEvent::Hopf),
            _ => None,
        }
    }
}

/// Parameter component of the tangent below which its sign is not relied on.
const TURN: f64 = 1e-9;
/// Cuts of a part that does not add up; each halves it.
const CUTS: usize = 45;
/// Cuts of a part in which an eigenvalue only comes near the axis.
const NEAR_CUTS: usize = 8;
/// Share of the values at the ends of a part within which an extreme counts as near zero.
const NEAR: f64 = 0.1;
/// Length of a part that is cut no further.
const SHORTEST: f64 = 1e-11;
/// Length of a part in which two imaginary pairs meet that is cut no further: where they meet rounding moves eigenvalues by its
/// square root, and this far off they still tell their side.
const MEETING: f64 = 1e-8;
/// Distance from a station within which an event is the one it stands on.
const ON: f64 = 1e-7;

/// Number of eigenvalues on the imaginary axis at a station; none where they or the side of the parameter are not known. On
/// an event it differs from that of the stations beside it; where something is conserved it does not.
pub(crate) fn neutral(problem: &mut EquilibriumProblem, station: &RestStation) -> Option<usize> {
    let is_known = station.watch.values[WATCH_TURN].value.abs() > TURN;
    if is_known { problem.neutral_count(&station.point) } else { None }
}

/// Change of the parameter by that of the real part of an eigenvalue that passes the axis between two stations, if it moves
/// no slower than the one nearest to the axis would.
fn pace(problem: &mut EquilibriumProblem, before: &RestStation, after: &RestStation) -> f64 {
    let mut off_axis = |station: &RestStation| {
        let spectrum = problem.spectrum(&station.point).ok()?;
        let off = spectrum.values.iter().map(|value| value.re.abs()).filter(|re| *re > SIDE * spectrum.norm);
        off.reduce(f64::min)
    };
    let moved: f64 = [before, after].into_iter().filter_map(&mut off_axis).sum();
    let width = (after.point.parameter - before.point.parameter).abs();
    if moved > 0.0 { width / moved } else { 0.0 }
}

/// Real part, at two neighbouring stations, within which an eigenvalue counts as on the axis: one SIDE each way, and as much
/// for rounding.
fn band(problem: &mut EquilibriumProblem, ends: (&RestStation, &RestStation)) -> f64 {
    let norms = [ends.0, ends.1].map(|station| problem.spectrum(&station.point).map_or(0.0, |spectrum| spectrum.norm));
    4.0 * SIDE * norms[0].max(norms[1])
}

/// Whether two imaginary pairs of one station meet between it and the other and leave the axis to both sides.
fn pairs_meet(problem: &mut EquilibriumProblem, change: Change, ends: (&RestStation, &RestStation)) -> bool {
    let counts = (problem.neutral_count(&ends.0.point), problem.neutral_count(&ends.1.point));
    let (Some(before), Some(after)) = counts else { return false };
    change.event() == Some(RestEvent::Hopf) && before.abs_diff(after) >= 4
}

/// The search for events between two stations.
pub(crate) struct Search<'a> {
    pub study: &'a Study,
    pub found: Vec<RestFound>,
    /// Change of the parameter by that of the real part that passes the axis.
    pace: f64,
}

impl<'a> Search<'a> {
    /// Nothing found yet.
    pub(crate) fn new(study: &'a Study) -> Self {
        Self { study, found: Vec::new(), pace: 0.0 }
    }

    /// Finds the events between two stations, in no order.
    pub(crate) fn between(&mut self, problem: &mut EquilibriumProblem, before: &RestStation, after: &RestStation) {
        self.pace = pace(problem, before, after);
        self.part(problem, (before, after), (0, 0));
    }

    fn part(
        &mut self,
        problem: &mut EquilibriumProblem,
        (before, after): (&RestStation, &RestStation),
        (cuts, near_cuts): (usize, usize),
    ) {
        let change = Change::between(before, after);
        let length = problem.distance(&before.point, &after.point);
        if change.is_none() {
            if near_cuts < NEAR_CUTS
                && may_touch(problem, before, after)
                && let Some(middle) = problem.between(before, after)
            {
                self.part(problem, (before, &middle), (cuts, near_cuts + 1));
                self.part(problem, (&middle, after), (cuts, near_cuts + 1));
            }
            return;
        }
        let meeting = pairs_meet(problem, change, (before, after));
        if let Some(event) = change.event().filter(|_| !meeting)
            && let Some(located) = locate(problem, event, before, after)
        {
            self.located(problem, located, (before, after));
            return;
        }
        let middle = (cuts < CUTS && length > if meeting { MEETING } else { SHORTEST })
            .then(|| problem.between(before, after))
            .flatten();
        match middle {
            Some(middle) => {
                self.part(problem, (before, &middle), (cuts + 1, near_cuts));
                self.part(problem, (&middle, after), (cuts + 1, near_cuts));
            }
            None => {
                let blur = self.pace * band(problem, (before, after));
                self.unresolved((change, meeting, blur), before, after);
            }
        }
    }

    /// Events that a station stands on, so that neither side shows them.
    pub(crate) fn at(&mut self, problem: &mut EquilibriumProblem, station: &RestStation) {
        let Ok(spectrum) = problem.spectrum(&station.point) else { return };
        let mut pairs: Vec<_> = spectrum.values.iter().filter(|value| value.im > 0.0).collect();
        pairs.sort_by(|a, b| a.re.abs().total_cmp(&b.re.abs()));
        // Another pair may stand on the axis all along.
        let on_axis = pairs.iter().filter(|value| value.re.abs() <= SIDE * spectrum.norm).count().max(1);
        let hopf = pairs.iter().take(on_axis).map(|value| (RestEvent::Hopf, value.im));
        let mut kinds = hopf.chain([(RestEvent::Branching, 0.0), (RestEvent::Fold, 0.0)]);
        let found = kinds.find_map(|(event, frequency)| {
            let located = problem.solve(event, station.point.clone(), frequency)?;
            let isolated = problem.is_isolated(&located);
            (isolated && problem.distance(&located.point, &station.point) <= ON).then_some(located)
        });
        if let Some(mut located) = found {
            located.share = 1.0;
            self.located(problem, located, (station, station));
        }
    }

    fn located(
        &mut self,
        problem: &mut EquilibriumProblem,
        located: LocatedRest,
        (before, after): (&RestStation, &RestStation),
    ) {
        let distance = before.distance + located.share * (after.distance - before.distance);
        let mut found = RestFound {
            kind: EventKind::Fold,
            point: located.point.clone(),
            distance,
            error: Some(located.error),
            period: located.period(),
            criticality: None,
            note: String::new(),
            birth: None,
        };
        match located.event {
            RestEvent::Fold => {}
            RestEvent::Hopf => {
                let form = problem.hopf_form(&located).map(Box::new);
                found.kind = EventKind::Hopf;
                (found.criticality, found.note) = hopf_side(form.as_deref());
                found.birth = Some(RestBirth::Hopf { located: Box::new(located), form });
            }
            RestEvent::Branching => {
                found.kind = EventKind::Branching;
                found.note = "more than two branches meet here, or two touch: not followed".into();
                if let Some(form) = problem.branching_form(&located, (before, after)) {
                    found.kind = match form.crossing {
                        Crossing::Pitchfork => EventKind::Pitchfork,
                        Crossing::Transcritical => EventKind::Transcritical,
                    };
                    found.note.clear();
                    found.criticality = form.is_supercritical.map(side);
                    found.birth = Some(RestBirth::Crossing { located: Box::new(located), form: Box::new(form) });
                }
            }
        }
        self.found.push(found);
    }

    fn unresolved(&mut self, (change, meeting, blur): (Change, bool, f64), before: &RestStation, after: &RestStation) {
        let (p, q) = (before.point.parameter, after.point.parameter);
        let (low, high) = self.study.range;
        let scale = (high - low).max(p.abs());
        let error = 0.5 * (p - q).abs() + blur + 1e2 * f64::EPSILON * scale;
        let tight = error <= self.study.file.accuracy * scale;
        let kind = match change.event() {
            Some(RestEvent::Fold) if tight => EventKind::Fold,
            Some(RestEvent::Branching) if tight => EventKind::Branching,
            // The frequency of a pair is not known by a bracket.
            _ => EventKind::Unresolved,
        };
        let note = match change.event() {
            Some(_) if tight && kind != EventKind::Unresolved => LOCATED_BY_BRACKET.to_string(),
            _ if meeting => {
                "two imaginary pairs of eigenvalues meet here and leave the imaginary axis to both sides".into()
            }
            Some(RestEvent::Hopf) => "two eigenvalues pass the imaginary axis here, but no Hopf point was found".into(),
            _ => "several eigenvalues pass the imaginary axis at one place, as far as rounding tells".into(),
        };
        self.found.push(RestFound {
            kind,
            point: EquilibriumPoint { parameter: 0.5 * (p + q), ..before.point.clone() },
            distance: 0.5 * (before.distance + after.distance),
            error: Some(error),
            period: None,
            criticality: None,
            note,
            birth: None,
        });
    }
}

/// Side and note of a Hopf point.
pub(crate) fn hopf_side(form: Option<&HopfForm>) -> (Option<Criticality>, String) {
    match form {
        Some(form) if form.is_sure => {
            (Some(side(form.l1 < 0.0)), format!("first Lyapunov coefficient l1 = {:.6e}", form.l1))
        }
        Some(_) => {
            (None, "the first Lyapunov coefficient vanishes to rounding: degenerate, the side is not told".into())
        }
        None => (None, "its normal form could not be computed: the side is not told".into()),
    }
}

fn side(is_supercritical: bool) -> Criticality {
    if is_supercritical { Criticality::Supercritical } else { Criticality::Subcritical }
}

fn locate(
    problem: &mut EquilibriumProblem,
    event: RestEvent,
    before: &RestStation,
    after: &RestStation,
) -> Option<LocatedRest> {
    let changed = |index: usize, station: &RestStation| {
        before.watch.values[index].value * station.watch.values[index].value < 0.0
    };
    let count = before.watch.unstable_count;
    let is_beyond: &dyn Fn(&RestStation) -> bool = match event {
        RestEvent::Fold => &|station| changed(WATCH_TURN, station),
        RestEvent::Branching => &|station| changed(WATCH_CROSSING, station),
        RestEvent::Hopf => &|station| station.watch.unstable_count != count,
    };
    problem.locate(event, (before, after), is_beyond)
}

/// Whether an eigenvalue may have touched the imaginary axis, or the parameter turned back twice, between two stations
/// that show no change.
fn may_touch(problem: &mut EquilibriumProblem, before: &RestStation, after: &RestStation) -> bool {
    let length = problem.distance(&before.point, &after.point);
    let turn = |station: &RestStation| station.watch.values[WATCH_TURN].value;
    let width = after.point.parameter - before.point.parameter;
    if near_miss_by_mean((turn(before), turn(after)), width / (length * problem.parameter_scale())) {
        return true;
    }
    let (from, to) = (problem.critical_slopes(before), problem.critical_slopes(after));
    from.iter().any(|start| nearest(&to, start).is_some_and(|stop| dips(start, stop, length)))
}

/// The eigenvalue at the other end that is most likely the same one.
fn nearest<'a>(candidates: &'a [CriticalSlope], to: &CriticalSlope) -> Option<&'a CriticalSlope> {
    let off = |value: &CriticalSlope| (value.re - to.re).abs() + (value.im - to.im).abs();
    candidates.iter().min_by(|a, b| off(a).total_cmp(&off(b)))
}

fn dips(start: &CriticalSlope, stop: &CriticalSlope, length: f64) -> bool {
    if start.re * stop.re < 0.0 {
        return false;
    }
    let cubic = Hermite::new((start.re, length * start.slope), (stop.re, length * stop.slope));
    let side = 1.0f64.copysign(start.re);
    let near = NEAR * start.re.abs().max(stop.re.abs());
    cubic.lowest().is_some_and(|(_, value)| side * value < near)
}
