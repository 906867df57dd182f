//! Two events that cancel inside one stride.
//!
//! A watched value that touches zero and turns back between two points shows no change of sign. The parabola through
//! the last three points tells where it turned; where its extreme passes zero, or comes within a tenth of the values
//! beside it, the stride must be taken again in halves, until the events separate or the extreme clears zero. For the
//! parameter's component of the tangent the mean over the stride is known too, from the parameter itself: the parabola
//! with the values at both ends and that mean needs no third point. (Doublings have slopes; see
//! [`armilla_stability::Dip`].)

/// A watched value at a place along the walk.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Sample {
    pub distance: f64,
    pub value: f64,
}

/// Share of the values at the ends of the stride within which an extreme counts as near zero.
const NEAR: f64 = 0.1;

/// Whether the value may have touched zero between the last two of three samples without a change of sign.
pub(crate) fn near_miss(samples: [Sample; 3]) -> bool {
    let [a, b, c] = samples;
    if !(b.value * c.value > 0.0) {
        return false;
    }
    // Newton's form: v = b + (s - s_b) (first + (s - s_c) second).
    let slope = |from: Sample, to: Sample| (to.value - from.value) / (to.distance - from.distance);
    let first = slope(b, c);
    let second = (first - slope(a, b)) / (c.distance - a.distance);
    let width = c.distance - b.distance;
    // Derivative first + second (2 x - width) vanishes at x beyond b.
    let x = 0.5 * (width - first / second);
    if !(x > 0.0 && x < width) {
        return false;
    }
    let extreme = b.value + x * (first + (x - width) * second);
    extreme * b.value < 0.0 || extreme.abs() < NEAR * b.value.abs().min(c.value.abs())
}

/// Whether a value may have touched zero inside a stride of which it is known at both ends and in the mean.
pub(crate) fn near_miss_by_mean((from, to): (f64, f64), mean: f64) -> bool {
    if !(from * to > 0.0) {
        return false;
    }
    // v = from + b x + c x^2 on the unit interval.
    let c = 3.0 * (from + to) - 6.0 * mean;
    let b = to - from - c;
    let x = -0.5 * b / c;
    if !(x > 0.0 && x < 1.0) {
        return false;
    }
    let extreme = from + x * (b + x * c);
    extreme * from < 0.0 || extreme.abs() < NEAR * from.abs().max(to.abs())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn on(f: impl Fn(f64) -> f64, at: [f64; 3]) -> [Sample; 3] {
        at.map(|distance| Sample { distance, value: f(distance) })
    }

    /// Exact: a parabola with zeros 0.3 strides apart in the middle of the second stride, and the same lifted.
    #[test]
    fn a_bubble_of_a_third_of_a_stride_is_seen() {
        let bubble = |s: f64| (s - 1.5).powi(2) - 0.15f64.powi(2);
        assert!(near_miss(on(bubble, [0.0, 1.0, 2.0])));
        assert!(near_miss(on(|s| -bubble(s), [0.0, 1.0, 2.0])));
        assert!(!near_miss(on(|s| bubble(s) + 0.2, [0.0, 1.0, 2.0])));
        assert!(!near_miss(on(|s| s + 1.0, [0.0, 1.0, 2.0])));
        // A sign change is an event of its own.
        assert!(!near_miss(on(|s| s - 1.5, [0.0, 1.0, 2.0])));
    }

    /// Exact: the same bubble has the mean 1/12 - 0.0225 over its stride; lifted by 0.2 it stays clear.
    #[test]
    fn the_mean_of_a_stride_shows_the_bubble() {
        let (end, mean) = (0.25 - 0.0225, 1.0 / 12.0 - 0.0225);
        assert!(near_miss_by_mean((end, end), mean) && near_miss_by_mean((-end, -end), -mean));
        assert!(!near_miss_by_mean((end + 0.2, end + 0.2), mean + 0.2));
        assert!(!near_miss_by_mean((0.3, 0.5), 0.4) && !near_miss_by_mean((0.3, -0.5), 0.1));
    }
}
