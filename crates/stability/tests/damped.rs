//! Cycles with exactly known multipliers, some of them strongly damped, in coordinates that mix everything.
//!
//! Exact, by hand: the circle `r' = a r (1 - r^2)/2, th' = 1` has period 2 pi and the multiplier exp(-2 pi a); states
//! `w' = M(th) w` beside it add the multipliers of that linear equation, known by construction. What the engine sees
//! is `s = S (x, y, w)` with a constant matrix S of determinant 1 whose inverse is exact in binary.

// The cycles and how they are started.
mod planted;

use std::f64::consts::{PI, TAU};

use armilla_record::Point;
use armilla_stability::{MapsFault, SpectrumFault};
use planted::Planted;

/// Asked of the cycles here; log multipliers must be right to this share of max(1, |log|).
const ACCURACY: f64 = 1e-10;

/// Checks rates, largest first, and whether they belong to negative multipliers, for all that are resolved.
fn check(name: &str, point: &Point, exact: &[(f64, bool)]) {
    for (mu, &(rate, negative)) in point.multipliers.iter().zip(exact) {
        let error = (mu.log_modulus - TAU * rate).abs() / (TAU * rate).abs().max(1.0);
        assert!(error < ACCURACY, "{name}: {mu:?} for the rate {rate}, error {error:e}; {point:?}");
        assert_eq!(mu.angle.cos() < 0.0, negative, "{name}: {mu:?} for the rate {rate}");
        assert!(mu.angle.sin().abs() < 1e-6, "{name}: {mu:?} is real");
    }
    assert_eq!(point.unstable_count, exact.iter().filter(|(rate, _)| *rate > 0.0).count(), "{name}: {point:?}");
}

/// Everything must be resolved, plain and mixed.
fn all_resolved(name: &str, planted: Planted, exact: &[(f64, bool)]) {
    for mixed in [false, true] {
        let point = planted.clone().mixed(mixed).describe(ACCURACY).expect("multipliers");
        assert_eq!((point.unresolved, point.multipliers.len()), (None, exact.len()), "{name} {mixed}: {point:?}");
        check(name, &point, exact);
        let size: f64 = point.multipliers.iter().map(|mu| mu.log_modulus.abs()).sum();
        // The mesh of the cycle is as fine as its own shape needs; 10 for that.
        assert!(point.liouville_defect < 10.0 * ACCURACY * size, "{name} {mixed}: {point:?}");
    }
}

#[test]
fn one_direction_at_any_damping() {
    for k in [3.0, 30.0, 1e3, 3e4, 1e6] {
        all_resolved(&format!("{k}"), Planted::new(1.0).decay(k), &[(-1.0, false), (-k, false)]);
    }
}

#[test]
fn dampings_on_several_scales_at_once() {
    let planted = Planted::new(1.0).decay(30.0).decay(1e3).decay(1e6);
    all_resolved("scales", planted, &[(-1.0, false), (-30.0, false), (-1e3, false), (-1e6, false)]);
    let planted = Planted::new(1.0).decay(1e3).decay(1e3);
    all_resolved("twice the same", planted, &[(-1.0, false), (-1e3, false), (-1e3, false)]);
}

/// The damped direction turns with the cycle; with half a turn both multipliers of the plane are negative.
#[test]
fn damped_directions_that_turn_with_the_cycle() {
    let planted = Planted::new(0.5).turning(-1.0, -1e4, false);
    all_resolved("full turn", planted, &[(-0.5, false), (-1.0, false), (-1e4, false)]);
    let planted = Planted::new(0.5).turning(0.25, -1e4, true);
    all_resolved("half turn", planted, &[(0.25, true), (-0.5, false), (-1e4, true)]);
    let planted = Planted::new(0.5).turning(-500.0, -1e5, true);
    all_resolved("both damped", planted, &[(-0.5, false), (-500.0, true), (-1e5, true)]);
}

/// Multipliers 1e3, -2, -0.5, 1e-8 and 1e-16 of one cycle.
#[test]
fn nineteen_orders_of_magnitude_at_once() {
    let rate = |multiplier: f64| multiplier.ln() / TAU;
    let (large, small, smallest) = (rate(1e3), rate(1e-8), rate(1e-16));
    let planted = Planted::new(-smallest).decay(-small).decay(-large).turning(rate(0.5), rate(2.0), true);
    let exact = [(large, false), (rate(2.0), true), (rate(0.5), true), (small, false), (smallest, false)];
    all_resolved("wide", planted, &exact);
}

