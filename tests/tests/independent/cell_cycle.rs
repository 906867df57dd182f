//! Tyson's cell division cycle in two variables (1991, PNAS 88:7328), `u' = k4 (v - u)(al + u^2) - k6 u, v' = k1 - k6 u`, k1 =
//! 0.015, k4 = 180, al = 1e-4.

use armilla_tests::{event, job, relative};

#[test]
fn period_and_both_births() {
    let traced = job("tyson", r#"start: Settle(at: {"k6": 1}), follow: (parameter: "k6", from: 0.2, to: 1.6)"#);
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    // Independent: single shooting with a Taylor integrator in 113-bit arithmetic, eleven digits.
    relative("period at k6 = 1", event(&traced, "a/start1").period, 35.597_934_978, 3e-11);
    // Exact: the trace of the Jacobian at u = k1/k6 vanishes, 2 pi over the root of its determinant; solved in 40 decimals.
    for (name, value, period) in [
        ("a/hopf2", 0.364_065_884_083_197_312, 18.306_829_880_710_505_1),
        ("a/hopf1", 1.462_589_089_536_704_99, 27.034_213_267_649_628_9),
    ] {
        relative(name, event(&traced, name).value, value, 1e-11);
        relative("period there", event(&traced, name).period, period, 1e-11);
    }
}
