//! Lorenz's equations, sigma = 10, b = 8/3: the symmetric cycle of large r breaks its symmetry, the pair doubles.
//!
//! Source: independent, single shooting with a Taylor series of order 28 and 30 decimals, and again of order 34 and 36, by
//! Newton's method and the secant method: the symmetric cycle as a fixed point of the half-period map followed by
//! x -> -x, y -> -y, the breaking where that has the multiplier -1; the doubling where the period's map has -1. (Sparrow
//! 1982, The Lorenz Equations, has the breaking near 313; from memory.)

use armilla_record::{Criticality, EndReason, EventKind};
use armilla_tests::{absolute, branch, cascade_job, event, job, relative};

#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn a_symmetry_breaks_and_the_pair_doubles() {
    let traced = job(
        "lorenz",
        r#"start: Settle(at: {"r": 350}), follow: (parameter: "r", from: 200, to: 360), pursue: (doublings: 1)"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let names: Vec<&str> = traced.branches.iter().map(|branch| branch.name.as_str()).collect();
    assert_eq!(names, ["a", "a.pitchfork1", "a.pitchfork1.doubling1"]);
    for (name, value, period) in [
        ("a/pitchfork1", 312.973_532_984_161_612_863, 0.411_166_056_121_265_551_964),
        ("a.pitchfork1/doubling1", 229.406_708_561_443_450_438, 0.480_866_820_311_095_173_443),
    ] {
        let found = event(&traced, name);
        relative(name, found.value, value, 1e-12);
        assert!((found.value - value).abs() <= found.error.expect("an error"), "{found:?}");
        relative("period", found.period, period, 1e-12);
        assert!((found.period - period).abs() <= found.period_error.expect("an error"), "{found:?}");
        assert_eq!(found.criticality, Some(Criticality::Supercritical));
    }
    let pitchfork = event(&traced, "a/pitchfork1");
    assert!(
        pitchfork
            .note
            .starts_with("breaks the symmetry x -> -x, y -> -y half a period later; half-period multiplier -1")
    );
    // A symmetric cycle does not double.
    assert!(branch(&traced, "a").events.iter().all(|event| event.kind != EventKind::Doubling));
    for point in &branch(&traced, "a").points {
        assert_eq!(point.unstable_count, usize::from(point.value < pitchfork.value), "{}", point.value);
    }
    assert_eq!(branch(&traced, "a.pitchfork1").ends.0.reason, EndReason::ReturnsToParent);
}

/// From the unsymmetric side: the branch ends at the pitchfork, its mirror image is left alone.
#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn the_same_from_one_of_the_pair() {
    let traced = job(
        "lorenz",
        r#"start: Settle(at: {"r": 250}), follow: (parameter: "r", from: 240, to: 320), pursue: (doublings: 0)"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let found = event(&traced, "a/pitchfork1");
    relative("pitchfork", found.value, 312.973_532_984_161_612_863, 1e-12);
    assert!(found.note.starts_with("met from the branch that is born here"), "{}", found.note);
    let values: Vec<f64> = branch(&traced, "a").points.iter().map(|point| point.value).collect();
    assert!(values.windows(2).all(|pair| pair[0] < pair[1]), "one side only: {values:?}");
    let symmetric = branch(&traced, "a.pitchfork1");
    assert_eq!([symmetric.ends.0.value, symmetric.ends.1.value], [240.0, 320.0]);
    assert!(symmetric.events.iter().filter(|event| event.kind == EventKind::Start).count() == 2);
}

/// The whole sequence of the pair, from the symmetric cycle on; its second threshold by shooting as above, with 24 decimals.
#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn the_sequence_of_the_pair() {
    let traced = cascade_job(
        "lorenz",
        r#"start: Settle(at: {"r": 350}), follow: (parameter: "r", from: 200, to: 360), pursue: (doublings: 5)"#,
    );
    let names: Vec<&str> = traced.cascade.iter().map(|row| row.event.as_str()).collect();
    assert_eq!(names[..2], ["a.pitchfork1/doubling1", "a.pitchfork1.doubling1/doubling1"]);
    assert_eq!(names.len(), 7, "six doublings and their limit: {names:?}");
    relative("second doubling", traced.cascade[1].value, 218.210_127_777_820_751_848, 1e-12);
    // Feigenbaum 1978 (J. Stat. Phys. 19:25): the ratios tend to 4.6692.
    absolute("ratio", traced.cascade[5].ratio.expect("a ratio"), 4.6692, 0.02);
}
