//! One direction of one branch of equilibria: steps, events, the reason of the end.

use std::sync::atomic::{AtomicBool, Ordering};

use armilla_follow::{FollowEnd, Follower, Landing, Outcome, Settings, Step};
use armilla_record::{End, EndReason, EventKind, Point};
use armilla_stability::{EquilibriumPoint, EquilibriumProblem, EquilibriumTangent};

use crate::ends::{end, fault_words, short};
use crate::equilibrium_events::{RestFound, RestStation, Search, neutral};
use crate::study::Study;
use crate::words::digits;

/// What a walk needs to know besides the problem.
pub(crate) struct RestPlan<'a> {
    pub study: &'a Study,
    pub settings: Settings,
    /// +1 where distances grow with the walk, -1 where they fall.
    pub sign: f64,
    /// Distance of the first station from the start of the branch, along the walk.
    pub offset: f64,
    pub abort: &'a AtomicBool,
}

/// What a walk brings back.
pub(crate) struct RestWalk {
    pub points: Vec<Point>,
    pub end: End,
}

/// Takes the points and events of a walk as they come.
pub(crate) trait RestSink {
    fn point(&mut self, point: &Point);
    fn event(&mut self, found: RestFound);
}

/// Walks from `first` to the end of this direction. The first station itself is not among the points.
pub(crate) fn walk(
    problem: &mut EquilibriumProblem,
    first: (EquilibriumPoint, EquilibriumTangent),
    plan: &RestPlan<'_>,
    sink: &mut dyn RestSink,
) -> RestWalk {
    let value = first.0.parameter;
    match Follower::start_along(problem, first.0, first.1, plan.settings.clone()) {
        Ok(mut follower) => {
            let (problem, _, station) = follower.parts();
            let station = station.clone();
            let sizes = problem.sizes().to_vec();
            let on_axis = neutral(problem, &station);
            let account = (on_axis == Some(0)).then(|| station.clone());
            Walker { follower, plan, sink, account, last: (station, on_axis), points: Vec::new(), sizes }.run()
        }
        Err(_) => {
            let words = "the eigenvalues at its first equilibrium could not be computed".into();
            RestWalk { points: Vec::new(), end: end(EndReason::Stuck, value, words) }
        }
    }
}

/// A walk under way.
struct Walker<'w, 'p> {
    follower: Follower<'w, EquilibriumProblem>,
    plan: &'w RestPlan<'p>,
    sink: &'w mut dyn RestSink,
    /// The last station at which the side of every eigenvalue was known, or that it stays on the axis: from there on changes
    /// are accounted for.
    account: Option<RestStation>,
    /// The last station, and how many eigenvalues stand on the axis there.
    last: (RestStation, Option<usize>),
    points: Vec<Point>,
    /// Sizes of the states at the start.
    sizes: Vec<f64>,
}

/// Multiple of its size at the start beyond which a state grows without bound. Strides grow with the state, so that a branch
/// that comes back from there is rare, and one that does not would use up all points.
const UNBOUNDED: f64 = 1e6;

impl Walker<'_, '_> {
    fn run(mut self) -> RestWalk {
        loop {
            if self.plan.abort.load(Ordering::Relaxed) {
                let value = self.follower.current().point.parameter;
                let ended = end(EndReason::Interrupted, value, "stopped by the user".into());
                return RestWalk { points: self.points, end: ended };
            }
            let Outcome::Step(step) = self.follower.step() else { break };
            if !self.take(&step) {
                break;
            }
            if let Some(end) = self.unbounded() {
                return RestWalk { points: self.points, end };
            }
        }
        let end = self.ended();
        RestWalk { points: self.points, end }
    }

