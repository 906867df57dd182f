//! The Brusselator `x' = A - (B + 1) x + x^2 y, y' = B x - x^2 y`, A = 1.
//!
//! Source: independent, single shooting with a high-order Taylor integrator in 113-bit arithmetic and Newton's method, two
//! settings agreeing on the digits shown.

use armilla_tests::{branch, job, relative};

#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn periods_and_multiplier() {
    let traced =
        job("x10", r#"start: Settle(at: {"B": 3}), follow: (parameter: "B", from: 2.1, to: 4), targets: [2.5]"#);
    let at = |value: f64| {
        branch(&traced, "a").points.iter().find(|point| point.value == value).expect("a point at the value")
    };
    relative("period at B = 3", at(3.0).period, 7.156_919_921_179_879_819_799_87, 1e-11);
    relative("multiplier", at(3.0).multipliers[0].log_modulus.exp(), 2.516_375_799_889_709_379_18e-4, 1e-9);
    relative("period at B = 2.5", at(2.5).period, 6.577_284_341_9, 1e-11);
}
