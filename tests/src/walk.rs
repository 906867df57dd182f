//! A branch followed to the edge of a range, every point described.

use armilla_follow::{FollowEnd, Follower, Outcome, Settings};
use armilla_record::Point;
use armilla_stability::{CyclePoint, CycleProblem};

/// Follows from `point` with the parameter rising (`direction` +1) or falling (-1) to an edge of `range`.
///
/// # Panics
/// Where the walk ends elsewhere.
pub fn walk(problem: &mut CycleProblem, point: CyclePoint, range: (f64, f64), direction: f64) -> Vec<Point> {
    let mut points = Vec::new();
    let mut follower = Follower::start(problem, point, direction, Settings::new(range)).expect("the walk starts");
    while let Outcome::Step(_) = follower.step() {
        let (problem, _, station) = follower.parts();
        let station = station.clone();
        points.push(problem.describe(&station.point, 1, station.distance).expect("multipliers"));
    }
    let end = follower.end();
    assert!(matches!(end, Some(FollowEnd::Edge(_))), "the walk ends by {end:?}");
    points
}
