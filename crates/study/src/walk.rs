//! One direction of one branch: steps, events, the reason of the end.

use std::sync::atomic::{AtomicBool, Ordering};

use armilla_follow::{FollowEnd, Follower, Landing, Outcome, Problem, Settings, Station, Step};
use armilla_record::{End, EndReason, EventKind, Point};
use armilla_stability::{CyclePoint, CycleProblem, CycleTangent, WATCH_DOUBLING, WATCH_FOLD};

use crate::ahead::Ahead;
use crate::approach::{Approach, Known, Past, approach, approach_of_stuck, orbit_stands, resolved};
use crate::crossing_event::{mirror_image, symmetry_words};
use crate::ends::{
    Passage, birth_of_cycle, blown_up, end, end_of_follower, passed_through, resolution_lost, short, stuck_at_rest,
};
use crate::guards::{bends, falls_on_shorter, leaps};
use crate::joins::{Atlas, MetAgain};
use crate::ledger::{Change, is_off_folds, is_sure};
use crate::near_miss::near_miss_by_mean;
use crate::rest::{Motion, Rest, push};
use crate::step_events::{Found, SUPERCONVERGENCE, events_of_step, events_on_edge, landing_event, unresolved};
use crate::study::Study;

pub(crate) type CycleStation = Station<CyclePoint, CycleTangent>;

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
    /// The branches followed before.
    pub atlas: &'a Atlas,
    /// Whether the walk ends at its first doubling.
    pub to_first_doubling: bool,
    /// Where the next doubling is expected.
    pub ahead: Option<Ahead>,
}

impl WalkPlan<'_> {
    /// Width of the asked range.
    fn width(&self) -> f64 {
        self.study.range.1 - self.study.range.0
    }
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
    let walk = Walk { points: Vec::new(), events: Vec::new(), end: end(EndReason::Stuck, start_value, String::new()) };
    match Follower::start_along(problem, first.0, first.1, plan.settings.clone()) {
        Ok(mut follower) => {
            let seen = Seen { motions: vec![motion(&mut follower)], periods: vec![past(&mut follower, plan.width())] };
            let account = follower.current().clone();
            Walker { follower, plan, sink, walk, seen, account, earlier: None, retries: 0, doubt_until: 0.0, met: None }
                .run()
        }
        Err(_) => {
            let words = "the multipliers at its first cycle could not be computed".into();
            Walk { end: end(EndReason::Stuck, start_value, words), ..walk }
        }
    }
}

/// What was seen at each station, the first included.
struct Seen {
    /// The motion about the mean.
    motions: Vec<Motion>,
    /// Parameter and period.
    periods: Vec<Past>,
}

/// A walk under way.
struct Walker<'w, 'p> {
    follower: Follower<'w, CycleProblem>,
    plan: &'w WalkPlan<'p>,
    sink: &'w mut dyn WalkSink,
    walk: Walk,
    seen: Seen,
    /// The last station at which the side of every multiplier was known: from there on changes are accounted for.
    account: CycleStation,
    /// The one before it.
    earlier: Option<CycleStation>,
    retries: usize,
    /// Distance up to which the last doubt reaches.
    doubt_until: f64,
    /// The branch followed before that the last point lies on.
    met: Option<MetAgain>,
}

impl Walker<'_, '_> {
    fn run(mut self) -> Walk {
        loop {
            if self.plan.abort.load(Ordering::Relaxed) {
                let value = self.follower.current().point.unknowns.parameter;
                self.walk.end = end(EndReason::Interrupted, value, "stopped by the user".into());
                return self.walk;
            }
            self.aim();
            let Outcome::Step(step) = self.follower.step() else { break };
            match self.take(step) {
                Taken::On => {}
                Taken::NoMultipliers => break,
                Taken::Ended(ended) => {
                    self.walk.end = ended;
                    return self.walk;
                }
            }
        }
        if let Some(ended) = self.stuck_on_the_way() {
            self.walk.end = ended;
            return self.walk;
        }
        self.walk.end = match stuck_at_rest(&mut self.follower, self.plan, &self.seen.motions) {
            Some((ended, rest)) => {
                let last = self.follower.current().clone();
                self.come_to_rest(&last, rest);
                ended
            }
            None => end_of_follower(&mut self.follower, self.plan, &self.seen.motions),
        };
        self.walk
    }

