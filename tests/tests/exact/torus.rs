//! X5, `x' = (lam - b) x - c y + x (z + d (1 - z^2))`, `y' = c x + (lam - b) y + y (z + d (1 - z^2))`,
//! `z' = lam z - (x^2 + y^2 + z^2)`, b = 3, c = 1/4, d = 1/5.
//!
//! Exact, by hand in polar coordinates: a circle at the root z0 of `lam - b + z + d (1 - z^2) = 0` with
//! `r0^2 = lam z0 - z0^2` and period 2 pi/c; exponents the eigenvalues of `[[0, r0 (1 - 2 d z0)], [-2 r0, lam - 2 z0]]`. Their sum
//! vanishes where lam = 2 z0, at lam = 2: torus, rotation 2 pi sqrt(det)/c; r0 = 0 where 2 lam - b + d (1 - lam^2) = 0.

use std::f64::consts::TAU;

use armilla_record::{EndReason, EventKind};
use armilla_tests::{absolute, branch, event, job, relative};

#[test]
fn multipliers_torus_and_birth_are_exact() {
    let traced = job(
        "x5",
        r#"start: Settle(at: {"lam": 1.9}), follow: (parameter: "lam", from: 1.6, to: 2.2), accuracy: 1e-10"#,
    );
    let a = branch(&traced, "a");
    let (b, c, d) = (3.0, 0.25, 0.2f64);
    for point in &a.points {
        let lam = point.value;
        let z = (1.0 - (1.0 - 4.0 * d * (b - lam - d)).sqrt()) / (2.0 * d);
        let square = lam * z - z * z;
        let (trace, determinant) = (lam - 2.0 * z, 2.0 * square * (1.0 - 2.0 * d * z));
        let period = TAU / c;
        relative("period", point.period, period, 1e-10);
        // Products of the two, real or not.
        let sum: f64 = point.multipliers.iter().map(|multiplier| multiplier.log_modulus).sum();
        absolute(&format!("sum of logarithms at lam = {lam}"), sum, trace * period, 1e-8);
        let discriminant = 0.25 * trace * trace - determinant;
        if discriminant < -1e-6 {
            // The angle, wound back into (-pi, pi].
            let turns = (-discriminant).sqrt() * period / TAU;
            let angle = (turns - turns.round()).abs() * TAU;
            absolute(&format!("angle at lam = {lam}"), point.multipliers[0].angle.abs(), angle, 1e-8);
            absolute("modulus", point.multipliers[0].log_modulus, 0.5 * trace * period, 1e-8);
            assert_eq!(point.unstable_count, if trace > 0.0 { 2 } else { 0 }, "{point:?}");
        }
    }
    let torus = event(&traced, "a/torus1");
    assert_eq!(torus.kind, EventKind::Torus);
    assert!((torus.value - 2.0).abs() <= torus.error.expect("an error"), "{torus:?}");
    absolute("torus", torus.value, 2.0, 1e-12);
    // By the formula, to 24 digits.
    absolute("rotation", torus.angle.expect("an angle"), 2.398_797_377_099_941_013_114_758, 1e-11);
    absolute("period", torus.period, TAU / c, 1e-12);
    let hopf = event(&traced, "a/hopf1");
    // By the formula, to 24 digits.
    relative("birth", hopf.value, 1.683_375_209_644_600_166_231_04, 1e-11);
    assert!(matches!(a.ends.0.reason, EndReason::Equilibrium { .. }));
}
