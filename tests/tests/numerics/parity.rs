//! Multipliers on N and on N + 1 intervals: a wrong sign in the interval maps would flip every multiplier for one of
//! them.

use std::f64::consts::TAU;

use armilla_stability::CycleSettings;
use armilla_tests::{Case, multiplier, settings};

fn fixed(intervals: usize, degree: usize) -> CycleSettings {
    let mut settings = CycleSettings { degree, ..settings(1e-9) };
    settings.mesh.fixed = Some(intervals);
    settings
}

/// X3, exact, by hand: multipliers -exp(mu T), -exp(-kap T), both negative; and X12, exp(mu T), exp(-2 T), both positive.
#[test]
fn signs_and_moduli_do_not_depend_on_parity() {
    let twisted = Case::new("x3", "mu", 0.4).with("kap", 0.5).with("om", 1.0);
    let plain = Case::new("x12", "mu", 0.4).with("a", 0.7).with("om", 1.5);
    for degree in [4, 5, 6] {
        for intervals in [40, 41, 42, 43] {
            let (mut problem, cycle) = twisted.start(&twisted.circle(1.0, TAU), fixed(intervals, degree), -0.1);
            assert_eq!(cycle.mesh.len() - 1, intervals);
            let found = problem.spectrum(&cycle).expect("multipliers").multipliers;
            multiplier(&format!("twisted band, first, {intervals}, {degree}"), found[0], (-0.1 * TAU, true), 1e-10);
            multiplier(&format!("twisted band, second, {intervals}, {degree}"), found[1], (-0.5 * TAU, true), 1e-10);
            let period = TAU / 1.5;
            let (mut problem, cycle) = plain.start(&plain.circle(1.0, period), fixed(intervals, degree), 0.2);
            let found = problem.spectrum(&cycle).expect("multipliers").multipliers;
            multiplier(&format!("X12, first, {intervals}, {degree}"), found[0], (0.2 * period, false), 1e-10);
            multiplier(&format!("X12, second, {intervals}, {degree}"), found[1], (-2.0 * period, false), 1e-9);
        }
    }
}