    /// Plans the next stride so that the doubling expected ahead is met in few steps, as long as none was met.
    fn aim(&mut self) {
        let Some(ahead) = &self.plan.ahead else { return };
        // A stride in doubt is not to be made longer again.
        if self.retries > 0 || self.walk.events.iter().any(|event| event.kind == EventKind::Doubling) {
            return;
        }
        let station = self.follower.current();
        let stride = ahead.stride(station.point.unknowns.parameter, station.distance, self.follower.stride());
        if let Some(stride) = stride {
            self.follower.ask_stride(stride);
        }
    }

    /// Judges a step: takes it, takes it back, or ends the walk with it.
    fn take(&mut self, step: Step) -> Taken {
        push(&mut self.seen.motions, motion(&mut self.follower));
        let (problem, before, after) = self.follower.parts();
        let before = before.expect("a step has a station before it").clone();
        let after = after.clone();
        if falls_on_shorter(problem, &before, &after, self.plan.turns) {
            return self.retry_or_end("a neighbouring cycle of fewer turns could not be told from this one");
        }
        let passage = passed_through(&mut self.follower, self.plan, &self.seen.motions, &self.walk.points);
        if matches!(passage, Passage::TooLong) && self.retry() {
            return Taken::On;
        }
        match passage {
            Passage::Fell(ended) => return if self.retry() { Taken::On } else { Taken::Ended(ended) },
            Passage::End(ended, rest) => {
                if rest.is_none() && before.watch.values[WATCH_DOUBLING].value < 0.0 {
                    // Where it is born no multiplier of a doubled cycle is negative: one passes -1 on the way there.
                    if self.retry() {
                        return Taken::On;
                    }
                    self.doubling_before_birth(&before, ended.value);
                }
                if let Some(rest) = rest {
                    self.come_to_rest(&before, rest);
                }
                return Taken::Ended(ended);
            }
            Passage::None | Passage::TooLong => {}
        }
        if self.is_doubtful(&before, &after) && self.retry() {
            return Taken::On;
        }
        self.judge(&step, after)
    }

    /// Whether a shorter stride may tell more of what happens in a step.
    fn is_doubtful(&mut self, before: &CycleStation, after: &CycleStation) -> bool {
        let change = Change::between(&self.account, after);
        let explained = !is_sure(after) || change.is_explained() || change.may_cross();
        !explained
            || self.may_hide(before, after)
            || leaps(before, after, self.foretold(before, after))
            || self.may_turn_twice(before, after)
    }

    /// Whether a bump of a watched value may hide inside a step; what a prediction tells is no surprise.
    fn may_hide(&self, before: &CycleStation, after: &CycleStation) -> bool {
        let told = self.foretold(before, after).is_some();
        !told && self.earlier.as_ref().is_some_and(|earlier| bends(earlier, before, after))
    }

    /// The multiplier on its way from 1 at the birth to -1 at a foretold doubling that is still ahead.
    fn foretold(&self, before: &CycleStation, after: &CycleStation) -> Option<(f64, f64)> {
        let met = self.walk.events.iter().any(|event| event.kind == EventKind::Doubling);
        let ahead = self.plan.ahead.filter(|_| !met)?;
        let [from, to] = [before, after].map(|station| ahead.multiplier(station.point.unknowns.parameter));
        Some((from, to))
    }

    /// Whether the parameter may turn back twice inside a step.
    fn may_turn_twice(&mut self, before: &CycleStation, after: &CycleStation) -> bool {
        let (problem, _, _) = self.follower.parts();
        let length = problem.distance(&before.point, &after.point);
        let mean = (after.point.unknowns.parameter - before.point.unknowns.parameter) / length;
        // The metric may have changed since the first of them was made.
        let slope = |station: &CycleStation| {
            station.tangent.row.parameter / problem.inner(&station.tangent, &station.tangent).sqrt()
        };
        let (from, to) = (slope(before), slope(after));
        near_miss_by_mean((from, to), mean)
    }

