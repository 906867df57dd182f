//! One direction of one branch: steps, events, the reason of the end.

use std::sync::atomic::{AtomicBool, Ordering};

use armilla_follow::{Follower, Outcome, Settings, Station, Step};
use armilla_record::{End, EndReason, EventKind, Point};
use armilla_stability::{CyclePoint, CycleProblem, CycleTangent, WATCH_DOUBLING, WATCH_FOLD};

use crate::ahead::Ahead;
use crate::approach::{Known, approach, orbit_stands};
use crate::ends::{Passage, birth_of_cycle, blown_up, end, end_of_follower, passed_through, resolution_lost};
use crate::near_miss::{Sample, near_miss};
use crate::step_events::{Found, SUPERCONVERGENCE, events_of_step, is_explained};
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
    /// Whether the walk ends at its first doubling.
    pub to_first_doubling: bool,
    /// Where the next doubling is expected.
    pub ahead: Option<Ahead>,
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
            let seen = Seen {
                motions: vec![motion(&mut follower)],
                periods: vec![period(&follower)],
                samples: vec![samples_at(&follower)],
            };
            Walker { follower, plan, sink, walk, seen, retries: 0, doubt_until: 0.0 }.run()
        }
        Err(_) => {
            let words = "the multipliers at its first cycle could not be computed".into();
            Walk { end: end(EndReason::Stuck, start_value, words), ..walk }
        }
    }
}

/// What was seen at each station, the first included.
struct Seen {
    /// Size of the motion, and parameter.
    motions: Vec<(f64, f64)>,
    /// Parameter and period.
    periods: Vec<(f64, f64)>,
    /// Watched values.
    samples: Vec<[Sample; 2]>,
}

/// A walk under way.
struct Walker<'w, 'p> {
    follower: Follower<'w, CycleProblem>,
    plan: &'w WalkPlan<'p>,
    sink: &'w mut dyn WalkSink,
    walk: Walk,
    seen: Seen,
    retries: usize,
    /// Distance up to which the last doubt reaches.
    doubt_until: f64,
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
        self.walk.end = end_of_follower(&mut self.follower, self.plan, &self.seen.motions);
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
    fn take(&mut self, mut step: Step) -> Taken {
        if self.retries == 0 {
            drop_idle_turns(&mut step);
        }
        self.seen.motions.push(motion(&mut self.follower));
        let passage = passed_through(&mut self.follower, self.plan, &self.seen.motions, &self.walk.points);
        if matches!(passage, Passage::TooLong) && self.retry() {
            return Taken::On;
        }
        match passage {
            Passage::Fell(ended) => return if self.retry() { Taken::On } else { Taken::Ended(ended) },
            Passage::End(ended, rest) => {
                self.come_to_rest(rest);
                return Taken::Ended(ended);
            }
            Passage::None | Passage::TooLong => {}
        }
        self.seen.samples.truncate(self.walk.points.len() + 1);
        self.seen.samples.push(samples_at(&self.follower));
        if (!is_explained(&step) || touches_zero(&self.seen.samples)) && self.retry() {
            return Taken::On;
        }
        let (problem, before, after) = self.follower.parts();
        let before = before.expect("a step has a station before it").clone();
        let after = after.clone();
        let found = events_of_step(problem, &step, (&before, &after), self.plan);
        // A fold beyond the edge: the walk should have ended on the edge before it, and does so in shorter strides.
        let (low, high) = self.plan.study.range;
        let outside = |value: f64| value < low || value > high;
        let beyond = |event: &Found| event.kind == EventKind::Fold && outside(event.point.unknowns.parameter);
        if found.iter().any(beyond) && self.retry() {
            return Taken::On;
        }
        // The budget of retries belongs to the whole stretch that was in doubt, or the walk would creep towards a
        // singular point in ever shorter strides.
        if after.distance >= self.doubt_until {
            self.retries = 0;
        }
        self.keep(found, after)
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

    fn come_to_rest(&mut self, rest: Option<(f64, f64)>) {
        let Some(rest) = rest else { return };
        let (problem, before, _) = self.follower.parts();
        let event = birth_of_cycle(before.expect("a step has a station before it"), problem, rest, self.plan);
        self.sink.event(problem, &event);
        self.walk.events.push(event);
    }

    /// Passes on what a good step brought, and looks whether the walk ends with it.
    fn keep(&mut self, found: Vec<Found>, after: CycleStation) -> Taken {
        let doubles = found.iter().any(|event| event.kind == EventKind::Doubling);
        let (problem, _, _) = self.follower.parts();
        for event in found {
            self.sink.event(problem, &event);
            self.walk.events.push(event);
        }
        let Ok(point) = problem.describe(&after.point, self.plan.turns, self.plan.sign * after.distance) else {
            return Taken::NoMultipliers;
        };
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
        self.seen.periods.push(period(&self.follower));
        let width = self.plan.study.range.1 - self.plan.study.range.0;
        let share = SUPERCONVERGENCE * self.walk.points.last().map_or(0.0, |last| last.point.profile_error);
        let known =
            Known { width, period: share, parameter: share * width + self.follower.parts().0.parameter_roundoff() };
        let grows = self.follower.end().is_none() && orbit_stands(&self.walk.points);
        match approach(&self.seen.periods, known).filter(|_| grows) {
            Some(approach) => {
                let (event, ended) = blown_up(&after, self.plan, approach);
                let (problem, _, _) = self.follower.parts();
                self.sink.event(problem, &event);
                self.walk.events.push(event);
                Taken::Ended(ended)
            }
            None => Taken::On,
        }
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

fn motion(follower: &mut Follower<'_, CycleProblem>) -> (f64, f64) {
    let (problem, _, current) = follower.parts();
    (problem.motion(&current.point), current.point.unknowns.parameter)
}

fn period(follower: &Follower<'_, CycleProblem>) -> (f64, f64) {
    let unknowns = &follower.current().point.unknowns;
    (unknowns.parameter, unknowns.period)
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
