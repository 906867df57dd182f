//! X3 and X4: a circle whose plane across the orbit turns by half a turn a period, so that it doubles.

use std::f64::consts::TAU;

use armilla_record::{Branch, Criticality, EndReason};
use armilla_study::Traced;
use armilla_tests::{absolute, branch, event, job, multiplier, relative};

/// X3. Exact, by hand in the turning plane: with `(r - 1) + i z = U exp(i theta/2)` the model is
/// `U' = mu Re U - kap i Im U - |U|^2 U`, `theta' = om`. Circle: period T = 2 pi/om, multipliers -exp(mu T), -exp(-kap T);
/// doubling at mu = 0; doubled cycle U = sqrt(mu), period 2 T, multipliers exp(-2 mu T2), exp(-(kap + mu) T2).
#[test]
fn twisted_band_doubles_supercritically() {
    let (kap, period) = (0.5, TAU / 1.3);
    let traced = job(
        "x3",
        r#"set: {"kap": 0.5, "om": 1.3}, start: Settle(at: {"mu": -0.1}), follow: (parameter: "mu", from: -0.2, to: 0.2), accuracy: 1e-10, pursue: (doublings: 1)"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    for point in &branch(&traced, "a").points {
        relative(&format!("period at mu = {}", point.value), point.period, period, 1e-10);
        // Largest modulus first.
        multiplier("first multiplier", point.multipliers[0], (point.value * period, true), 1e-10);
        multiplier("second multiplier", point.multipliers[1], (-kap * period, true), 1e-10);
        assert_eq!(point.unstable_count, usize::from(point.value > 0.0), "at {}", point.value);
    }
    let doubling = event(&traced, "a/doubling1");
    absolute("doubling", doubling.value, 0.0, 1e-12);
    assert!(doubling.value.abs() <= doubling.error.expect("an error"), "the error must cover the truth: {doubling:?}");
    relative("period at the doubling", doubling.period, period, 1e-10);
    assert_eq!(doubling.criticality, Some(Criticality::Supercritical));
    let doubled = branch(&traced, "a.doubling1");
    assert_eq!(doubled.born_at.as_deref(), Some("a/doubling1"));
    for point in away_from_birth(doubled) {
        let (amplitude, twice) = (point.value.sqrt(), 2.0 * period);
        relative(&format!("doubled period at mu = {}", point.value), point.period, twice, 1e-10);
        // z = U sin(theta/2), range 2 U.
        absolute("largest z", point.maxima[2], amplitude, 2e-10 * amplitude);
        multiplier("first multiplier", point.multipliers[0], (-2.0 * point.value * twice, false), 1e-10);
        multiplier("second multiplier", point.multipliers[1], (-(kap + point.value) * twice, false), 1e-10);
        assert_eq!((point.unstable_count, point.turns), (0, 2));
    }
}

/// The points of a doubled branch but for its birth, where the amplitude is 0.
fn away_from_birth(branch: &Branch) -> impl Iterator<Item = &armilla_record::Point> {
    assert!(branch.points.len() > 5, "{} points", branch.points.len());
    branch.points.iter().skip(1)
}

fn x4(g: f64, range: (f64, f64)) -> Traced {
    let (from, to) = range;
    job(
        "x4",
        &format!(
            r#"set: {{"g": {g:?}, "e": 0.7}}, start: Settle(at: {{"l": -0.05}}), follow: (parameter: "l", from: {from}, to: {to}), accuracy: 1e-10, pursue: (doublings: 1)"#
        ),
    )
}

/// X4. Exact, by hand in the turning plane: `U' = l U + g U^3`, `V' = -V`, `theta' = 1 + e U^2`. Circle: period 2 pi,
/// multipliers -exp(2 pi l), -exp(-2 pi). Doubled cycle: U^2 = -l/g, period 4 pi/(1 + e U^2), multipliers
/// exp(-2 l T2), exp(-T2): stable for g < 0 and l > 0, unstable for g > 0 and l < 0.
fn check_x4(traced: &Traced, g: f64) {
    let e = 0.7;
    for point in &branch(traced, "a").points {
        relative(&format!("period at l = {}", point.value), point.period, TAU, 1e-10);
        multiplier("first multiplier", point.multipliers[0], (TAU * point.value, true), 1e-10);
        multiplier("second multiplier", point.multipliers[1], (-TAU, true), 1e-10);
        assert_eq!(point.unstable_count, usize::from(point.value > 0.0), "at {}", point.value);
    }
    let doubling = event(traced, "a/doubling1");
    absolute("doubling", doubling.value, 0.0, 1e-12);
    assert_eq!(doubling.criticality, Some(if g < 0.0 { Criticality::Supercritical } else { Criticality::Subcritical }));
    for point in away_from_birth(branch(traced, "a.doubling1")) {
        let l = point.value;
        assert!(l * g < 0.0, "the doubled cycle exists where -l/g > 0, found at l = {l}");
        let square = -l / g;
        let period = 2.0 * TAU / (1.0 + e * square);
        relative(&format!("doubled period at l = {l}"), point.period, period, 1e-10);
        absolute("largest z", point.maxima[2], square.sqrt(), 2e-10 * square.sqrt());
        // The multipliers in the order of their moduli: the growth -2 l is above -1 here.
        multiplier("first multiplier", point.multipliers[0], (-2.0 * l * period, false), 1e-10);
        multiplier("second multiplier", point.multipliers[1], (-period, false), 1e-10);
        assert_eq!((point.unstable_count, point.turns), (usize::from(g > 0.0), 2));
    }
}

#[test]
fn doubling_with_known_coefficients_is_supercritical_for_negative_g() {
    let traced = x4(-1.3, (-0.15, 0.15));
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    check_x4(&traced, -1.3);
    assert_eq!(branch(&traced, "a.doubling1").ends.1.reason, EndReason::Edge);
    assert_eq!(branch(&traced, "a.doubling1").ends.1.value, 0.15);
}

#[test]
fn subcritical_doubling_gives_the_unstable_doubled_branch_on_the_side_where_the_circle_is_stable() {
    let traced = x4(1.3, (-0.15, 0.15));
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    check_x4(&traced, 1.3);
    assert_eq!(branch(&traced, "a.doubling1").ends.1.reason, EndReason::Edge);
    assert_eq!(branch(&traced, "a.doubling1").ends.1.value, -0.15);
}