    /// Finds the events of a step that is to stay, unless they show that it must not.
    fn judge(&mut self, step: &Step, after: CycleStation) -> Taken {
        let (problem, _, _) = self.follower.parts();
        let sure = is_sure(&after);
        let on_edge = matches!(step.landing, Some(Landing::Edge(_))) && is_off_folds(&after);
        let mut found = Vec::new();
        if sure || on_edge {
            let findings = events_of_step(problem, (&self.account, &after), self.earlier.as_ref(), self.plan);
            if findings.jumped {
                return self
                    .retry_or_end("two branches come so near each other here that they could not be told apart");
            }
            found = findings.found;
        }
        if on_edge {
            found.extend(events_on_edge(problem, (&self.account, &after), self.plan));
        }
        // A fold beyond the edge: the walk should have ended on the edge before it, and does so in shorter strides.
        let (low, high) = self.plan.study.range;
        let outside = |value: f64| value < low || value > high;
        let beyond = |event: &Found| event.kind == EventKind::Fold && outside(event.point.unknowns.parameter);
        if found.iter().any(beyond) && self.retry() {
            return Taken::On;
        }
        let (problem, _, _) = self.follower.parts();
        if let Some(landing) = step.landing {
            found.push(landing_event(problem, landing, &after, self.plan));
        }
        // The budget of retries belongs to the whole stretch that was in doubt, or the walk would creep towards a
        // singular point in ever shorter strides.
        if after.distance >= self.doubt_until {
            self.retries = 0;
        }
        let count = if sure || after.watch.values[WATCH_FOLD].value * self.account.watch.values[WATCH_FOLD].value < 0.0
        {
            after.watch.unstable_count
        } else {
            self.account.watch.unstable_count
        };
        if sure {
            self.earlier = Some(std::mem::replace(&mut self.account, after.clone()));
        }
        self.keep(found, after, count)
    }

    /// Takes the last step back as long as there are shorter strides; ends the walk before it where there are none.
    fn retry_or_end(&mut self, why: &str) -> Taken {
        let reached = self.follower.current().distance;
        let (_, before, _) = self.follower.parts();
        let value = before.expect("a step has a station before it").point.unknowns.parameter;
        if self.follower.retract() {
            self.seen.motions.pop();
            self.doubt_until = self.doubt_until.max(reached);
            return Taken::On;
        }
        let words = format!("{why}, {} = {}", self.plan.study.file.follow.parameter, short(self.plan.study, value));
        Taken::Ended(end(EndReason::Stuck, value, words))
    }

    /// Takes the last step back, to be tried again in half the stride, where that is allowed.
    fn retry(&mut self) -> bool {
        let reached = self.follower.current().distance;
        if self.retries >= RETRIES || !self.follower.retract() {
            return false;
        }
        self.seen.motions.pop();
        self.retries += 1;
        self.doubt_until = self.doubt_until.max(reached);
        true
    }

    /// The event at the equilibrium that a walk comes to behind its last station.
    fn come_to_rest(&mut self, last: &CycleStation, rest: Rest) {
        let (problem, _, _) = self.follower.parts();
        let event = birth_of_cycle(last, problem, rest, self.plan);
        self.sink.event(problem, &event);
        self.walk.events.push(event);
    }

    /// Tells of a doubling between a station and the birth that the walk ends at.
    fn doubling_before_birth(&mut self, before: &CycleStation, birth: f64) {
        let value = before.point.unknowns.parameter;
        let interval = (0.5 * (value + birth), 0.5 * (value - birth).abs());
        let note = "a period doubling lies between the last cycle and the birth of the branch, but was not located";
        let event = unresolved(before, interval, note.into(), self.plan);
        let (problem, _, _) = self.follower.parts();
        self.sink.event(problem, &event);
        self.walk.events.push(event);
    }

    /// The end of a walk whose every cycle has one value of the parameter: nothing but the amplitude tells them apart.
    fn continuum(&self) -> Option<End> {
        /// Cycles that show it.
        const CYCLES: usize = 12;
        /// Units in the last place of the parameter, or of the range, within which it is one value.
        const UNITS: f64 = 64.0;
        let points = &self.walk.points;
        if points.len() != CYCLES {
            return None;
        }
        let value = points[0].point.value;
        let same = UNITS * f64::EPSILON * value.abs().max(self.plan.width());
        points.iter().all(|walked| (walked.point.value - value).abs() <= same).then(|| {
            let name = &self.plan.study.file.follow.parameter;
            let words = format!("cycles fill a continuum at the one value {name} = {}", short(self.plan.study, value));
            end(EndReason::Continuum, value, words)
        })
    }