    /// Passes on what a step brought. False where its eigenvalues could not be computed.
    fn take(&mut self, step: &Step) -> bool {
        let (problem, _, after) = self.follower.parts();
        let after = after.clone();
        let on_axis = neutral(problem, &after);
        // As many as at the station before: they stay there.
        let stays = on_axis.is_some() && on_axis == self.last.1;
        let mut sure = stays || on_axis == Some(0);
        if stays && self.account.is_none() {
            self.account = Some(self.last.0.clone());
        }
        if stays && let Some(last) = self.points.last_mut() {
            last.unstable_count = self.last.0.watch.unstable_count;
        }
        let mut search = Search::new(self.plan.study);
        let mut count = after.watch.unstable_count;
        match &self.account {
            Some(account) if sure => search.between(problem, account, &after),
            // An event on the very edge of the range, where no change of sign can follow.
            Some(account) => {
                count = account.watch.unstable_count;
                if matches!(step.landing, Some(Landing::Edge(_))) {
                    search.at(problem, &after);
                    if search.found.is_empty() && on_axis.is_some() {
                        sure = true;
                        count = after.watch.unstable_count;
                        search.between(problem, account, &after);
                    }
                }
            }
            None => {}
        }
        let mut found = search.found;
        found.sort_by(|a, b| a.distance.total_cmp(&b.distance));
        let distance = |along: f64| self.plan.sign * (along + self.plan.offset);
        let described = problem.describe(&after.point, distance(after.distance));
        for event in found {
            self.sink.event(RestFound { distance: distance(event.distance), ..event });
        }
        if let Some(landing) = step.landing {
            self.sink.event(landed(landing, &after.point, distance(after.distance)));
        }
        self.last = (after, on_axis);
        if sure {
            self.account = Some(self.last.0.clone());
        }
        let Ok(mut point) = described else { return false };
        point.unstable_count = count;
        self.sink.point(&point);
        self.points.push(point);
        true
    }

    /// The end of a walk on which a state has left all bounds.
    fn unbounded(&self) -> Option<End> {
        let point = &self.follower.current().point;
        let grown = point.state.iter().zip(&self.sizes).position(|(x, size)| x.abs() > UNBOUNDED * size)?;
        let study = self.plan.study;
        let (state, name) = (&study.model.states()[grown].name, &study.file.follow.parameter);
        let here = short(study, point.parameter);
        let words = format!("`{state}` grows without bound: it is {} at {name} = {here}", digits(point.state[grown]));
        Some(end(EndReason::Unbounded, point.parameter, words))
    }

    /// Why the walk ends, in words.
    fn ended(&mut self) -> End {
        let study = self.plan.study;
        let name = &study.file.follow.parameter;
        let value = self.follower.current().point.parameter;
        let here = short(study, value);
        let no_eigenvalues = self.follower.parts().0.has_no_spectrum();
        match self.follower.end() {
            Some(FollowEnd::Edge(edge)) => {
                end(EndReason::Edge, *edge, format!("reaches the edge of the asked range, {name} = {edge}"))
            }
            Some(FollowEnd::Closed) => {
                end(EndReason::Closed, value, "closed upon itself: its start was met again".into())
            }
            Some(FollowEnd::Budget) => {
                end(EndReason::Budget, value, format!("all points allowed by `pursue` were used at {name} = {here}"))
            }
            Some(FollowEnd::Outside(fault)) => {
                end(EndReason::NotFinite, value, format!("{} beyond {name} = {here}", fault_words(study, fault)))
            }
            Some(FollowEnd::Stuck) | None if no_eigenvalues => end(
                EndReason::Stuck,
                value,
                format!(
                    "the eigenvalues could not be computed beyond {name} = {here}: the bounded iteration did not end"
                ),
            ),
            Some(FollowEnd::Stuck) | None => end(
                EndReason::Stuck,
                value,
                format!("resolution limit: the corrector fails at the shortest stride at {name} = {here}"),
            ),
        }
    }
}

/// An event at a given parameter value, which is exact.
pub(crate) fn at_parameter(kind: EventKind, point: &EquilibriumPoint, distance: f64) -> RestFound {
    RestFound {
        kind,
        point: point.clone(),
        distance,
        error: Some(0.0),
        period: None,
        criticality: None,
        note: String::new(),
        birth: None,
    }
}

fn landed(landing: Landing, point: &EquilibriumPoint, distance: f64) -> RestFound {
    let kind = match landing {
        Landing::Edge(_) => EventKind::Edge,
        Landing::Target(_) => EventKind::Target,
    };
    at_parameter(kind, point, distance)
}
