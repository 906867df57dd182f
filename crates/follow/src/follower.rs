//! The walk along a branch.

use crate::hermite::Hermite;
use crate::problem::{Closing, Corrected, Failure, Orientation, Problem, Watch};
use crate::settings::{Settings, SettingsFault};
use crate::stride::{Finished, StrideControl};

/// A watched value that changed sign between the last two points.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Crossing {
    /// Index in the watch list.
    pub index: usize,
    /// Value before.
    pub before: f64,
    /// Value after.
    pub after: f64,
}

/// A parameter value a step ended on exactly.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Landing {
    /// An edge of the range.
    Edge(f64),
    /// A target.
    Target(f64),
}

/// One point of the walk with all that goes with it.
#[derive(Clone, Debug)]
pub struct Station<P, T> {
    /// The point.
    pub point: P,
    /// Unit tangent in the direction of the walk.
    pub tangent: T,
    /// Watched values.
    pub watch: Watch,
    /// Distance travelled from the start.
    pub distance: f64,
}

/// An accepted step.
#[derive(Clone, Debug)]
pub struct Step {
    /// Sign changes inside the step.
    pub crossings: Vec<Crossing>,
    /// Unstable counts before and after.
    pub unstable: (usize, usize),
    /// Exact landing at its end.
    pub landing: Option<Landing>,
}

/// Why the walk is over.
#[derive(Clone, Debug, PartialEq)]
pub enum FollowEnd<E> {
    /// It stands on an edge of the range.
    Edge(f64),
    /// It met its start again.
    Closed,
    /// The corrector failed at the shortest stride.
    Stuck,
    /// The problem cannot be evaluated further on.
    Outside(E),
    /// All points allowed are used.
    Budget,
}

/// What [`Follower::step`] did.
#[derive(Clone, Debug)]
pub enum Outcome {
    /// One more point.
    Step(Step),
    /// No more; see [`Follower::end`].
    Ended,
}

/// Walks along one branch in one direction.
pub struct Follower<'a, Q: Problem> {
    problem: &'a mut Q,
    settings: Settings,
    control: StrideControl,
    stride: f64,
    first: Station<Q::Point, Q::Tangent>,
    previous: Option<Station<Q::Point, Q::Tangent>>,
    current: Station<Q::Point, Q::Tangent>,
    taken: usize,
    end: Option<FollowEnd<Q::Error>>,
}

/// Why a walk cannot begin.
#[derive(Clone, Debug, PartialEq)]
pub enum StartFault<E> {
    /// A setting breaks its rule.
    Settings(SettingsFault),
    /// Tangent or watched values fail at the start.
    Problem(Failure<E>),
}

/// Contraction of the corrector above which its point is not taken, between the wanted 1/4 and the 1/2 at which Newton's
/// method meets two solutions at once. Lower costs shorter strides where equations are hard.
const SLOW: f64 = 0.45;
/// Length of a correction, in a metric in which solutions are about 1, under which its contraction may be roundoff's.
const ROUNDOFF: f64 = 1e-7;
/// Share of the bending of a step by which it may miss the curve of its tangents; a curve of constant bending misses by
/// none of it to leading order, the jump to a parallel curve by all.
const CURVE_SHARE: f64 = 0.5;
/// Share of the stride under which a miss is no reason: where the bending changes its sign the share alone would never be
/// met. Jumps to a parallel branch nearer than this are left to the contraction and to the orientation.
const CURVE_FLOOR: f64 = 2e-3;

/// A corrected candidate for the next point.
struct Candidate<Q: Problem> {
    point: Q::Point,
    tangent: Q::Tangent,
    cosine: f64,
    contraction: f64,
}

impl<'a, Q: Problem> Follower<'a, Q> {
    /// A walk from a solution, the parameter first going up (`direction` = 1) or down (-1).
    ///
    /// # Errors
    /// [`StartFault`].
    pub fn start(
        problem: &'a mut Q,
        point: Q::Point,
        direction: f64,
        settings: Settings,
    ) -> Result<Self, StartFault<Q::Error>> {
        let tangent = problem.tangent(&point, Orientation::Parameter(direction)).map_err(StartFault::Problem)?;
        Self::start_along(problem, point, tangent, settings)
    }

