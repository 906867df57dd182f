//! X2, `x' = x g - y`, `y' = y g + x`, `g = mu + r2 - r2^2`.
//!
//! Exact, by hand in polar coordinates: `r' = r g`, `theta' = 1`. Cycles where g = 0: r2 = (1 +- sqrt(1 + 4 mu))/2,
//! period 2 pi, multiplier exp(2 pi r dg/dr) = exp(4 pi r2 (1 - 2 r2)). They meet in a fold at mu = -1/4, r2 = 1/2; the
//! inner one is born at mu = 0.

use std::f64::consts::TAU;

use armilla_record::{EndReason, EventKind};
use armilla_tests::{absolute, branch, event, job, relative};

#[test]
fn both_circles_and_their_fold_are_exact() {
    let traced =
        job("x2", r#"start: Settle(at: {"mu": 0.1}), follow: (parameter: "mu", from: -0.4, to: 0.5), accuracy: 1e-10"#);
    let a = branch(&traced, "a");
    for point in &a.points {
        let square = point.maxima[0].powi(2);
        // The equation of the circles, mu = r2^2 - r2, to a few times the asked accuracy of the profile.
        absolute(&format!("mu of the circle r2 = {square}"), point.value, square * (square - 1.0), 1e-9);
        relative("period", point.period, TAU, 1e-10);
        let exact =
            if square > 0.5 { 1.0 + (1.0 + 4.0 * point.value).sqrt() } else { 1.0 - (1.0 + 4.0 * point.value).sqrt() }
                / 2.0;
        // Near the fold r2 is a square root of mu: roundoff in mu is magnified by dr2/dmu.
        let roundoff = 1e-14 / (2.0 * exact - 1.0).abs();
        absolute(
            "log multiplier",
            point.multipliers[0].log_modulus,
            2.0 * TAU * exact * (1.0 - 2.0 * exact),
            1e-10 + 10.0 * roundoff,
        );
        assert_eq!(point.unstable_count, usize::from(square < 0.5));
    }
    assert!(a.points.iter().filter(|point| point.unstable_count == 1).count() > 5);
    assert!(a.points.iter().filter(|point| point.unstable_count == 0).count() > 5);
    let fold = event(&traced, "a/fold1");
    absolute("fold", fold.value, -0.25, 1e-12);
    assert!((fold.value + 0.25).abs() <= fold.error.expect("an error"), "the error must cover the truth: {fold:?}");
    absolute("period at the fold", fold.period, TAU, 1e-10);
    absolute("radius at the fold", fold.maxima[0], 0.5f64.sqrt(), 1e-9);
    let thresholds: Vec<&str> =
        a.events.iter().filter(|event| event.kind.is_threshold()).map(|event| event.name.as_str()).collect();
    assert_eq!(thresholds, ["a/hopf1", "a/fold1"]);
    let hopf = event(&traced, "a/hopf1");
    assert!(hopf.value.abs() <= hopf.error.expect("an error"), "the error must cover the truth: {hopf:?}");
    assert_eq!(fold.kind, EventKind::Fold);
    let EndReason::Equilibrium { value } = a.ends.0.reason else { panic!("{:?}", a.ends) };
    // Extrapolated, not located; the range is 0.9.
    absolute("birth of the inner circle", value, 0.0, 1e-9);
    assert_eq!(a.ends.1.reason, EndReason::Edge);
}
