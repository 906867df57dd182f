//! X14, `x' = y - eps Hx (H - h)`, `y' = -Hx - eps y (H - h)`, `H = y^2/2 - x^2/2 + x^4/4`, for -1/4 < h < 0.
//!
//! Exact, by hand: the level curve H = h is a cycle, on which the model is `x'' = x - x^3`; period 2 sqrt 2 K(m)/x1 with
//! `x1^2 = 1 + s`, `m = 2 s/(1 + s)`, `s = sqrt(1 + 4 h)`; multiplier exp(-eps Int (Hx^2 + y^2) dt). At h = 0 the curve is
//! a loop through the saddle x = y = 0, whose eigenvalues are 1 and -1, so `T = const - ln|h|` near it.

use std::f64::consts::PI;

use armilla_record::EndReason;
use armilla_tests::{absolute, branch, event, job, relative};

/// Period by Gauss's mean: `K(m) = pi/(2 agm(1, sqrt(1 - m)))` (Abramowitz & Stegun 1964, 17.6).
fn period(h: f64) -> f64 {
    let s = (1.0 + 4.0 * h).sqrt();
    // 1 - m = (1 - s)/(1 + s) = -4 h/(1 + s)^2, without cancellation.
    let (mut a, mut b) = (1.0, (-4.0 * h).sqrt() / (1.0 + s));
    for _ in 0..12 {
        (a, b) = (0.5 * (a + b), (a * b).sqrt());
    }
    PI * 2f64.sqrt() / (a * (1.0 + s).sqrt())
}

/// The formula above against numbers to 18 digits (same formula, 40 decimals).
#[test]
fn the_formula_has_its_digits() {
    relative("h = -0.2", period(-0.2), 4.630_675_304_149_133_47, 1e-15);
    relative("h = -1e-4", period(-1e-4), 11.983_577_949_748_432_5, 1e-15);
    relative("h = -1e-8", period(-1e-8), 21.193_269_600_141_670_6, 1e-15);
}

#[test]
fn the_period_grows_fivefold_and_every_cycle_is_exact() {
    let traced = job(
        "x14",
        r#"start: Settle(at: {"h": -0.2}), follow: (parameter: "h", from: -0.24, to: 0.1), targets: [-0.01, -1e-4]"#,
    );
    let a = branch(&traced, "a");
    let longest = a.points.iter().map(|point| point.period).fold(0.0, f64::max);
    assert!(longest > 5.0 * period(-0.2), "{longest}");
    for point in &a.points {
        // The parameter stands beside H of size 1/4, known to 1e-16: that moves the period by 1e-16/|h|.
        let roundoff = 1e-15 / point.value.abs();
        if roundoff < 1e-2 {
            absolute(
                &format!("period at h = {:e}", point.value),
                point.period,
                period(point.value),
                1e-9 * point.period + roundoff,
            );
        }
        assert!(point.is_stable(), "{point:?}");
    }
    // Multipliers: quadrature of the divergence in 40 decimals along the exact level curve, eps = 1.
    for (h, multiplier) in
        [(-0.2, 0.515_752_810_422_785), (-0.01, 0.045_993_253_957_977_7), (-1e-4, 0.040_811_153_789_473_5)]
    {
        let point = a.points.iter().find(|point| point.value == h).expect("a target is a point");
        relative(&format!("multiplier at h = {h}"), point.multipliers[0].log_modulus.exp(), multiplier, 1e-9);
    }
}

#[test]
fn the_approach_is_told_with_its_law_and_limit() {
    let traced = job("x14", r#"start: Settle(at: {"h": -0.2}), follow: (parameter: "h", from: -0.24, to: 0.1)"#);
    let end = &branch(&traced, "a").ends.1;
    assert_eq!(end.reason, EndReason::PeriodBlowUp);
    assert!(end.words.contains("saddle loop"), "{}", end.words);
    let limit = event(&traced, "a/period-blow-up1");
    assert!(limit.value.abs() <= limit.error.expect("an error"), "{limit:?}");
    absolute("limit", limit.value, 0.0, 1e-12);
}
