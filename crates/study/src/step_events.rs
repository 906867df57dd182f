//! The events of one step: located, bracketed, or narrowed, before they have names.

use armilla_follow::{Landing, Problem};
use armilla_record::{Criticality, EventKind};
use armilla_stability::{
    CriticalKind, CyclePoint, CycleProblem, Dip, DoublingForm, Located, WATCH_BRANCHING, WATCH_DOUBLING, WATCH_FOLD,
    WATCH_TORUS,
};

use crate::crossing_event::{self, Looked, Met};
use crate::guards::smooth_values;
use crate::hidden::beside;
use crate::late_folds::PASSES_ONE;
use crate::ledger::{Change, Part, Whole, narrowed, parts, stands_on};
use crate::torus_event::{self, REAL};
use crate::valley::valley;
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
    /// Where another branch crosses.
    pub crossing: Option<Box<Met>>,
}

/// What a step brings.
pub(crate) struct Findings {
    /// The events in the order of the walk.
    pub found: Vec<Found>,
    /// Whether the step ends on another branch: the orientation of the branch changes, and not at one place.
    pub jumped: bool,
}

/// The events of a step, in the order of the walk; `earlier` is the station before it.
pub(crate) fn events_of_step(
    problem: &mut CycleProblem,
    ends: (&CycleStation, &CycleStation),
    earlier: Option<&CycleStation>,
    plan: &WalkPlan<'_>,
) -> Findings {
    let mut findings = Findings { found: Vec::new(), jumped: false };
    let mut between = Vec::new();
    // What does not add up is cut into parts anyway; its values dip to zero because of what is found there.
    let change = Change::between(ends.0, ends.1);
    let explained = change.is_explained() || change.may_cross();
    for (dip, angle) in explained.then(|| dips(problem, ends, earlier)).into_iter().flatten() {
        match dip {
            Dip::Clear => {}
            Dip::Split(station) => between.push(*station),
            Dip::Touch(station) => findings.found.push(touch(&station, angle, plan)),
        }
    }
    for pair in in_order(ends.0, between, ends.1).windows(2) {
        events_between(problem, (&pair[0], &pair[1]), plan, &mut findings);
    }
    findings.found.sort_by(|a, b| (plan.sign * a.distance).total_cmp(&(plan.sign * b.distance)));
    findings
}

