//! Whether two branches have come to the same cycle.

use armilla_collocation::Iterate;

use crate::point::CyclePoint;
use crate::problem::CycleProblem;

/// Distance, in the metric, within which two cycles at one parameter value are one, or this many times the accuracy of
/// profiles where that is more: both carry its error.
const SAME: (f64, f64) = (1e-6, 10.0);
/// Relative distance of the ratio of two periods from a whole number that may be the curve's bending between two points.
const WHOLE: f64 = 0.05;
/// Distance from the chord of two neighbouring points, in lengths of the chord, beyond which a cycle does not lie between
/// them: a stride turns by less than half a radian.
const BENDING: f64 = 0.25;

impl CycleProblem {
    /// Whether `cycle` is the one that lies at its parameter value between two neighbouring points of a branch, whatever its
    /// phase and the number of times it is told.
    pub fn meets(&mut self, cycle: &CyclePoint, (one, other): (&CyclePoint, &CyclePoint)) -> bool {
        let same = SAME.0.max(SAME.1 * self.settings().mesh.accuracy);
        let Some(guess) = between(cycle.unknowns.parameter, one, other) else { return false };
        let Some((here, there)) = (|| {
            let ratio = cycle.unknowns.period / guess.unknowns.period;
            Some((told(cycle, copies(1.0 / ratio)?), told(&guess, copies(ratio)?)))
        })() else {
            return false;
        };
        let near = BENDING * armilla_follow::Problem::distance(self, one, other) + same;
        if self.shifted_towards(&there, &here, near).is_none() {
            return false;
        }
        let mut corrected = guess;
        if self.correct_foreign(&mut corrected, cycle.unknowns.parameter).is_err() {
            return false;
        }
        let Some(count) = copies(cycle.unknowns.period / corrected.unknowns.period) else { return false };
        self.shifted_towards(&told(&corrected, count), &here, same).is_some()
    }
}

/// The point of the chord between two neighbours at a parameter value; none where the value does not lie between theirs.
fn between(value: f64, one: &CyclePoint, other: &CyclePoint) -> Option<CyclePoint> {
    let (from, to) = (one.unknowns.parameter, other.unknowns.parameter);
    let share = (value - from) / (to - from);
    if !(0.0..=1.0).contains(&share) {
        return None;
    }
    let other = other.on_mesh(one.degree, &one.mesh);
    let mix = |a: f64, b: f64| a + share * (b - a);
    let nodes = one.unknowns.nodes.iter().zip(&other.unknowns.nodes).map(|(a, b)| mix(*a, *b)).collect();
    let unknowns = Iterate { nodes, period: mix(one.unknowns.period, other.unknowns.period), parameter: value };
    Some(CyclePoint { unknowns, ..one.clone() })
}

/// How often a cycle is to be told to last `ratio` times as long; 1 where it is longer itself, none where no number fits.
fn copies(ratio: f64) -> Option<usize> {
    if !ratio.is_finite() || ratio < 1.0 - WHOLE {
        let inverse = 1.0 / ratio;
        return ((inverse / inverse.round() - 1.0).abs() < WHOLE).then_some(1);
    }
    ((ratio / ratio.round() - 1.0).abs() < WHOLE).then_some(ratio.round() as usize)
}

fn told(cycle: &CyclePoint, count: usize) -> CyclePoint {
    if count == 1 {
        return cycle.clone();
    }
    CyclePoint::from_profile(&cycle.profile().repeated(count), cycle.unknowns.parameter)
}

#[cfg(test)]
mod tests {
    use super::copies;

    #[test]
    fn whole_ratios_of_periods() {
        let cases = [(1.0, Some(1)), (2.01, Some(2)), (0.5, Some(1)), (1.5, None), (0.66, None), (f64::NAN, None)];
        for (ratio, wanted) in cases {
            assert_eq!(copies(ratio), wanted, "{ratio}");
        }
    }
}
