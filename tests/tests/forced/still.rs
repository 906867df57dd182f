//! Doublings of a motion that stands still: which side the swinging is born on.
//!
//! By hand: a hardening spring raises the frequency with the amplitude. Tuned below half the frequency of the pump (k < 1) the
//! oscillator comes into tune as it swings, so swings exist before rest is unstable; tuned above it goes out of tune. The
//! threshold itself by averaging to first order, `e^2 = 4 ((1 - k)^2 + 0.1^2)` (Nayfeh & Mook 1979, Nonlinear Oscillations, sec. 5.7;
//! from memory), off by terms of second order.

use armilla_record::Criticality;
use armilla_tests::{branch, event, job};

#[test]
fn the_side_of_a_still_motion() {
    for (k, side) in [(0.85, Criticality::Subcritical), (1.2, Criticality::Supercritical)] {
        let traced = job(
            "parametric",
            &format!(
                r#"set: {{"k": {k:?}}}, start: Settle(at: {{"e": 0.05}}), follow: (parameter: "e", from: 0.0, to: 1.0)"#
            ),
        );
        let doubling = event(&traced, "a/doubling1");
        assert_eq!(doubling.criticality, Some(side), "k = {k}: {doubling:?}");
        let averaged = 2.0 * ((1.0 - k) * (1.0 - k) + 0.01f64).sqrt();
        assert!((doubling.value - averaged).abs() < 0.1 * averaged, "k = {k}: {} for {averaged}", doubling.value);
        // The first swinging cycle lies where rest is stable, below the threshold, or above it.
        let first = branch(&traced, "a.doubling1").points[1].value;
        assert_eq!(first < doubling.value, side == Criticality::Subcritical, "k = {k}: {first} by {}", doubling.value);
    }
}
