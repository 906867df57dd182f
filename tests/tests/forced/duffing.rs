//! Forced oscillators: the response to a forcing, over its frequency and over its strength.

use std::f64::consts::TAU;

use armilla_record::EndReason;
use armilla_tests::{absolute, branch, event, job, relative};

/// Forced Duffing oscillator `x'' + 0.1 x' + x + 0.04 x^3 = cos(omega t)`, followed in the frequency of the forcing. Folds computed
/// independently by single shooting with a high-order Taylor integrator in 113-bit arithmetic and Newton on the extended
/// system. Exact: the period is that of the forcing, the product of both multipliers exp(-2 pi delta/omega).
#[test]
fn folds_of_the_duffing_oscillator() {
    let traced = job(
        "duffing",
        r#"start: Settle(at: {"omega": 2.0}), follow: (parameter: "omega", from: 0.5, to: 2.5), accuracy: 1e-10"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    for (name, exact) in
        [("a/fold1", 1.252_014_959_107_248_308_885_176), ("a/fold2", 1.522_448_029_044_930_745_390_372)]
    {
        let fold = event(&traced, name);
        relative(name, fold.value, exact, 1e-9);
        let error = fold.error.expect("an error");
        assert!((fold.value - exact).abs() <= error, "{name}: {} for {exact}, error {error:e}", fold.value);
        relative("its period", fold.period, TAU / exact, 1e-9);
    }
    let a = branch(&traced, "a");
    for point in &a.points {
        let at = format!("at omega = {}", point.value);
        relative(&format!("period {at}"), point.period, TAU / point.value, 4e-16);
        let sum: f64 = point.multipliers.iter().map(|mu| mu.log_modulus).sum();
        absolute(&format!("log of the product {at}"), sum, -TAU * 0.1 / point.value, 1e-9);
        assert_eq!((point.turns, point.multipliers.len()), (1, 2), "{at}");
    }
    assert_eq!(a.points.iter().filter(|point| point.unstable_count > 1).count(), 0);
    assert!(a.points.iter().any(|point| point.unstable_count == 1));
    assert!(matches!((&a.ends.0.reason, &a.ends.1.reason), (EndReason::Edge, EndReason::Edge)));
}

/// Exact: `x'' + 2 z x' + x = f cos(omega t)` answers with the amplitude `f/sqrt((1 - omega^2)^2 + (2 z omega)^2)`; multipliers
/// `exp((-z ± i sqrt(1 - z^2)) 2 pi/omega)`.
#[test]
fn response_of_a_linear_oscillator() {
    let traced = job(
        "resonator",
        r#"start: Settle(), follow: (parameter: "omega", from: 0.2, to: 3.0), accuracy: 1e-10, targets: [0.995]"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let z = 0.1f64;
    for point in &branch(&traced, "a").points {
        let w = point.value;
        let amplitude = 1.0 / ((1.0 - w * w).powi(2) + (2.0 * z * w).powi(2)).sqrt();
        // Relative to the range of the state.
        absolute(&format!("amplitude at {w}"), point.maxima[0], amplitude, 2e-10 * amplitude);
        absolute(&format!("speed at {w}"), point.maxima[1], amplitude * w, 2e-10 * amplitude * w);
        let angle = ((1.0 - z * z).sqrt() * TAU / w).rem_euclid(TAU);
        let angle = if angle > TAU / 2.0 { TAU - angle } else { angle };
        for mu in &point.multipliers {
            absolute("log-modulus", mu.log_modulus, -z * TAU / w, 1e-9);
            absolute("angle", mu.angle.abs(), angle, 1e-8);
        }
    }
    // The forcing's strength may be followed through zero: the motion then turns into its opposite.
    let traced = job(
        "resonator",
        r#"set: {"omega": 0.8}, start: Settle(at: {"f": 1.0}), follow: (parameter: "f", from: -1.5, to: 1.5), accuracy: 1e-10, targets: [0.0]"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let gain = 1.0 / ((1.0 - 0.64f64).powi(2) + (0.16f64).powi(2)).sqrt();
    for point in &branch(&traced, "a").points {
        absolute(&format!("at f = {}", point.value), point.maxima[0], gain * point.value.abs(), 1e-9);
    }
    assert_eq!(event(&traced, "a/target1").value, 0.0);
}
