//! X1, `x' = x (mu - r2) - y (1 + k r2)`, `y' = y (mu - r2) + x (1 + k r2)`, `r2 = x^2 + y^2`.
//!
//! Exact, by hand in polar coordinates: `r' = r (mu - r2)`, `theta' = 1 + k r2`. So r = sqrt(mu), the period is
//! 2 pi/(1 + k mu), the multiplier exp(-2 mu T); the circle is born at mu = 0 (Hopf).

use std::f64::consts::TAU;

use armilla_record::EndReason;
use armilla_tests::{absolute, branch, event, job, multiplier, relative};

const K: f64 = 0.5;

#[test]
fn every_cycle_of_the_branch_is_the_exact_circle() {
    let traced = job(
        "x1",
        r#"set: {"k": 0.5}, start: Settle(at: {"mu": 0.6}), follow: (parameter: "mu", from: 0.05, to: 1.5), targets: [0.25]"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let a = branch(&traced, "a");
    assert!(a.points.len() > 10);
    for point in &a.points {
        let period = TAU / (1.0 + K * point.value);
        relative(&format!("period at mu = {}", point.value), point.period, period, 1e-10);
        // A multiplier of relative accuracy 1e-10 in the sense of its modulus.
        multiplier("multiplier", point.multipliers[0], (-2.0 * point.value * period, false), 1e-10);
        // A profile is accurate relative to the range of the state, here 2 sqrt(mu); the study asks for 1e-9.
        let radius = point.value.sqrt();
        for extreme in [point.maxima[0], -point.minima[0], point.maxima[1], -point.minima[1]] {
            absolute("radius", extreme / (2.0 * radius), 0.5, 1e-9);
        }
        assert_eq!((point.unstable_count, point.turns), (0, 1));
    }
    // Exact, by hand, to 24 digits: mu = 1/4, k = 1/2.
    relative("period at the target", event(&traced, "a/target1").period, 5.585_053_606_381_854_646_155_81, 1e-10);
    let point = a.points.iter().find(|point| point.value == 0.25).expect("the target is a point");
    relative(
        "multiplier at the target",
        point.multipliers[0].log_modulus.exp(),
        0.061_266_210_509_709_911_346_792,
        1e-10,
    );
}

#[test]
fn the_branch_ends_where_the_circle_is_born() {
    let traced = job("x1", r#"start: Settle(at: {"mu": 0.25}), follow: (parameter: "mu", from: -0.5, to: 0.5)"#);
    let EndReason::Equilibrium { value } = branch(&traced, "a").ends.0.reason else {
        panic!("the branch must end at the equilibrium: {:?}", branch(&traced, "a").ends)
    };
    // Exact, by hand: mu = 0. The end is extrapolated, not located; the asked range is 1.
    absolute("birth of the circle", value, 0.0, 1e-9);
    let hopf = event(&traced, "a/hopf1");
    assert!(hopf.value.abs() <= hopf.error.expect("an error"), "the error must cover the truth: {hopf:?}");
    // Exact, by hand: the period there is 2 pi.
    absolute("period at the birth", hopf.period, TAU, hopf.period_error.expect("an error"));
}
