//! X2 and X3 in other units: the digits of the thresholds must not depend on them. Exact values as in `fold.rs` and
//! `doubling.rs`, times the factors of the models.

use armilla_tests::{absolute, event, job, relative};

/// Parameter in units of 1e9 and of 1e-9: fold at -1/4 of the unit.
#[test]
fn parameters_of_any_size() {
    for (model, unit) in [("x2_large", 1e9), ("x2_small", 1e-9)] {
        let number = |value: f64| format!("{:e}", value * unit);
        let (start, from, to) = (number(0.1), number(-0.4), number(0.5));
        let traced = job(
            model,
            &format!(
                r#"start: Settle(at: {{"mu": {start}}}), follow: (parameter: "mu", from: {from}, to: {to}), accuracy: 1e-12"#
            ),
        );
        let fold = event(&traced, "a/fold1");
        relative(&format!("{model}: fold"), fold.value, -0.25 * unit, 1e-12);
        assert!((fold.value + 0.25 * unit).abs() <= fold.error.expect("an error"), "{fold:?}");
        relative(&format!("{model}: period"), fold.period, std::f64::consts::TAU, 1e-12);
        let hopf = event(&traced, "a/hopf1");
        assert!(hopf.value.abs() <= hopf.error.expect("an error"), "{hopf:?}");
        absolute(&format!("{model}: birth"), hopf.value / unit, 0.0, 1e-12);
    }
}

/// X3 with z in units of 1e-8: its states differ by that much.
#[test]
fn states_that_differ_by_eight_orders() {
    let traced = job(
        "x3_scaled",
        r#"set: {"kap": 0.5, "om": 1.3}, start: Settle(at: {"mu": -0.1}), follow: (parameter: "mu", from: -0.2, to: 0.2), accuracy: 1e-12, pursue: (doublings: 1), targets: [0.1]"#,
    );
    let doubling = event(&traced, "a/doubling1");
    absolute("doubling", doubling.value, 0.0, 1e-12);
    assert!(doubling.value.abs() <= doubling.error.expect("an error"), "{doubling:?}");
    relative("period", doubling.period, std::f64::consts::TAU / 1.3, 1e-12);
    let target = traced.branches.iter().find(|branch| branch.name == "a.doubling1").expect("the doubled branch");
    let point = target.points.iter().find(|point| point.value == 0.1).expect("the target is a point");
    // z = sqrt(mu) sin(theta/2), here in units of 1e-8.
    relative("largest z", point.maxima[2], 0.1f64.sqrt() * 1e8, 1e-10);
    relative("period of the doubled cycle", point.period, 2.0 * std::f64::consts::TAU / 1.3, 1e-12);
}
