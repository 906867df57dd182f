//! Births of cycles at states of rest, exact by their eigenvalues.

use armilla_record::EndReason;
use armilla_tests::{branch, event, job, relative};

/// The study's birth of a cycle, its value and period to 1e-11, inside their errors.
fn check(model: &str, fields: &str, wanted: (f64, f64)) {
    let traced = job(model, fields);
    let hopf = event(&traced, "a/hopf1");
    for (what, found, wanted, error) in
        [("birth", hopf.value, wanted.0, hopf.error), ("period there", hopf.period, wanted.1, hopf.period_error)]
    {
        relative(&format!("{model}, {what}"), found, wanted, 1e-11);
        // The reference has 16 digits.
        let error = error.expect("an error") + 4.0 * f64::EPSILON * wanted.abs();
        assert!((found - wanted).abs() <= error, "{model}, {what}: {found} for {wanted} ± {error:e}");
    }
    let ends = &branch(&traced, "a").ends;
    let at_rest = |reason: &EndReason| matches!(reason, EndReason::Equilibrium { .. });
    assert!(at_rest(&ends.0.reason) || at_rest(&ends.1.reason), "{ends:?}");
}

/// X7: the trace B - 1 - A^2 of the Jacobian at x = A, y = B/A vanishes, its determinant is A^2.
#[test]
fn brusselator() {
    check(
        "x10",
        r#"start: Settle(at: {"B": 3}), follow: (parameter: "B", from: 1.5, to: 4)"#,
        (2.0, std::f64::consts::TAU),
    );
}

/// X8: F = 1/(cos f - cos 2f), frequency F (sin f + sin 2f), f = 2 pi/5 (van Kekem & Sterk 2018, Physica D 367:38): 2/sqrt 5.
#[test]
fn ring_of_five() {
    check(
        "lorenz96",
        r#"start: Settle(at: {"F": 1.2}), follow: (parameter: "F", from: 0.5, to: 3)"#,
        (0.894_427_190_999_915_878_6, 4.565_001_337_004_396_748),
    );
}

/// X9: with m = p = q, q (1 + q^2) = al and slope -c = -2 al q/(1 + q^2)^2 around the ring, (s + 1)^6 = -c^3; imaginary roots
/// at c = 4/3, so q = sqrt 2, al = 3 sqrt 2, frequency 1/sqrt 3.
#[test]
fn repressilator() {
    check(
        "repressilator",
        r#"start: Settle(at: {"al": 10}), follow: (parameter: "al", from: 3, to: 20)"#,
        (3.0 * 2f64.sqrt(), std::f64::consts::TAU * 3f64.sqrt()),
    );
}

/// The canard's fast-slow pair: rest at x = a loses its stability where x^2 = 1, frequency 1/sqrt(eps), eps = 0.05.
#[test]
fn fast_slow_pair() {
    check(
        "canard",
        r#"start: Settle(at: {"a": 0.9}), follow: (parameter: "a", from: 0.8, to: 1.05)"#,
        (1.0, std::f64::consts::TAU * 0.05f64.sqrt()),
    );
}