    /// A walk from a solution along a unit tangent.
    ///
    /// # Errors
    /// [`StartFault`].
    pub fn start_along(
        problem: &'a mut Q,
        point: Q::Point,
        tangent: Q::Tangent,
        settings: Settings,
    ) -> Result<Self, StartFault<Q::Error>> {
        settings.validate().map_err(StartFault::Settings)?;
        let watch = problem.watch(&point, &tangent).map_err(StartFault::Problem)?;
        let first = Station { point, tangent, watch, distance: 0.0 };
        Ok(Self {
            problem,
            control: StrideControl::default(),
            stride: settings.initial,
            previous: None,
            current: first.clone(),
            first,
            taken: 0,
            end: None,
            settings,
        })
    }

    /// Where the walk stands.
    pub fn current(&self) -> &Station<Q::Point, Q::Tangent> {
        &self.current
    }
    /// Where it stood one step ago.
    pub fn previous(&self) -> Option<&Station<Q::Point, Q::Tangent>> {
        self.previous.as_ref()
    }
    /// Why it is over, once it is.
    pub fn end(&self) -> Option<&FollowEnd<Q::Error>> {
        self.end.as_ref()
    }
    /// The stride the next step will try.
    pub fn stride(&self) -> f64 {
        self.stride
    }
    /// Asks for another next stride, within the shortest and the longest; the control of strides goes on from there.
    pub fn ask_stride(&mut self, stride: f64) {
        self.stride = stride.clamp(self.settings.shortest, self.settings.longest);
    }
    /// The problem with the last two stations, to ask it something about the step between them.
    #[allow(clippy::type_complexity)]
    pub fn parts(&mut self) -> (&mut Q, Option<&Station<Q::Point, Q::Tangent>>, &Station<Q::Point, Q::Tangent>) {
        (self.problem, self.previous.as_ref(), &self.current)
    }

    /// Undoes the last step and halves the stride. False where there is no step to undo or the stride is the
    /// shortest already.
    pub fn retract(&mut self) -> bool {
        let length = self.previous.as_ref().map_or(0.0, |previous| self.current.distance - previous.distance);
        if length <= 2.0 * self.settings.shortest {
            return false;
        }
        let Some(previous) = self.previous.take() else { return false };
        self.current = previous;
        // The problem may measure otherwise since; a tangent of another length would make strides of another one.
        if let Ok(tangent) = self.problem.tangent(&self.current.point, Orientation::Along(&self.current.tangent)) {
            self.current.tangent = tangent;
        }
        self.stride = (0.5 * length).max(self.settings.shortest);
        self.control = StrideControl::default();
        self.taken = self.taken.saturating_sub(1);
        self.end = None;
        true
    }

    /// One step.
    pub fn step(&mut self) -> Outcome {
        if self.end.is_none() && self.stands_on_outward_edge() {
            let edge = self.problem.parameter(&self.current.point);
            self.end = Some(FollowEnd::Edge(edge));
        }
        if self.end.is_none() && self.taken >= self.settings.points {
            self.end = Some(FollowEnd::Budget);
        }
        while self.end.is_none() {
            match self.attempt() {
                Ok(step) => return Outcome::Step(step),
                Err(failure) => self.shorten(failure),
            }
        }
        Outcome::Ended
    }

    /// At an edge already, the tangent pointing out of the range: nothing to follow this way.
    fn stands_on_outward_edge(&mut self) -> bool {
        let value = self.problem.parameter(&self.current.point);
        let (low, high) = self.settings.range;
        let ahead = self.problem.advance(&self.current.point, &self.current.tangent, self.settings.shortest);
        let drift = self.problem.parameter(&ahead) - value;
        (value <= low && drift < 0.0) || (value >= high && drift > 0.0)
    }

    fn shorten(&mut self, failure: Failure<Q::Error>) {
        // Half: failures are rare and the next stride grows again by three.
        self.stride *= 0.5;
        if self.stride < self.settings.shortest {
            self.end = Some(match failure {
                Failure::Outside(error) => FollowEnd::Outside(error),
                Failure::NotConverged | Failure::Jumped => FollowEnd::Stuck,
            });
        }
    }

    fn attempt(&mut self) -> Result<Step, Failure<Q::Error>> {
        let stride = self.stride;
        let prediction = self.problem.advance(&self.current.point, &self.current.tangent, stride);
        let closing = Closing::Arclength { from: &self.current.point, tangent: &self.current.tangent, stride };
        let corrected = self.problem.correct(&prediction, closing)?;
        // A correction that shrinks this slowly comes from as far away as another solution lies (Newton and Kantorovich:
        // under contraction 1/2 there is one solution only in the ball that the corrections span).
        if corrected.contraction > SLOW && self.problem.distance(&prediction, &corrected.point) > ROUNDOFF {
            return Err(Failure::Jumped);
        }
        let candidate = self.judge(corrected)?;
        if self.leaves_its_curve(&candidate, stride) {
            return Err(Failure::Jumped);
        }
        if self.turns_back_beyond(&candidate) {
            return Err(Failure::NotConverged);
        }
        let (candidate, landing) = match self.value_between(&candidate) {
            Some(landing) => (self.land(&candidate, landing, stride)?, Some(landing)),
            None => (candidate, None),
        };
        self.accept(candidate, landing)
    }

