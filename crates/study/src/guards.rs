//! Guards against landing on another branch, beside those of the follower: what no single step of a branch does.
//!
//! Of two branches that come near each other one has the other orientation, which the ledger sees ([`crate::ledger`]).
//! Here: the period neither halves nor doubles, a cycle of several turns does not become a shorter one told several
//! times, and multipliers move by a bounded amount from point to point.

use armilla_stability::{CycleProblem, WATCH_BRANCHING, WATCH_DOUBLING, WATCH_FOLD, WATCH_TORUS};

use crate::walk::CycleStation;

/// Change of the logarithm of the period in one step beyond which it is taken again shorter: half the way to a copy.
const PERIOD: f64 = 0.35;
/// Change of a product of scaled multipliers (`Prod (mu - at) / sqrt(1 + mu^2)`) in one step, beside the change expected, beyond which
/// it is taken again shorter: a multiplier on its way from 1 to -1 is seen at two points between at least, unless it was
/// known to come.
const MULTIPLIERS: f64 = 0.5;
/// Share of a watched value by which it may miss the straight line through the two stations before: a bump half as wide as a
/// stride shows by more at the stations beside it, while the values of ordinary branches bend by less. More misses bumps,
/// less costs strides.
const STRAIGHT: f64 = 0.15;
/// Watched value below which that is not asked: an event is near, and dips are searched for there anyway.
const FAR: f64 = 0.1;
/// Share of the difference between turns that a step must leave of it.
const LEFT: f64 = 1e-3;

/// Whether a step changes more than a stride should; a shorter one tells. `foretold` is a multiplier on its way from 1 to -1
/// at both ends, where a prediction tells it.
pub(crate) fn leaps(before: &CycleStation, after: &CycleStation, foretold: Option<(f64, f64)>) -> bool {
    let period = |station: &CycleStation| station.point.unknowns.period.ln();
    let scaled = |mu: f64, at: f64| (mu - at) / (1.0 + mu * mu).sqrt();
    let leaps = |index: usize, at: f64| {
        let expected = foretold.map_or(0.0, |(from, to)| (scaled(from, at) - scaled(to, at)).abs());
        let (a, b) = (before.watch.values[index].value, after.watch.values[index].value);
        ((a - b).abs() - expected).abs() > MULTIPLIERS
    };
    (period(before) - period(after)).abs() > PERIOD || leaps(WATCH_DOUBLING, -1.0) || leaps(WATCH_BRANCHING, 1.0)
}

/// Whether a watched value bends so much that a bump beside the last station may hide inside a step; `earlier` is the station
/// before the step.
pub(crate) fn bends(earlier: &CycleStation, before: &CycleStation, after: &CycleStation) -> bool {
    let [a, b, c] = [earlier, before, after].map(|station| station.distance);
    [WATCH_DOUBLING, WATCH_TORUS, WATCH_BRANCHING].into_iter().any(|index| {
        let [from, here, to] = [earlier, before, after].map(|station| station.watch.values[index].value);
        let straight = here + (here - from) * (c - b) / (b - a);
        let least = here.abs().min(to.abs());
        here * to > 0.0 && least > FAR && (to - straight).abs() > STRAIGHT * least
    })
}

/// Whether a step from a cycle of several turns landed on a shorter one told several times.
pub(crate) fn falls_on_shorter(
    problem: &CycleProblem,
    before: &CycleStation,
    after: &CycleStation,
    turns: usize,
) -> bool {
    prime_factors(turns).any(|copies| {
        let [was, is] = [before, after].map(|station| problem.unlike_copies(&station.point, copies));
        is < LEFT * was
    })
}

fn prime_factors(number: usize) -> impl Iterator<Item = usize> {
    let prime = |candidate: &usize| (2..*candidate).all(|divisor| !candidate.is_multiple_of(divisor));
    (2..=number).filter(move |candidate| number.is_multiple_of(*candidate)).filter(prime)
}

/// Values near zero of which are looked at by the parabola through three stations; none where the value means something
/// else at one of them.
pub(crate) fn smooth_values(station: &CycleStation) -> [Option<f64>; 2] {
    /// Parameter component of the tangent below which the ratio to it says nothing.
    const TURNING: f64 = 0.05;
    let value = |index: usize| station.watch.values[index].value;
    let (turning, torus) = (value(WATCH_FOLD), value(WATCH_TORUS));
    // Without pairs the product over them is 1 exactly. Through a fold the branching function changes its sign together
    // with the parameter's component; their ratio does at branchings only.
    [(torus != 1.0).then_some(torus), (turning.abs() > TURNING).then(|| value(WATCH_BRANCHING) / turning)]
}

#[cfg(test)]
mod tests {
    #[test]
    fn primes_of_turns() {
        assert_eq!(super::prime_factors(12).collect::<Vec<_>>(), [2, 3]);
        assert_eq!(super::prime_factors(7).collect::<Vec<_>>(), [7]);
        assert_eq!(super::prime_factors(1).count(), 0);
    }
}
