//! Orders of convergence of Gauss collocation: m + 1 between mesh points, 2 m at mesh points, in the period, in the
//! multipliers and in thresholds (de Boor & Swartz 1973, SIAM J. Numer. Anal. 10:582; from memory).

use armilla_stability::CriticalKind;
use armilla_tests::{Case, Orders, Uniform, VanDerPol, settings};

/// Van der Pol at mu = 1, independent (single shooting with a Taylor integrator in 113-bit arithmetic).
const PERIOD: f64 = 6.663_286_859_323_130;
/// Largest x there, same source: (AMPLITUDE, 0) is a point of the cycle.
const AMPLITUDE: f64 = 2.008_619_860_874_843;
/// Log multiplier there, same source.
const LOG_MULTIPLIER: f64 = -7.058_932_808_798_959;

/// Errors at mesh points and between them, against the Taylor series integrator started on the known point of the cycle.
/// The phase of a collocated cycle is its own: it is read off at the first mesh point and taken out.
fn profile_errors(solved: &Uniform) -> (f64, f64) {
    let profile = solved.profile();
    let on_cycle = VanDerPol::new(1.0, [AMPLITUDE, 0.0]);
    let start = profile.node(0);
    let mut phase = nearest_phase(on_cycle, start);
    // Newton's method for the time at which the cycle passes nearest to the first mesh point.
    for _ in 0..8 {
        let [x, y] = on_cycle.after(phase).state;
        let flow = [y, (1.0 - x * x) * y - x];
        let along = (start[0] - x) * flow[0] + (start[1] - y) * flow[1];
        phase += along / (flow[0] * flow[0] + flow[1] * flow[1]);
    }
    let mut evaluator = profile.evaluator();
    let mut found = [0.0; 2];
    let mut at = on_cycle.after(phase);
    let (mut at_mesh, mut between) = (0.0f64, 0.0f64);
    // Six equal parts an interval: the local error's polynomial does not vanish on all of them.
    const PARTS: usize = 6;
    for pair in profile.mesh.windows(2) {
        for part in 1..=PARTS {
            let (before, now) = ((part - 1) as f64 / PARTS as f64, part as f64 / PARTS as f64);
            // True time, not the solution's own scaled one: the error of the period is part of what is measured.
            at = at.after((pair[1] - pair[0]) * (now - before) * PERIOD);
            evaluator.at(pair[0] + (pair[1] - pair[0]) * now, &mut found);
            let error = (found[0] - at.state[0]).abs().max((found[1] - at.state[1]).abs());
            if part == PARTS { at_mesh = at_mesh.max(error) } else { between = between.max(error) }
        }
    }
    (at_mesh, between)
}

/// Time after the known point at which the cycle is nearest to a state, on a grid fine enough for Newton's method.
fn nearest_phase(on_cycle: VanDerPol, state: &[f64]) -> f64 {
    const GRID: usize = 200;
    let mut at = on_cycle;
    let mut best = (f64::INFINITY, 0.0);
    for k in 0..GRID {
        let distance = (at.state[0] - state[0]).hypot(at.state[1] - state[1]);
        if distance < best.0 {
            best = (distance, k as f64 * PERIOD / GRID as f64);
        }
        at = at.after(PERIOD / GRID as f64);
    }
    best.1
}

#[test]
fn van_der_pol_profile_period_and_multiplier() {
    let case = Case::new("vanderpol", "mu", 1.0);
    let (mut problem, cycle) = case.start(&case.settled(1.0), settings(1e-10), 1.0);
    let guess = problem.profile(&cycle);
    assert!(problem.spectrum(&cycle).is_ok());
    // Superconvergent errors meet roundoff on meshes on which the others are not yet asymptotic: two lists.
    let lists = [
        (3, [48, 80, 120, 192], [96, 192, 384]),
        (4, [24, 32, 44, 60], [80, 160, 320]),
        (5, [34, 40, 47, 55], [60, 120, 240]),
    ];
    for (degree, coarse, fine) in lists {
        let [mut inside, mut at_mesh, mut period, mut multiplier] = std::array::from_fn(|_| Orders::default());
        let solve = |intervals: usize| {
            let mut solved = Uniform::new(&case, &guess, 1.0, (degree, intervals));
            solved.hold_parameter();
            solved
        };
        fine.into_iter().for_each(|intervals| inside.push(intervals, profile_errors(&solve(intervals)).1));
        for intervals in coarse {
            let solved = solve(intervals);
            at_mesh.push(intervals, profile_errors(&solved).0);
            period.push(intervals, solved.at.period - PERIOD);
            multiplier.push(intervals, solved.multipliers()[0].log_modulus - LOG_MULTIPLIER);
        }
        let m = degree as f64;
        inside.check(&format!("degree {degree}, inside"), m + 1.0, 0.2);
        at_mesh.check(&format!("degree {degree}, mesh points"), 2.0 * m, 0.5);
        period.check(&format!("degree {degree}, period"), 2.0 * m, 0.5);
        multiplier.check(&format!("degree {degree}, log multiplier"), 2.0 * m, 0.5);
    }
}

/// Roessler's first doubling, independent (single shooting with a Taylor integrator in 113-bit arithmetic).
#[test]
fn first_doubling_of_roessler() {
    const DOUBLING: f64 = 2.832_445_027_862_539;
    let case = Case::new("roessler", "c", 1.0);
    let (mut problem, cycle) = case.start(&case.settled(2.8), settings(1e-9), 2.8);
    let guess = problem.profile(&cycle);
    assert!(problem.spectrum(&cycle).is_ok());
    for (degree, meshes) in [(3, [48, 80, 120, 192]), (4, [24, 32, 42, 54]), (5, [20, 24, 28, 32])] {
        let mut threshold = Orders::default();
        for intervals in meshes {
            let mut solved = Uniform::new(&case, &guess, 2.83, (degree, intervals));
            solved.hold_parameter();
            solved.threshold(CriticalKind::Doubling);
            threshold.push(intervals, solved.at.parameter - DOUBLING);
        }
        threshold.check(&format!("degree {degree}, first doubling of Roessler"), 2.0 * degree as f64, 0.5);
    }
}

/// The fold that opens Roessler's three-turn window, same source.
#[test]
fn fold_of_the_three_turn_window() {
    const FOLD: f64 = 5.185_085_784_084_437;
    let case = Case::new("roessler", "c", 1.0);
    let (mut problem, cycle) = case.start(&case.settled(5.25), settings(1e-9), 5.25);
    let near = armilla_tests::station(&mut problem, &cycle, 5.19, None);
    let guess = problem.profile(&near.point);
    for (degree, meshes) in [(3, [160, 320, 640]), (4, [80, 120, 180]), (5, [60, 80, 110])] {
        let mut threshold = Orders::default();
        for intervals in meshes {
            let mut solved = Uniform::new(&case, &guess, 5.19, (degree, intervals));
            solved.hold_parameter();
            solved.threshold(CriticalKind::Fold);
            threshold.push(intervals, solved.at.parameter - FOLD);
        }
        threshold.check(&format!("degree {degree}, fold of the three-turn window"), 2.0 * degree as f64, 0.5);
    }
}