/// The errors of opposite rates cancel in Liouville's sum, which must not be the only judge.
#[test]
fn damping_and_repulsion_at_once() {
    for k in [100.0, 1e3] {
        let planted = Planted::new(1.0).decay(k).decay(-k);
        all_resolved(&format!("{k}"), planted, &[(k, false), (-1.0, false), (-k, false)]);
    }
    let planted = Planted::new(1.0).turning(100.0, -100.0, true);
    all_resolved("turning", planted, &[(100.0, true), (-1.0, false), (-100.0, true)]);
    let planted = Planted::new(1.0).decay(1e5).decay(-500.0);
    all_resolved("more damped", planted, &[(500.0, false), (-1.0, false), (-1e5, false)]);
    let planted = Planted::new(1.0).decay(-1e5);
    all_resolved("repelling alone", planted, &[(1e5, false), (-1.0, false)]);
}

/// Damped on one half of the cycle and repelling on the other.
#[test]
fn a_direction_that_changes_sides_along_the_cycle() {
    for mean in [-0.1, 0.1] {
        let planted = Planted::new(1.0).swaying(mean, 4.0);
        all_resolved("sway", planted, &[(mean, false), (-1.0, false)]);
        let planted = Planted::new(1.0).swaying(mean, 4.0).decay(1e5);
        all_resolved("sway and damping", planted, &[(mean, false), (-1.0, false), (-1e5, false)]);
    }
    let planted = Planted::new(1.0).swaying(-1e4, 0.9e4);
    all_resolved("damped always, unevenly", planted, &[(-1.0, false), (-1e4, false)]);
}

/// Two directions beyond any affordable number of pieces: left out, counted, bounded, and their sum known.
#[test]
fn several_strong_dampings_are_not_resolved_and_said_so() {
    let cases = [
        ("alike", Planted::new(1.0).decay(1e6).decay(1e6), vec![-1.0, -1e6, -1e6], 2),
        ("apart", Planted::new(1.0).decay(30.0).decay(1e5).decay(1e6), vec![-1.0, -30.0, -1e5, -1e6], 2),
        ("uneven", Planted::new(1.0).swaying(-1e5, 0.9e5).swaying(-2e5, 1e5), vec![-1.0, -1e5, -2e5], 2),
        ("turning", Planted::new(1.0).turning(-1e5, -3e5, true).decay(5e5), vec![-1.0, -1e5, -3e5, -5e5], 3),
        ("unstable", Planted::new(1.0).decay(-0.2).decay(1e5).decay(1e6), vec![0.2, -1.0, -1e5, -1e6], 2),
    ];
    for (name, planted, rates, count) in cases {
        for mixed in [false, true] {
            let point = planted.clone().mixed(mixed).describe(ACCURACY).expect("multipliers");
            let kept = rates.len() - count;
            assert_eq!(point.multipliers.len(), kept, "{name} {mixed}: {point:?}");
            check(name, &point, &rates.iter().map(|rate| (*rate, false)).collect::<Vec<_>>());
            let unresolved = point.unresolved.expect("not resolved");
            assert_eq!(unresolved.count, count);
            let (largest, sum) = (TAU * rates[kept], TAU * rates[kept..].iter().sum::<f64>());
            assert!(largest < unresolved.below && unresolved.below < -10.0, "{name} {mixed}: {unresolved:?} {largest}");
            assert!((unresolved.log_sum / sum - 1.0).abs() < ACCURACY, "{name} {mixed}: {unresolved:?} {sum}");
        }
    }
}

/// Contrasts of e^10000 within one cycle are beyond 64-bit numbers in mixed coordinates: refused, not guessed.
#[test]
fn a_side_is_never_guessed() {
    let planted = Planted::new(1.0).swaying(-0.1, 1e4);
    let plain = planted.clone().describe(ACCURACY).expect("multipliers");
    check("plain", &plain, &[(-0.1, false), (-1.0, false)]);
    match planted.mixed(true).describe(ACCURACY) {
        Ok(point) => check("mixed", &point, &[(-0.1, false), (-1.0, false)]),
        Err(fault) => assert_eq!(fault, SpectrumFault::SideUnknown),
    }
}

/// A pair that winds 1e7 times round while the cycle closes once can be neither resolved nor left to a damping scheme.
#[test]
fn an_oscillation_too_fast_is_refused() {
    let fault = Planted::new(1.0).winding(-0.01, 1e7).describe(ACCURACY).expect_err("too fast");
    assert!(matches!(fault, SpectrumFault::Maps(MapsFault::TooStiff(_))), "{fault}");
    let point = Planted::new(1.0).winding(0.01, 1e3 + 0.25).mixed(true).describe(ACCURACY).expect("multipliers");
    // Exact: multipliers exp(2 pi (0.01 ± (1e3 + 1/4) i)), angle pi/2.
    let pair = &point.multipliers[..2];
    assert!(pair.iter().all(|mu| (mu.log_modulus - 0.01 * TAU).abs() < 1e-9), "{pair:?}");
    assert!(pair.iter().all(|mu| (mu.angle.abs() - 0.5 * PI).abs() < 1e-7), "{pair:?}");
    assert_eq!(point.unstable_count, 2);
}
