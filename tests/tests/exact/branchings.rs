//! X12 and X13: `x' = x (1 - r2) - om y`, `y' = y (1 - r2) + om x` and a third state z that branches from z = 0.
//!
//! Exact, by hand: r = 1, period T = 2 pi/om. Along a cycle `(log z)' = mu + a x - z` (X12) or `mu + a x - z^2` (X13)
//! has mean 0, so the mean of z (of z^2) is mu, since that of x is 0. Multipliers: exp(-2 T) from the radius, and across z
//! exp(mu T) for z = 0, exp(-mu T) for X12's other cycle, exp(-2 mu T) for X13's pair.

use std::f64::consts::TAU;

use armilla_record::Point;
use armilla_tests::{Case, absolute, multiplier, relative, settings, walk};

const OM: f64 = 1.5;

/// Follows the cycle through the third state's initial mean `z` over mu from 0.2 to `edge`.
fn followed(name: &str, z: f64, edge: f64) -> Vec<Point> {
    let case = Case::new(name, "mu", 0.5).with("om", OM).with("a", 0.7);
    let mut guess = case.circle(1.0, TAU / OM);
    if z != 0.0 {
        guess = case.settled(0.2);
        guess.values.iter_mut().skip(2).step_by(3).for_each(|value| *value *= z);
    }
    let (mut problem, cycle) = case.start(&guess, settings(1e-9), 0.2);
    let range = (edge.min(0.2), edge.max(0.2));
    let points = walk(&mut problem, cycle, range, (edge - 0.2).signum());
    assert!(points.len() > 3 && points.last().is_some_and(|point| point.value == edge));
    points
}

/// `growth`: log multiplier across z per mu and period.
fn check(points: &[Point], growth: f64) {
    let period = TAU / OM;
    for point in points {
        relative(&format!("period at mu = {}", point.value), point.period, period, 1e-10);
        // Relative to the range, which is 2.
        absolute("radius", point.maxima[0], 1.0, 2e-9);
        let across = growth * point.value * period;
        multiplier("multiplier across z", point.multipliers[0], (across, false), 1e-10);
        multiplier("multiplier of the radius", point.multipliers[1], (-2.0 * period, false), 1e-10);
        assert_eq!(point.unstable_count, usize::from(across > 0.0));
    }
}

#[test]
fn transcritical_cycle_at_rest_in_z() {
    let points = followed("x12", 0.0, 0.5);
    check(&points, 1.0);
    assert!(points.iter().all(|point| point.maxima[2] == 0.0 && point.minima[2] == 0.0));
    // Through the crossing: stable for mu < 0.
    check(&followed("x12", 0.0, -0.3), 1.0);
}

#[test]
fn transcritical_other_cycle() {
    let points = followed("x12", 1.0, 0.5);
    check(&points, -1.0);
    points.iter().for_each(|point| absolute("mean of z", point.means[2], point.value, 1e-9));
}

#[test]
fn pitchfork_cycle_at_rest_in_z() {
    check(&followed("x13", 0.0, 0.5), 1.0);
}

#[test]
fn pitchfork_pair() {
    for sign in [1.0, -1.0] {
        let points = followed("x13", sign, 0.5);
        check(&points, -2.0);
        for point in &points {
            assert!(point.means[2] * sign > 0.0);
            absolute("mean of z^2", point.spreads[2].powi(2) + point.means[2].powi(2), point.value, 1e-9);
        }
    }
}
