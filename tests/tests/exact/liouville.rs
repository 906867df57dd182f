//! X10, exact (Liouville's formula): the product of all multipliers is exp of the integral of the divergence.
//!
//! The divergence is written by hand here and integrated by the trapezoidal rule along the found cycle: nothing of the
//! program's own audit is used.

use armilla_tests::{Case, absolute, divergence_integral, settings};

/// One model with its divergence.
struct Run {
    model: &'static str,
    follow: &'static str,
    at: f64,
    divergence: fn(&[f64], f64) -> f64,
}

#[test]
fn multipliers_agree_with_the_divergence() {
    let runs = [
        // mu (1 - x^2).
        Run { model: "vanderpol", follow: "mu", at: 1.0, divergence: |u, mu| mu * (1.0 - u[0] * u[0]) },
        Run { model: "vanderpol", follow: "mu", at: 5.0, divergence: |u, mu| mu * (1.0 - u[0] * u[0]) },
        // a + x - c with a = 0.2.
        Run { model: "roessler", follow: "c", at: 1.0, divergence: |u, c| 0.2 + u[0] - c },
        Run { model: "roessler", follow: "c", at: 3.0, divergence: |u, c| 0.2 + u[0] - c },
        // -(B + 1) + 2 x y - x^2.
        Run { model: "x10", follow: "B", at: 3.0, divergence: |u, b| -(b + 1.0) + 2.0 * u[0] * u[1] - u[0] * u[0] },
        // 2 (lam - b) + 2 (z + d (1 - z^2)) + lam - 2 z with b = 3, d = 0.2.
        Run {
            model: "x5",
            follow: "lam",
            at: 1.9,
            divergence: |u, lam| 2.0 * (lam - 3.0) + 2.0 * (u[2] + 0.2 * (1.0 - u[2] * u[2])) + lam - 2.0 * u[2],
        },
        // Stretching of area: X12 in its plane 2 (1 - 2 r2), across it mu + a x - 2 z with a = 0.7.
        Run {
            model: "x12",
            follow: "mu",
            at: 0.2,
            divergence: |u, mu| 2.0 - 4.0 * (u[0] * u[0] + u[1] * u[1]) + mu + 0.7 * u[0] - 2.0 * u[2],
        },
    ];
    for Run { model, follow, at, divergence } in runs {
        let case = Case::new(model, follow, 1.0);
        let (mut problem, cycle) = case.start(&case.settled(at), settings(1e-10), at);
        let spectrum = problem.spectrum(&cycle).expect("multipliers");
        let sum: f64 = spectrum.multipliers.iter().map(|mu| mu.log_modulus).sum();
        let size: f64 = spectrum.multipliers.iter().map(|mu| mu.log_modulus.abs()).sum();
        let integral = divergence_integral(&problem.profile(&cycle), |state| divergence(state, at));
        // The trivial multiplier is 1: its logarithm adds nothing.
        absolute(&format!("sum of log multipliers of {model} at {at}"), sum, integral, 1e-9 * size.max(1.0));
        assert!(spectrum.trivial_defect < 1e-9, "{spectrum:?}");
        // In the plane the program takes the multiplier from the divergence, and its audit is of maps it does not use.
        assert!(
            problem.profile(&cycle).n_states == 2 || spectrum.liouville_defect < 1e-9 * size.max(1.0),
            "{spectrum:?}"
        );
    }
}
