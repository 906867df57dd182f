//! The number of intervals: against what the error formula predicts, with the accuracy.

use std::f64::consts::TAU;

use armilla_stability::CycleSettings;
use armilla_tests::{Case, branch, job, settings};

/// Largest |P| on [0, 1], `P(s) = (1/m!) Int_0^s Prod (x - rho_l) dx` over the Gauss points.
///
/// By hand: the product is the shifted Legendre polynomial over its leading coefficient, `m!^2/(2m)! P_m(2x - 1)`, and
/// `(2m+1) Int P_m = P_(m+1) - P_(m-1)`. The largest value is sampled finely; Gauss points themselves are not used.
fn error_constant(degree: usize) -> f64 {
    let factorial = |k: usize| (1..=k).map(|i| i as f64).product::<f64>();
    let legendre = |k: usize, x: f64| {
        let (mut before, mut now) = (1.0, x);
        for j in 1..k {
            (before, now) = (now, ((2 * j + 1) as f64 * x * now - j as f64 * before) / (j + 1) as f64);
        }
        if k == 0 { 1.0 } else { now }
    };
    let largest = (0..=10_000)
        .map(|i| -1.0 + i as f64 / 5000.0)
        .map(|x| (legendre(degree + 1, x) - legendre(degree - 1, x)).abs())
        .fold(0.0, f64::max);
    // dx = dy/2 from [0, 1] to [-1, 1].
    factorial(degree) / factorial(2 * degree) * largest / (2.0 * (2 * degree + 1) as f64)
}

fn intervals(case: &Case, settings: CycleSettings, radius: f64, at: f64) -> usize {
    let (_, cycle) = case.start(&case.circle(radius, TAU), settings, at);
    cycle.mesh.len() - 1
}

/// X1 is a circle: in scaled time its (m+1)-th derivative has modulus (2 pi)^(m+1) r, half that relative to the range 2 r, so
/// the error `C_P h^(m+1) (2 pi)^(m+1)/2` (de Boor 1973) meets the accuracy with N = 2 pi (C_P/(2 accuracy))^(1/(m+1)).
#[test]
fn a_circle_takes_as_many_intervals_as_predicted() {
    let case = Case::new("x1", "mu", 1.0).with("k", 0.5);
    for degree in 3..=8 {
        let predicted = TAU * (error_constant(degree) / 2e-9).powf(1.0 / (degree as f64 + 1.0));
        let settings = settings(1e-9).with_degree(degree);
        // Fewer than the least number of intervals are never taken, whatever the prediction.
        let predicted = predicted.max(settings.mesh.fewest as f64);
        let found = intervals(&case, settings, 0.5, 0.25) as f64;
        eprintln!("degree {degree}: {found} intervals, predicted {predicted:.1}");
        assert!(found <= 2.0 * predicted && predicted <= 2.0 * found, "degree {degree}: {found} for {predicted:.1}");
    }
}

/// N grows with the accuracy as its (m+1)-th root predicts, and shrinks again: each run starts from the other's mesh.
#[test]
fn intervals_follow_the_accuracy() {
    let case = Case::new("vanderpol", "mu", 1.0);
    let guess = case.settled(2.0);
    let mut counts = Vec::new();
    for accuracy in [1e-5, 1e-7, 1e-9, 1e-11] {
        let (mut problem, cycle) = case.start(&guess, settings(accuracy).with_degree(6), 2.0);
        counts.push(cycle.mesh.len() - 1);
        let error = problem.describe(&cycle, 1, 0.0).expect("multipliers").profile_error;
        assert!(error <= accuracy, "{error:e} for {accuracy:e}");
    }
    eprintln!("intervals for 1e-5, 1e-7, 1e-9, 1e-11: {counts:?}");
    let order = 6.0 + 1.0;
    for pair in counts.windows(2) {
        let (found, wanted) = (pair[1] as f64 / pair[0] as f64, 1e2f64.powf(1.0 / order));
        assert!(found > 1.0 && found < wanted * 1.5 && found > wanted / 1.5, "{counts:?}: {found} for {wanted}");
    }
    // From the finest mesh back to the coarsest accuracy, the degree free again.
    let (fine, cycle) = case.start(&guess, settings(1e-11), 2.0);
    let (_, coarse) = case.start(&fine.profile(&cycle), settings(1e-5), 2.0);
    assert!(coarse.mesh.len() - 1 <= counts[0] * 2, "{} for {counts:?}", coarse.mesh.len() - 1);
}

/// Along a branch the mesh grows where the cycle sharpens and shrinks where it softens.
#[test]
fn intervals_follow_the_branch() {
    let traced = job("vanderpol", r#"start: Settle(at: {"mu": 2.0}), follow: (parameter: "mu", from: 0.1, to: 6.0)"#);
    let a = branch(&traced, "a");
    let (first, last) = (&a.points[0], &a.points[a.points.len() - 1]);
    assert!(last.intervals > 2 * first.intervals, "{} to {}", first.intervals, last.intervals);
    assert!(a.points.iter().all(|point| point.profile_error <= 1e-9));
}
