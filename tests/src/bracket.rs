//! Brackets of events: stations at chosen parameter values.

use armilla_follow::{Closing, Orientation, Problem, Station};
use armilla_stability::{CyclePoint, CycleProblem, CycleTangent};

/// The station at parameter `value` near `guess`, its tangent along `along` or with the parameter rising.
///
/// # Panics
/// Where there is none.
pub fn station(
    problem: &mut CycleProblem,
    guess: &CyclePoint,
    value: f64,
    along: Option<&CycleTangent>,
) -> Station<CyclePoint, CycleTangent> {
    let point = problem.correct(guess, Closing::Parameter(value)).expect("a cycle at the value").point;
    let orientation = along.map_or(Orientation::Parameter(1.0), Orientation::Along);
    let tangent = problem.tangent(&point, orientation).expect("a tangent");
    let watch = problem.watch(&point, &tangent).expect("watched values");
    Station { point, tangent, watch, distance: 0.0 }
}

/// A bracket from `low` to `high` in the parameter, with the distance between its ends.
///
/// # Panics
/// Where there are no cycles at these values.
pub fn stations(
    problem: &mut CycleProblem,
    guess: &CyclePoint,
    (low, high): (f64, f64),
) -> (Station<CyclePoint, CycleTangent>, Station<CyclePoint, CycleTangent>) {
    let before = station(problem, guess, low, None);
    let mut after = station(problem, guess, high, Some(&before.tangent));
    after.distance = problem.distance(&before.point, &after.point);
    (before, after)
}
