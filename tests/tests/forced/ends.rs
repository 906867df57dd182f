//! Subharmonic motions: settling finds the number of forcing periods, and branches keep it.

use std::f64::consts::TAU;

use armilla_tests::{branch, job, relative};

/// The doubled cycle of the planted band attracts beyond its doubling: settling closes after two forcing periods by
/// itself, and the branch ends at the cycle it was born from.
#[test]
fn settling_finds_two_periods() {
    let traced = job(
        "forced_band",
        r#"start: Settle(at: {"l": 0.15}), follow: (parameter: "l", from: -0.2, to: 0.2), accuracy: 1e-10"#,
    );
    let a = branch(&traced, "a");
    for point in &a.points {
        assert_eq!(point.turns, 2);
        relative("period", point.period, 2.0 * TAU / 1.7, 1e-15);
        assert!(point.value > 0.0);
    }
    assert!(a.ends.0.words.contains("half its period"), "{:?}", a.ends);
}