    fn judge(&mut self, corrected: Corrected<Q::Point>) -> Result<Candidate<Q>, Failure<Q::Error>> {
        let Corrected { point, contraction, .. } = corrected;
        let tangent = self.problem.tangent(&point, Orientation::Along(&self.current.tangent))?;
        let cosine = self.problem.inner(&tangent, &self.current.tangent);
        // Written so that NaN fails too.
        if !(cosine >= self.settings.least_cosine) {
            return Err(Failure::Jumped);
        }
        Ok(Candidate { point, tangent, cosine, contraction })
    }

    /// Whether the step to the candidate is none along a curve with the tangents of its ends: the trapezoidal rule over
    /// the tangents then misses it by as much as the prediction does, or the prediction hits what it should miss. On a
    /// smooth branch the misses fall with the cube and the square of the stride.
    fn leaves_its_curve(&self, candidate: &Candidate<Q>, stride: f64) -> bool {
        let Station { point, tangent, .. } = &self.current;
        let half = self.problem.advance(point, tangent, 0.5 * stride);
        let missed =
            self.problem.distance(&self.problem.advance(&half, &candidate.tangent, 0.5 * stride), &candidate.point);
        let predicted = self.problem.distance(&self.problem.advance(&half, tangent, 0.5 * stride), &candidate.point);
        let bend = 0.5 * stride * (2.0 - 2.0 * candidate.cosine.min(1.0)).sqrt();
        missed > CURVE_SHARE * predicted.max(bend) && missed > CURVE_FLOOR * stride
    }

    /// Whether the parameter turns back inside the step beyond an edge or target that neither end passes: the cubic
    /// through both ends tells; a shorter stride then separates the passages.
    fn turns_back_beyond(&mut self, candidate: &Candidate<Q>) -> bool {
        let length = self.problem.distance(&self.current.point, &candidate.point);
        let (from, to) = (self.problem.parameter(&self.current.point), self.problem.parameter(&candidate.point));
        let unit = self.settings.shortest;
        let slope = |problem: &Q, point: &Q::Point, tangent: &Q::Tangent, value: f64| {
            let ahead = problem.advance(point, tangent, unit);
            (problem.parameter(&ahead) - value) / unit * length
        };
        let start = slope(self.problem, &self.current.point, &self.current.tangent, from);
        let stop = slope(self.problem, &candidate.point, &candidate.tangent, to);
        if start * stop >= 0.0 || length <= 4.0 * self.settings.shortest {
            return false;
        }
        let Some(extreme) = turning((from, start), (to, stop)) else { return false };
        let reached = if start > 0.0 { (from.max(to), extreme) } else { (extreme, from.min(to)) };
        self.stops().any(|stop| stop > reached.0 && stop < reached.1)
    }

