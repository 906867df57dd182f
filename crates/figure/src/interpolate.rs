//! Smooth curves through points that may lie far apart.
//!
//! Each coordinate is a cubic Hermite piece between neighbouring points, as a function of the distance along
//! the branch. The slope at a point is that of the parabola through it and its neighbours, limited so that the
//! piece stays monotone wherever the data are (Fritsch & Carlson 1980, SIAM J. Numer. Anal. 17:238): a turn of
//! the coordinate happens only at a given point, with slope zero, so a fold that is given as a point is round
//! and nothing overshoots. The error is third order away from turns, second order beside them.

/// Slopes of a coordinate `values` at ascending places `s`.
pub(crate) fn slopes(s: &[f64], values: &[f64]) -> Vec<f64> {
    let n = s.len();
    if n < 2 {
        return vec![0.0; n];
    }
    let secants: Vec<f64> = (1..n).map(|i| (values[i] - values[i - 1]) / (s[i] - s[i - 1])).collect();
    if n == 2 {
        return vec![secants[0]; 2];
    }
    let step = |i: usize| s[i + 1] - s[i];
    let mut slopes = Vec::with_capacity(n);
    slopes.push(end_slope(step(0), step(1), secants[0], secants[1]));
    for i in 1..n - 1 {
        let (before, after) = (step(i - 1), step(i));
        let parabola = (after * secants[i - 1] + before * secants[i]) / (before + after);
        slopes.push(limited(parabola, secants[i - 1], secants[i]));
    }
    slopes.push(end_slope(step(n - 2), step(n - 3), secants[n - 2], secants[n - 3]));
    slopes
}

/// Slope at an end: of the parabola through the three last points, not against the last secant.
fn end_slope(near: f64, far: f64, secant: f64, next: f64) -> f64 {
    let parabola = ((2.0 * near + far) * secant - near * next) / (near + far);
    if parabola * secant <= 0.0 { 0.0 } else { parabola.signum() * parabola.abs().min(STEEPEST * secant.abs()) }
}

/// A piece is monotone if both its slopes are within three times the secant (Fritsch & Carlson 1980).
const STEEPEST: f64 = 3.0;

fn limited(slope: f64, before: f64, after: f64) -> f64 {
    if before * after <= 0.0 {
        return 0.0;
    }
    slope.signum() * slope.abs().min(STEEPEST * before.abs().min(after.abs()))
}

/// The cubic with end values `from`, `to` and end slopes at `u` in `[0, 1]` of a piece `length` long.
pub(crate) fn hermite((from, to): (f64, f64), (slope_from, slope_to): (f64, f64), length: f64, u: f64) -> f64 {
    let v = 1.0 - u;
    from * v * v * (1.0 + 2.0 * u)
        + to * u * u * (1.0 + 2.0 * v)
        + length * (slope_from * u * v * v - slope_to * u * u * v)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn along(s: &[f64], y: &[f64], k: usize, u: f64) -> f64 {
        let m = slopes(s, y);
        hermite((y[k], y[k + 1]), (m[k], m[k + 1]), s[k + 1] - s[k], u)
    }

    /// Exact: a parabola with its turn at a given point keeps slope zero there and the exact end slope.
    #[test]
    fn a_fold_given_as_a_point_is_round() {
        let s = [-2.0, -1.2, 0.0, 0.7, 2.0];
        let x: Vec<f64> = s.iter().map(|s| 1.0 - s * s).collect();
        let m = slopes(&s, &x);
        assert_eq!(m[2], 0.0);
        assert!((m[0] - 4.0).abs() < 1e-12 && (m[4] + 4.0).abs() < 1e-12, "{m:?}");
        for u in [0.25, 0.5, 0.75] {
            let at = -1.2 + 1.2 * u;
            assert!((along(&s, &x, 1, u) - (1.0 - at * at)).abs() < 1e-12);
        }
    }

    #[test]
    fn nothing_overshoots_a_jump() {
        let s = [0.0, 1.0, 1.1, 2.0, 5.0];
        let y: [f64; 5] = [0.0, 0.0, 1.0, 1.0, 0.3];
        for k in 0..4 {
            let (low, high) = (y[k].min(y[k + 1]), y[k].max(y[k + 1]));
            for i in 0..=50 {
                let value = along(&s, &y, k, i as f64 / 50.0);
                assert!(value >= low - 1e-15 && value <= high + 1e-15, "{k} {value}");
            }
        }
    }

    /// Exact: halving the steps divides the error on a smooth monotone function by about 8.
    #[test]
    fn third_order_on_a_monotone_function() {
        let worst = |n: usize| {
            let s: Vec<f64> = (0..=n).map(|i| i as f64 / n as f64).collect();
            let y: Vec<f64> = s.iter().map(|s| s.exp()).collect();
            (0..n)
                .fold(0.0f64, |worst, k| worst.max((along(&s, &y, k, 0.5) - ((k as f64 + 0.5) / n as f64).exp()).abs()))
        };
        let order = (worst(20) / worst(40)).log2();
        assert!(order > 2.7, "{order}");
    }
}
