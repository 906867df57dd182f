//! The example of the pond. Periods and extremes by single shooting with SciPy's `solve_ivp`, method DOP853, relative tolerance
//! 1e-13, log-multipliers by the integral of the divergence; the birth of the cycle in closed form (examples/README.md).

use armilla_record::EndReason;
use armilla_tests::{absolute, branch, event, example_job, relative};

#[test]
fn blooms_from_counts() {
    let traced = example_job("pond");
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let a = branch(&traced, "a");
    for (capacity, period, log, most, least) in [
        (5.0, 36.400_561_628_12, -0.822_870_842_9, 2.836_938_33, 0.355_547_84),
        (6.0, 40.469_090_881_37, -2.006_649_278_7, 4.361_587_57, 0.116_958_06),
        (8.0, 48.986_158_373_70, -3.903_767_040_6, 6.916_798_71, 0.014_519_25),
    ] {
        let point = a.points.iter().find(|point| point.value == capacity).expect("a target");
        relative("period", point.period, period, 1e-11);
        absolute("log-multiplier", point.multipliers[0].log_modulus, log, 1e-9);
        absolute("most algae", point.maxima[0], most, 1e-8);
        absolute("least algae", point.minima[0], least, 1e-8);
    }
    let birth = event(&traced, "a/hopf1");
    relative("birth", birth.value, 4.4, 1e-9);
    relative("period at birth", birth.period, 34.029_892_492_647_57, 1e-9);
    assert!(matches!(a.ends.0.reason, EndReason::Equilibrium { .. }), "{:?}", a.ends);
    // Planted noise is 3 % of the ranges without it.
    assert!(traced.notes[0].starts_with("61 samples; period estimated: 40.6"), "{}", traced.notes[0]);
}
