//! Two folds that cancel inside one stride.
//!
//! Of the parameter's component of the tangent the values at both ends of a stride are known, and its mean, from the
//! parameter itself. The parabola with these three tells whether it passes zero in between, or comes within a tenth of
//! the values at the ends; the stride must then be taken again in halves, until the folds separate or the component
//! clears zero. (Doublings have slopes, see [`armilla_stability::Dip`]; other values are searched by
//! [`crate::valley`].)

/// Share of the values at the ends of the stride within which an extreme counts as near zero.
const NEAR: f64 = 0.1;

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

    /// Exact: the bubble (x - 1/2)^2 - 0.15^2 has the mean 1/12 - 0.0225 over its stride; lifted by 0.2 it stays clear.
    #[test]
    fn the_mean_of_a_stride_shows_the_bubble() {
        let (end, mean) = (0.25 - 0.0225, 1.0 / 12.0 - 0.0225);
        assert!(near_miss_by_mean((end, end), mean) && near_miss_by_mean((-end, -end), -mean));
        assert!(!near_miss_by_mean((end + 0.2, end + 0.2), mean + 0.2));
        assert!(!near_miss_by_mean((0.3, 0.5), 0.4) && !near_miss_by_mean((0.3, -0.5), 0.1));
    }
}
