//! Lorenz's equations `x' = sigma (y - x), y' = x (r - z) - y, z' = x y - b z`, sigma = 10, b = 8/3.
//!
//! Source where nothing else is said: independent, single shooting with a high-order Taylor integrator in 113-bit
//! arithmetic and Newton's method on the extended system, two settings agreeing on the digits shown.

use armilla_record::{EndReason, Point};
use armilla_study::Traced;
use armilla_tests::{branch, event, job, relative};

fn window() -> Traced {
    job(
        "lorenz",
        r#"start: Settle(at: {"r": 100.5}), follow: (parameter: "r", from: 28, to: 102), pursue: (doublings: 0)"#,
    )
}

fn at_28(traced: &Traced) -> &Point {
    branch(traced, "a").points.iter().find(|point| point.value == 28.0).expect("the edge is a point")
}

/// The window of stable motion near r = 100 (Sparrow 1982, The Lorenz Equations: 99.524 < r < 100.795; from memory).
#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn window_near_100() {
    let traced = window();
    for (name, wanted) in [("a/fold1", 100.794_971_421_373_993_761_7), ("a/doubling1", 99.979_651_105_470_874_202_20)] {
        let found = event(&traced, name);
        relative(name, found.value, wanted, 1e-12);
        let error = found.error.expect("an error");
        assert!((found.value - wanted).abs() <= error, "{name}: {:e} is not covered: {found:?}", found.value - wanted);
    }
    // Stable between the two.
    let (low, high) = (event(&traced, "a/doubling1").value, event(&traced, "a/fold1").value);
    for point in branch(&traced, "a").points.iter().filter(|point| point.is_stable()) {
        assert!(point.value >= low && point.value <= high, "{point:?}");
    }
}

/// The unstable cycle that the window leaves behind, down to r = 28: twice about one wing, once about the other.
#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn second_shortest_cycle_of_the_attractor() {
    let traced = window();
    let point = at_28(&traced);
    relative("period", point.period, 2.305_907_263_939_847_749_426_63, 1e-12);
    relative("multiplier", point.multipliers[0].log_modulus.exp(), 9.165_491_815_738_639_866_6, 1e-9);
    assert_eq!(point.multipliers[0].angle, 0.0);
    // The other end runs into the loops through the origin.
    assert_eq!(branch(&traced, "a").ends.1.reason, EndReason::Edge);
}

/// Period: Viswanath 2003, Nonlinearity 16:1035, and independent.
#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn shortest_cycle_of_the_attractor() {
    // Stable at large r (Sparrow 1982), symmetric all the way down.
    let traced = job(
        "lorenz",
        r#"start: Settle(at: {"r": 350}), follow: (parameter: "r", from: 28, to: 400), pursue: (doublings: 0)"#,
    );
    let point = at_28(&traced);
    relative("period", point.period, 1.558_652_210_716_174_727_567_870_2, 1e-12);
    relative("first multiplier", point.multipliers[0].log_modulus.exp(), 4.712_947_273_424_082_182_5, 1e-9);
    relative("second multiplier", point.multipliers[1].log_modulus.exp(), 1.190_004_699_67e-10, 1e-9);
    assert_eq!(point.unstable_count, 1);
}
