//! The example of the sieve. Single shooting with SciPy's `solve_ivp`, method DOP853, relative tolerance 1e-13: doublings by
//! Brent's method on det(M + 1), the fold by MINPACK's hybrd on the extended system. The product of the multipliers is exact.

use armilla_record::Criticality;
use armilla_tests::{absolute, branch, event, example_job, relative};

#[test]
fn hops_at_every_second_turn() {
    let traced = example_job("sieve");
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    for (name, value, turns) in [
        ("a/doubling1", 933.869_517_685_55, 1),
        ("a/doubling2", 971.609_307_661_13, 1),
        ("a.doubling1/fold1", 897.597_458_296_93, 2),
    ] {
        let found = event(&traced, name);
        relative(name, found.value, value, 1e-12);
        relative("period", found.period, 60.0 * f64::from(turns) / value, 1e-12);
    }
    assert_eq!(event(&traced, "a/doubling1").criticality, Some(Criticality::Subcritical));
    assert_eq!(event(&traced, "a/doubling2").criticality, Some(Criticality::Supercritical));
    let at = |name: &str, stable: bool| {
        let points = branch(&traced, name).points.iter();
        points.into_iter().find(|point| point.value == 900.0 && point.is_stable() == stable).expect("the target")
    };
    let one = at("a", true);
    relative("largest lift, one turn", one.maxima[0], 0.402_148_724_423, 1e-8);
    absolute("modulus", one.multipliers[0].log_modulus.exp(), 0.904_837_42, 1e-8);
    absolute("angle", one.multipliers[0].angle.abs(), 3.002_637_62, 1e-7);
    let two = at("a.doubling1", true);
    relative("largest lift, two turns", two.maxima[0], 2.692_658_612_473, 1e-8);
    absolute("first multiplier", two.multipliers[0].log_modulus.exp(), 0.892_592_57, 2e-7);
    absolute("second multiplier", two.multipliers[1].log_modulus.exp(), 0.750_980_98, 2e-7);
    for point in traced.branches.iter().flat_map(|branch| &branch.points) {
        let sum: f64 = point.multipliers.iter().map(|mu| mu.log_modulus).sum();
        absolute("log of the product", sum, -3.0 * point.period, 1e-8);
    }
}