/// Events on the very edge of the range, where the walk ends and no change of sign can follow.
pub(crate) fn events_on_edge(
    problem: &mut CycleProblem,
    ends: (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
) -> Vec<Found> {
    let after = ends.1;
    let change = Change::between(ends.0, after);
    let mut found = Vec::new();
    if stands_on(after, WATCH_DOUBLING) && !change.doubles {
        found.extend(
            problem.locate_at(CriticalKind::Doubling, after).map(|located| located_event(problem, located, ends, plan)),
        );
    }
    let bracketed =
        [(WATCH_TORUS, EventKind::Torus, change.pair), (WATCH_BRANCHING, EventKind::Branching, change.passes_one)];
    for (index, kind, seen) in bracketed {
        // Where it stands there before, too, it stays: a pair of a conservative model on the circle.
        let nearly = |station: &CycleStation| station.watch.values[index].value.abs() <= NEARLY_ON;
        if seen || nearly(ends.0) || !nearly(after) {
            continue;
        }
        let located = match kind {
            EventKind::Torus => torus_event::at(problem, after, plan),
            _ => crossing_event::at(problem, after, plan),
        };
        let edge = after.point.unknowns.parameter;
        let width = plan.study.range.1 - plan.study.range.0;
        let slack = |event: &Found| event.error.unwrap_or(0.0) + f64::EPSILON * width.max(edge.abs());
        if let Some(event) = located.filter(|event| (event.point.unknowns.parameter - edge).abs() <= slack(event)) {
            found.push(event);
        } else if stands_on(after, index) {
            let note = "on the edge of the range to within what the multipliers tell";
            let mut event = unresolved(after, (edge, EDGE * width), note.into(), plan);
            (event.kind, event.angle) = (kind, critical_angle(problem, after));
            found.push(event);
        }
    }
    found
}

/// Watched value under which an event is looked for on the edge of the range: multipliers are known to less in any case.
const NEARLY_ON: f64 = 1e-6;
/// Share of the range within which an event on the edge is not located further: multipliers there are 1 to 1e-10.
const EDGE: f64 = 1e-9;

/// Angle of the multiplier nearest to the unit circle.
fn critical_angle(problem: &mut CycleProblem, station: &CycleStation) -> Option<f64> {
    let spectrum = problem.spectrum(&station.point).ok()?;
    let nearest = spectrum.multipliers.iter().min_by(|x, y| x.log_modulus.abs().total_cmp(&y.log_modulus.abs()));
    nearest.map(|mu| mu.angle.abs())
}

/// Pairs of events that cancel inside a step, with the angle of the critical multiplier where it is known.
fn dips(
    problem: &mut CycleProblem,
    ends: (&CycleStation, &CycleStation),
    earlier: Option<&CycleStation>,
) -> [(Dip, Option<f64>); 3] {
    let product = |station: &CycleStation| Some(station.watch.values[WATCH_DOUBLING].value);
    let doubling = match problem.doubling_dip(ends.0, ends.1) {
        // Where two multipliers are near -1 at once the bordered scalar has poles; their product has none.
        None | Some(Dip::Clear) => valley(problem, ends, earlier, &product),
        Some(dip) => dip,
    };
    let [torus, branching] = [0, 1].map(|index| {
        let value = move |station: &CycleStation| smooth_values(station)[index];
        valley(problem, ends, earlier, &value)
    });
    [(doubling, Some(std::f64::consts::PI)), (torus, None), (branching, Some(0.0))]
}

/// A watched value that touches zero. Two events at a distance d from each other make it dip by d^2 only.
fn touch(at: &CycleStation, angle: Option<f64>, plan: &WalkPlan<'_>) -> Found {
    let width = plan.study.range.1 - plan.study.range.0;
    let interval = (at.point.unknowns.parameter, TOUCHING * width);
    let note = "a multiplier touches the unit circle: two events closer to each other than can be told, or none";
    let mut event = unresolved(at, interval, note.into(), plan);
    event.angle = angle;
    event
}

/// Share of the range within which two events that cancel cannot be told apart: the root of roundoff, with a margin.
const TOUCHING: f64 = 1e-6;

/// Stations from one to another with those between them, in the order of the walk.
fn in_order(from: &CycleStation, mut between: Vec<CycleStation>, to: &CycleStation) -> Vec<CycleStation> {
    let along = (to.distance - from.distance).signum();
    between.sort_by(|a, b| (along * a.distance).total_cmp(&(along * b.distance)));
    std::iter::once(from.clone()).chain(between).chain([to.clone()]).collect()
}

/// The events of all parts between two stations; a part that holds more of a kind than one is cut between them.
fn events_between(
    problem: &mut CycleProblem,
    ends: (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
    findings: &mut Findings,
) {
    /// Cuts between events in all: a step with more is no step of this branch.
    const CUTS: usize = 30;
    let mut waiting = parts(problem, ends, Whole::Crossings);
    let mut cuts = 0;
    while let Some(part) = waiting.pop() {
        let mut own = Findings { found: Vec::new(), jumped: false };
        events_of_part(problem, &part, plan, &mut own);
        let between = if cuts < CUTS { beside(problem, &part, &own.found) } else { Vec::new() };
        if !between.is_empty() {
            cuts += 1;
            for pair in in_order(&part.before, between, &part.after).windows(2) {
                waiting.extend(parts(problem, (&pair[0], &pair[1]), Whole::Crossings));
            }
            continue;
        }
        findings.jumped |= own.jumped;
        findings.found.extend(own.found);
    }
}

fn events_of_part(problem: &mut CycleProblem, part: &Part, plan: &WalkPlan<'_>, findings: &mut Findings) {
    let change = part.change;
    if change.may_cross() {
        match crossing_event::between(problem, (&part.before, &part.after), plan) {
            Looked::Found(found) => {
                // The parameter goes on at such a crossing: where it turns all the same, a fold lies beside.
                let beside = change.turns && found.kind == EventKind::Transcritical;
                findings.found.extend(beside.then(|| fold_beside(problem, part, &found.point, plan)).flatten());
                return findings.found.push(*found);
            }
            Looked::Gap => {
                findings.jumped = true;
                return;
            }
            Looked::NotLocated => {}
        }
        // Cut further, as far as cycles can be told from each other.
        for part in parts(problem, (&part.before, &part.after), Whole::Explained) {
            rest_of_part(problem, &part, plan, findings);
        }
        return;
    }
    rest_of_part(problem, part, plan, findings);
}

/// The fold of a part in which another branch crosses, too, at a given cycle; none where the two are too near to be told apart.
fn fold_beside(problem: &mut CycleProblem, part: &Part, crossing: &CyclePoint, plan: &WalkPlan<'_>) -> Option<Found> {
    /// Halvings of the part until the crossing lies outside: they take any stride to what cycles are known to.
    const HALVINGS: usize = 40;
    let (mut low, mut high) = (part.before.clone(), part.after.clone());
    let fold = |station: &CycleStation| station.watch.values[WATCH_FOLD].value;
    for _ in 0..HALVINGS {
        let share = problem.share_of((&low, &high), crossing);
        if !(0.0..=1.0).contains(&share) {
            let change = Change::between(&low, &high);
            return Some(located(problem, CriticalKind::Fold, &Part { before: low, after: high, change }, plan));
        }
        let middle = problem.between(&low, &high, 0.5)?;
        if fold(&middle) * fold(&low) < 0.0 { high = middle } else { low = middle }
    }
    None
}

/// The events of a part but crossings that are located.
fn rest_of_part(problem: &mut CycleProblem, part: &Part, plan: &WalkPlan<'_>, findings: &mut Findings) {
    let change = part.change;
    if change.turns {
        findings.found.extend(turning(problem, part, plan));
    }
    if change.doubles {
        findings.found.push(located(problem, CriticalKind::Doubling, part, plan));
    }
    if change.passes_one && !change.turns && is_gap(problem, part) {
        findings.jumped = true;
    } else if !change.is_explained() && !change.turns || change.pair && change.count > 0 {
        let torus = if change.pair { torus_event::between(problem, (&part.before, &part.after), plan) } else { None };
        findings.found.push(torus.unwrap_or_else(|| remaining_change(problem, part, plan)));
    }
}

/// Whether the ends of a part that could not be cut any further are apart: there is no way along one branch between them.
fn is_gap(problem: &CycleProblem, part: &Part) -> bool {
    /// Distance within which two cycles count as one: beside a crossing of branches, where the equations are nearly
    /// singular, cycles are known to the root of roundoff, and that of Lorenz's equations is some 1e-12.
    const APART: f64 = 3e-6;
    problem.distance(&part.before.point, &part.after.point) > APART
}

fn located(problem: &mut CycleProblem, kind: CriticalKind, part: &Part, plan: &WalkPlan<'_>) -> Found {
    let ends = (&part.before, &part.after);
    let index = if kind == CriticalKind::Fold { WATCH_FOLD } else { WATCH_DOUBLING };
    match problem.locate(kind, index, ends.0, ends.1) {
        Ok(located) => located_event(problem, located, ends, plan),
        Err(fault) => bracketed(problem, kind, fault.bracket, ends, plan),
    }
}

/// The event where the parameter turns back; none where that is noise.
fn turning(problem: &mut CycleProblem, part: &Part, plan: &WalkPlan<'_>) -> Option<Found> {
    if part.change.passes_one {
        return Some(located(problem, CriticalKind::Fold, part, plan));
    }
    // The parameter turns back, yet no multiplier changes side: the mirror image of this branch goes on from there. Where
    // none is near +1 at all, the parameter stands still to roundoff and its direction is noise.
    if !is_near_one(problem, &part.after) && !is_near_one(problem, &part.before) {
        return None;
    }
    let mut event = located(problem, CriticalKind::Fold, part, plan);
    event.kind = EventKind::Branching;
    event.located = None;
    event.note = "the parameter turns back but no multiplier changes side: another branch crosses here, as at a \
                  pitchfork met from one of its two sides; not followed"
        .into();
    Some(event)
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
    let noise =
        if kind == CriticalKind::Doubling { noise_of_doubling(problem, (a + b) / 2.0, (before, after)) } else { 0.0 };
    let error = spread + noise + profile_error * scale * SUPERCONVERGENCE + 1e2 * f64::EPSILON * scale;
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
    event.period_error = Some(period_error_between(problem, before, after));
    if tight {
        (event.kind, event.angle) = (event_kind, Some(angle));
    }
    event
}

/// What the noise of multipliers makes of the place where one of them is -1: beside a second such place their product is
/// flat, and the smaller of its values at the ends of the step tells how flat.
fn noise_of_doubling(problem: &mut CycleProblem, value: f64, (before, after): (&CycleStation, &CycleStation)) -> f64 {
    /// Units in the last place that a multiplier near the unit circle is known to besides.
    const UNITS: f64 = 8.0;
    let mut worst = 0.0f64;
    for station in [before, after] {
        let Ok(spectrum) = problem.spectrum(&station.point) else { return f64::INFINITY };
        let noise = spectrum.trivial_defect + UNITS * f64::EPSILON;
        let height = station.watch.values[WATCH_DOUBLING].value.abs();
        worst = worst.max(noise * (station.point.unknowns.parameter - value).abs() / height);
    }
    worst
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
                let (side, note) = match found.c {
                    0.0 => (None, NO_SIDE.to_string()),
                    _ if !found.certain => {
                        (None, "normal form coefficient c = 0 to roundoff: no side is claimed".into())
                    }
                    c => (Some(criticality(c)), format!("normal form coefficient c = {c:.6e}")),
                };
                (EventKind::Doubling, std::f64::consts::PI, side, Some(note))
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
        crossing: None,
    }
}

/// Note of a doubling whose normal form has no cubic term.
const NO_SIDE: &str = "normal form coefficient c = 0: as in a linear equation, doubled motions of every size exist at this \
                       very value; not followed";

fn criticality(c: f64) -> Criticality {
    if c < 0.0 { Criticality::Supercritical } else { Criticality::Subcritical }
}

/// Note of an event at which two multipliers pass the circle together.
const TWO_AT_ONCE: &str = "two multipliers pass +1 or -1 at one place: a pair in strong resonance (1:1 or 1:2), or two events \
                           closer to each other than the accuracy tells";

/// A change of the unstable count that is neither fold nor doubling: narrowed by bisection and told as what crosses.
fn remaining_change(problem: &mut CycleProblem, part: &Part, plan: &WalkPlan<'_>) -> Found {
    let Part { before: low, after: high, .. } = narrowed(problem, part);
    let change = low.watch.unstable_count.abs_diff(high.watch.unstable_count);
    let (a, b) = (low.point.unknowns.parameter, high.point.unknowns.parameter);
    // The count itself hangs on multipliers of profiles with their own error.
    let resolution = SUPERCONVERGENCE * problem.profile_error(&high.point);
    let scale = (plan.study.range.1 - plan.study.range.0).max(a.abs());
    let half_width = 0.5 * (a - b).abs() + (resolution + f64::EPSILON) * scale + noise_of_multipliers(problem, part);
    let critical = problem.spectrum(&high.point).ok().and_then(|spectrum| {
        spectrum.multipliers.into_iter().min_by(|x, y| x.log_modulus.abs().total_cmp(&y.log_modulus.abs()))
    });
    let is_pair = |angle: f64| angle.abs() > REAL && angle.abs() < std::f64::consts::PI - REAL;
    let (kind, angle, note) = match critical {
        Some(mu) if change == 2 && is_pair(mu.angle) => {
            (EventKind::Torus, Some(mu.angle.abs()), "located by bisection of the unstable count")
        }
        Some(mu) if change == 1 && mu.angle == 0.0 => (EventKind::Branching, Some(0.0), PASSES_ONE),
        Some(mu) if change == 2 => {
            (EventKind::Unresolved, Some(if mu.angle.abs() < 1.0 { 0.0 } else { std::f64::consts::PI }), TWO_AT_ONCE)
        }
        // Beside such a place both are so near the circle that neither has a side.
        Some(mu) if part.change.count == 2 && !is_pair(mu.angle) => {
            (EventKind::Unresolved, Some(if mu.angle.abs() < 1.0 { 0.0 } else { std::f64::consts::PI }), TWO_AT_ONCE)
        }
        _ => (EventKind::Unresolved, None, "the number of unstable multipliers changes here for a reason not resolved"),
    };
    let mut event = unresolved(&low, (0.5 * (a + b), half_width), note.into(), plan);
    (event.kind, event.angle) = (kind, angle);
    event.period_error = Some(period_error_between(problem, &low, &high));
    event
}

/// Stretch of the parameter over which the multipliers of a cycle that does not move are as uncertain as the linear mesh
/// leaves them: such a cycle is known on every mesh, and its own error tells nothing of them. 0 for others.
fn noise_of_multipliers(problem: &mut CycleProblem, part: &Part) -> f64 {
    /// Motion, in the metric, that is none.
    const STILL: f64 = 1e-9;
    if problem.motion(&part.after.point) > STILL {
        return 0.0;
    }
    let index = if part.change.passes_one { WATCH_BRANCHING } else { WATCH_TORUS };
    let value = |station: &CycleStation| station.watch.values[index].value;
    let parameter = |station: &CycleStation| station.point.unknowns.parameter;
    let slope = (value(&part.after) - value(&part.before)) / (parameter(&part.after) - parameter(&part.before));
    // They agree with Liouville's formula to the accuracy times their sum.
    let sum = problem.spectrum(&part.after.point).map_or(1.0, |spectrum| {
        let logs = spectrum.multipliers.iter().map(|mu| mu.log_modulus.abs());
        logs.filter(|log| log.is_finite()).sum::<f64>().max(1.0)
    });
    let noise = problem.settings().mesh.accuracy * sum / slope.abs();
    if noise.is_finite() { noise } else { 0.0 }
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
        crossing: None,
    }
}

pub(crate) fn landing_event(
    problem: &mut CycleProblem,
    landing: Landing,
    after: &CycleStation,
    plan: &WalkPlan<'_>,
) -> Found {
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
        crossing: None,
    }
}

/// Relative error claimed for the period of an event known by an interval: the period varies along a stride of some
/// hundredths, and nothing better was computed.
const PERIOD_OF_INTERVAL: f64 = 1e-3;
