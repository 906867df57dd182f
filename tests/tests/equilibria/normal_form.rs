//! First Lyapunov coefficients.

use armilla_tests::{event, job};

fn coefficient(note: &str) -> f64 {
    note.rsplit(' ').next().and_then(|number| number.parse().ok()).unwrap_or_else(|| panic!("no coefficient in {note}"))
}

/// Exact, by hand: X1 in the complex form w' = (mu + i) w - w |w|^2 (1 - i k), w = x + i y; with q of length 1 w = sqrt 2 z,
/// so Re c = -2, omega = 1: l1 = -2 for every k. X2: l1 = +2.
#[test]
fn of_circles() {
    for (model, fields, exact) in [
        ("x1", r#"set: {"mu": -0.2, "k": 0.5}"#, -2.0),
        ("x1", r#"set: {"mu": -0.2, "k": 3}"#, -2.0),
        ("x2", r#"set: {"mu": -0.2}"#, 2.0),
    ] {
        let fields = format!(
            r#"{fields}, start: Equilibrium(near: {{"x": 0.01}}), follow: (parameter: "mu", from: -0.5, to: 0.1)"#
        );
        let traced = job(model, &fields);
        let found = coefficient(&event(&traced, "a/hopf1").note);
        assert!((found - exact).abs() < 1e-6, "{model}: {found} for {exact}");
    }
}

/// By another route, with no normal form: along the cycles p - p0 = p2 a^2 + ..., a the amplitude, and the growth of
/// disturbances at rest is sigma' (p - p0), so that Re c = -sigma' p2 a^2/|z|^2. For the Brusselator (A = 1) sigma' = 1/2,
/// x - 1 = 2 Re(z q_x) with |q_x| from the eigenvector by hand: (q_x, q_y) ~ (1, -1 + i), |q_x|^2 = 1/3.
#[test]
fn of_the_brusselator_from_its_cycles() {
    let fields = r#"start: Equilibrium(near: {}), set: {"B": 1.8}, follow: (parameter: "B", from: 1.5, to: 2.2),
                    targets: [2.003, 2.004, 2.005]"#;
    let traced = job("x10", fields);
    let found = coefficient(&event(&traced, "a/hopf1").note);
    // |z|^2 = (spread of x)^2/(2 |q_x|^2); the ratio to B - 2 extrapolated to 0 from three cycles.
    let ratio = |k: usize| {
        let cycle = event(&traced, &format!("a.hopf1/target{k}"));
        let square = cycle.spreads[0].powi(2) / (2.0 / 3.0);
        -0.5 * (cycle.value - 2.0) / square
    };
    // Lagrange's polynomial at 0.
    let limit = 10.0 * ratio(1) - 15.0 * ratio(2) + 6.0 * ratio(3);
    // omega = 1, so l1 = Re c; what the extrapolation leaves is of the third order in B - 2.
    assert!((found - limit).abs() < 1e-6, "{found} for {limit}");
}