    /// Passes on what a good step brought, and looks whether the walk ends with it.
    fn keep(&mut self, found: Vec<Found>, after: CycleStation, unstable_count: usize) -> Taken {
        let doubles = found.iter().any(|event| event.kind == EventKind::Doubling);
        let (problem, _, _) = self.follower.parts();
        for event in found {
            let mirror = mirror_image(self.plan.study, &event);
            self.sink.event(problem, &event);
            self.walk.events.push(event);
            if let Some(ended) = mirror {
                return Taken::Ended(ended);
            }
        }
        let Ok(mut point) = problem.describe(&after.point, self.plan.turns, self.plan.sign * after.distance) else {
            return Taken::NoMultipliers;
        };
        // On a fold the spectrum does not know the side of a multiplier; the walk does.
        point.unstable_count = unstable_count;
        self.sink.point(&point);
        let lost = resolution_lost(&point, self.plan);
        self.walk.points.push(Walked { point, cycle: after.point.clone() });
        if let Some(lost) = lost {
            return Taken::Ended(lost);
        }
        if self.plan.to_first_doubling && doubles {
            let words = "followed to its first doubling only, as a cascade asks".into();
            return Taken::Ended(end(EndReason::Budget, after.point.unknowns.parameter, words));
        }
        let past = past(&mut self.follower, self.plan.width());
        self.seen.periods.push(past);
        if let Some(continuum) = self.continuum() {
            return Taken::Ended(continuum);
        }
        if let Some(joined) = self.joined() {
            return Taken::Ended(joined);
        }
        match self.approach() {
            Some(approach) => Taken::Ended(self.blow_up(&after, approach)),
            None => Taken::On,
        }
    }

    /// The end of a walk whose last two points lie on a branch followed before: one alone may be a crossing.
    fn joined(&mut self) -> Option<End> {
        let last = self.walk.points.last()?;
        let (problem, _, _) = self.follower.parts();
        let met = self.plan.atlas.branch_of(problem, &last.point, &last.cycle);
        let before = std::mem::replace(&mut self.met, met.clone());
        let MetAgain { branch, mirror } = met.filter(|met| before.as_ref() == Some(met))?;
        let value = last.point.value;
        let here = short(self.plan.study, value);
        let name = &self.plan.study.file.follow.parameter;
        let words = match mirror {
            None => format!("joins `{branch}` at {name} = {here}"),
            Some(symmetry) => format!(
                "joins the mirror image ({}) of `{branch}` at {name} = {here}, which is not computed twice",
                symmetry_words(&symmetry, &self.plan.study.model)
            ),
        };
        Some(end(EndReason::Joins { branch }, value, words))
    }

    /// The end of a walk that got stuck on the way to an unbounded period, where its periods tell.
    fn stuck_on_the_way(&mut self) -> Option<End> {
        if !matches!(self.follower.end(), Some(FollowEnd::Stuck)) || !orbit_stands(&self.walk.points) {
            return None;
        }
        let width = self.plan.width();
        let (problem, _, after) = self.follower.parts();
        let after = after.clone();
        let known = Known { width, parameter: problem.parameter_roundoff() };
        let approach = approach_of_stuck(&resolved(problem, &self.seen.periods, &self.walk.points), known)?;
        Some(self.blow_up(&after, approach))
    }

    fn blow_up(&mut self, after: &CycleStation, approach: Approach) -> End {
        let (event, ended) = blown_up(after, self.plan, approach);
        let (problem, _, _) = self.follower.parts();
        self.sink.event(problem, &event);
        self.walk.events.push(event);
        ended
    }

    /// How the period grows without bound, if it does.
    fn approach(&mut self) -> Option<Approach> {
        if self.follower.end().is_some() || !orbit_stands(&self.walk.points) {
            return None;
        }
        let width = self.plan.width();
        let (problem, _, _) = self.follower.parts();
        // The period of a forcing grows because it is told to.
        if problem.is_forced() {
            return None;
        }
        let known = Known { width, parameter: problem.parameter_roundoff() };
        let seen = approach(&self.seen.periods, known)?;
        // Asked once on a walk, so that the better periods may cost what they cost.
        Some(approach(&resolved(problem, &self.seen.periods, &self.walk.points), known).unwrap_or(seen))
    }
}

/// What became of a step.
enum Taken {
    /// The walk goes on.
    On,
    /// Its multipliers could not be computed.
    NoMultipliers,
    /// The walk ends with it.
    Ended(End),
}

fn motion(follower: &mut Follower<'_, CycleProblem>) -> Motion {
    let (problem, _, current) = follower.parts();
    Motion::of(problem, &current.point)
}

fn past(follower: &mut Follower<'_, CycleProblem>, width: f64) -> Past {
    let (problem, _, current) = follower.parts();
    let unknowns = &current.point.unknowns;
    // As far as a walk can tell without a finer mesh.
    let error = SUPERCONVERGENCE * problem.settings().mesh.accuracy * width + problem.parameter_roundoff();
    Past { value: unknowns.parameter, period: unknowns.period, error }
}
