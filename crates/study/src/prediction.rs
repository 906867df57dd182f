//! Where the next doubling lies, told from those before it.
//!
//! Thresholds p_k of successive doublings approach their limit geometrically: `(p_k - p_(k-1)) / (p_(k+1) - p_k)` tends to
//! the universal ratio delta (Feigenbaum 1978, J. Stat. Phys. 19:25; value: Briggs 1991, Math. Comp. 57:435, from
//! memory). So `p_k + (p_k - p_(k-1)) / delta` predicts the next one, and `p_k + (p_k - p_(k-1)) / (delta - 1)` the limit.
//!
//! Errors come from how far the line is from universal yet. The last ratio seen differs from delta by more than the next
//! one will, where ratios converge; how far two successive estimates of the limit differ bounds the error of the better
//! one as long as ratios stay above 2. A line whose ratios do not tend to delta (a cycle born with a symmetry, a map with
//! another maximum, a bubble) is predicted wrongly: predictions only plan strides, they never stand for a threshold.

/// The universal ratio of quadratic maxima.
pub(crate) const UNIVERSAL_RATIO: f64 = 4.669_201_609_102_990_671_853;

/// Factor on the difference that the last ratio makes to a prediction: where ratios stay as far from the universal one as
/// they are, that difference is the error itself, and twice it covers what they vary.
const RATIO_MARGIN: f64 = 2.0;

/// A value with its estimated absolute error.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Estimate {
    pub value: f64,
    pub error: f64,
}

/// The doubling after the last of a line, from two on. Nothing where two thresholds coincide.
pub(crate) fn next_doubling(line: &[Estimate]) -> Option<Estimate> {
    let [.., before, last] = line else { return None };
    let interval = last.value - before.value;
    let ahead = interval / UNIVERSAL_RATIO;
    let universal = match line {
        // With the last ratio instead of the universal one.
        [.., first, _, _] => RATIO_MARGIN * (ahead - interval * interval / (before.value - first.value)).abs(),
        // Nothing tells a ratio yet: the whole interval is in doubt.
        _ => ahead.abs(),
    };
    let error = universal + (1.0 + 1.0 / UNIVERSAL_RATIO) * last.error + before.error / UNIVERSAL_RATIO;
    let found = Estimate { value: last.value + ahead, error };
    (interval != 0.0 && found.value.is_finite() && error.is_finite()).then_some(found)
}

/// The value that a line of three thresholds or more tends to.
pub(crate) fn accumulation(line: &[Estimate]) -> Option<Estimate> {
    let [.., first, before, last] = line else { return None };
    let limit = |a: &Estimate, b: &Estimate| b.value + (b.value - a.value) / (UNIVERSAL_RATIO - 1.0);
    let value = limit(before, last);
    let error = (value - limit(first, before)).abs() + 2.0 * (before.error + last.error);
    Some(Estimate { value, error })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(values: &[f64]) -> Vec<Estimate> {
        values.iter().map(|value| Estimate { value: *value, error: 1e-12 }).collect()
    }

    /// Source: thresholds r_1..r_6 of the logistic map r x (1 - x) and their limit (May 1976, Nature 261:459, and standard
    /// tables, from memory).
    const LOGISTIC: [f64; 6] =
        [3.0, 3.449_489_742_783, 3.544_090_359_55, 3.564_407_266_10, 3.568_759_419_54, 3.569_691_609_80];

    #[test]
    fn the_logistic_map_s_limit_is_covered() {
        let exact = 3.569_945_671_870_9;
        for k in 3..=LOGISTIC.len() {
            let found = accumulation(&line(&LOGISTIC[..k])).expect("three thresholds");
            assert!((found.value - exact).abs() < found.error + 2e-11, "{k}: {found:?}");
            assert!(found.error < 60.0 * (found.value - exact).abs() + 1e-10, "{k}: {found:?}");
        }
    }

    #[test]
    fn the_logistic_map_s_next_doubling_is_covered() {
        for k in 2..LOGISTIC.len() {
            let found = next_doubling(&line(&LOGISTIC[..k])).expect("two thresholds");
            let true_error = (found.value - LOGISTIC[k]).abs();
            assert!(true_error < found.error, "{k}: {found:?} {}", LOGISTIC[k]);
            // The interval ahead is known to a tenth or so from the second ratio on.
            assert!(k < 4 || found.error < 0.1 * (LOGISTIC[k] - LOGISTIC[k - 1]), "{k}: {found:?}");
        }
    }

    /// Exact by construction: a geometric line of another ratio, 7.28 as for quartic maxima. The prediction is wrong, and
    /// says by how much; the limit is covered too.
    #[test]
    fn a_line_of_another_ratio_is_covered() {
        let ratio: f64 = 7.28;
        let values: Vec<f64> = (0..7).map(|k| 2.0 - ratio.powi(-k)).collect();
        for k in 3..6 {
            let known = line(&values[..k]);
            let found = next_doubling(&known).expect("three thresholds");
            assert!((found.value - values[k]).abs() < found.error, "{k}: {found:?}");
            let limit = accumulation(&known).expect("three thresholds");
            assert!((limit.value - 2.0).abs() < limit.error, "{k}: {limit:?}");
        }
    }

    #[test]
    fn too_few_or_equal_thresholds_predict_nothing() {
        assert_eq!(next_doubling(&line(&[1.0])), None);
        assert_eq!(next_doubling(&line(&[1.0, 1.0])), None);
        assert_eq!(next_doubling(&line(&[1.0, 1.0, 2.0])), None);
        assert_eq!(accumulation(&line(&[1.0, 2.0])), None);
    }
}