    fn stops(&self) -> impl Iterator<Item = f64> + '_ {
        self.settings.targets.iter().copied().chain([self.settings.range.0, self.settings.range.1])
    }

    /// The first edge or target passed between the current point and the candidate.
    fn value_between(&self, candidate: &Candidate<Q>) -> Option<Landing> {
        let (from, to) = (self.problem.parameter(&self.current.point), self.problem.parameter(&candidate.point));
        let passed = |value: f64| (from < value && value <= to) || (to <= value && value < from);
        let (low, high) = self.settings.range;
        let edges = [low, high].into_iter().map(Landing::Edge);
        let targets = self.settings.targets.iter().copied().map(Landing::Target);
        edges
            .chain(targets)
            .filter(|landing| passed(landing.value()))
            .min_by(|a, b| (a.value() - from).abs().total_cmp(&(b.value() - from).abs()))
    }

    fn land(
        &mut self,
        candidate: &Candidate<Q>,
        landing: Landing,
        stride: f64,
    ) -> Result<Candidate<Q>, Failure<Q::Error>> {
        let (from, to) = (self.problem.parameter(&self.current.point), self.problem.parameter(&candidate.point));
        let share = ((landing.value() - from) / (to - from)).clamp(0.0, 1.0);
        let guess = self.problem.advance(&self.current.point, &self.current.tangent, share * stride);
        let corrected = self.problem.correct(&guess, Closing::Parameter(landing.value()))?;
        // Landing must stay inside the step: anything farther is another branch.
        let length = self.problem.distance(&self.current.point, &candidate.point);
        if !(self.problem.distance(&self.current.point, &corrected.point) <= 2.0 * length) {
            return Err(Failure::Jumped);
        }
        self.judge(corrected)
    }

    fn accept(&mut self, candidate: Candidate<Q>, landing: Option<Landing>) -> Result<Step, Failure<Q::Error>> {
        let Candidate { mut point, mut tangent, cosine, contraction } = candidate;
        let length = self.problem.distance(&self.current.point, &point);
        if let Some((renewed, mut tangents)) = self.problem.renew(&point, &[&tangent]) {
            point = renewed;
            tangent = tangents.pop().expect("renew returns as many tangents as it gets");
        }
        let mut watch = self.problem.watch(&point, &tangent)?;
        keep_signs(&self.current.watch, &mut watch);
        let step = Step {
            crossings: crossings(&self.current.watch, &watch),
            unstable: (self.current.watch.unstable_count, watch.unstable_count),
            landing,
        };
        if landing.is_none() {
            self.stride = self.control.next(Finished { stride: self.stride, cosine, contraction }, &self.settings);
        }
        let station = Station { point, tangent, watch, distance: self.current.distance + length };
        self.previous = Some(std::mem::replace(&mut self.current, station));
        self.taken += 1;
        match landing {
            Some(Landing::Edge(value)) => self.end = Some(FollowEnd::Edge(value)),
            _ if self.is_closed(length) => self.end = Some(FollowEnd::Closed),
            _ => {}
        }
        Ok(step)
    }

    /// Whether the start lies within the last step: the branch, cut by the plane through the start normal to its
    /// tangent, gives the start itself.
    fn is_closed(&mut self, length: f64) -> bool {
        // Fewer steps cannot close a loop whose tangents turn by less than 26 degrees a step.
        const FEWEST: usize = 8;
        /// Part of the last step within which the plane's point is the start itself.
        const SAME: f64 = 1e-4;
        if self.taken < FEWEST {
            return false;
        }
        let Some(near) = self.problem.met_again(&self.current.point, &self.first.point, length) else { return false };
        let closing = Closing::Component { from: &self.first.point, direction: &self.first.tangent, amount: 0.0 };
        match self.problem.correct(&near, closing) {
            Ok(met) => self.problem.distance(&met.point, &self.first.point) <= SAME * length,
            Err(_) => false,
        }
    }
}

impl Landing {
    /// The parameter value.
    pub fn value(self) -> f64 {
        match self {
            Self::Edge(value) | Self::Target(value) => value,
        }
    }
}

/// A value of exactly 0 has no sign; it keeps the one before, and the crossing shows at the next point.
fn keep_signs(before: &Watch, now: &mut Watch) {
    for (before, now) in before.values.iter().zip(&mut now.values) {
        if now.value == 0.0 {
            now.value = f64::MIN_POSITIVE.copysign(before.value);
        }
    }
}

fn crossings(before: &Watch, after: &Watch) -> Vec<Crossing> {
    let pairs = before.values.iter().zip(&after.values).enumerate();
    pairs
        .filter(|(_, (a, b))| a.value * b.value < 0.0)
        .map(|(index, (a, b))| Crossing { index, before: a.value, after: b.value })
        .collect()
}

/// Extreme value on (0, 1) of the cubic with the given values and slopes at 0 and 1, the slopes of opposite sign.
fn turning(from: (f64, f64), to: (f64, f64)) -> Option<f64> {
    let cubic = Hermite::new(from, to);
    let extremes = cubic.stationary().into_iter().flatten().map(|x| cubic.at(x));
    extremes.max_by(|a, b| (from.1 * a).total_cmp(&(from.1 * b)))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: parabola x (1 - x), extreme 1/4 at 1/2; and a cubic x - x^3 with its extreme by calculus.
    #[test]
    fn turnings_are_exact() {
        assert!((turning((0.0, 1.0), (0.0, -1.0)).expect("turns") - 0.25).abs() < 1e-15);
        assert!((turning((0.0, -1.0), (0.0, 1.0)).expect("turns") + 0.25).abs() < 1e-15);
        let exact = 2.0 / (3.0 * 3.0f64.sqrt());
        assert!((turning((0.0, 1.0), (0.0, -2.0)).expect("turns") - exact).abs() < 1e-15);
    }
}
