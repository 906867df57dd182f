//! Equilibria through the public face of the crate. Exact cases by hand.

use armilla_follow::{Follower, Orientation, Outcome, Problem, Settings};
use armilla_model::Model;
use armilla_stability::{
    Crossing, CycleSettings, EquilibriumPoint, EquilibriumProblem, EquilibriumSpec, RestEvent, RestFault, birth_row,
};

fn spec(model: &str, width: f64) -> EquilibriumSpec {
    let model = Model::parse(model, "test.model.ron").expect("a model");
    let typical = model.begin().iter().map(|value| value.abs()).collect();
    EquilibriumSpec { field: model.field(), parameters: model.values(), free: 0, typical, parameter_scale: width }
}

/// x' = p x - y - x r^2, y' = p y + x - y r^2, z' = p^2 - z: Hopf at p = 0 with frequency 1, l1 = -2 (by hand, see below).
const CIRCLE: &str = r#"(
    states: {"x": (begin: 0.3), "y": (begin: 0.3), "z": (begin: 0.2)},
    parameters: {"p": (value: -0.5)},
    rates: {"x": "p*x - y - x*(x^2 + y^2)", "y": "p*y + x - y*(x^2 + y^2)", "z": "p^2 - z"},
)"#;

/// Newton's method meets the exact equilibrium, and following it the exact line z = p^2 with eigenvalues p ± i and -1.
#[test]
fn a_line_of_equilibria() {
    let (mut problem, start) = EquilibriumProblem::start(spec(CIRCLE, 2.0), &[0.3, 0.3, 0.2], -0.5).expect("a start");
    assert!(start.state[0].abs() < 1e-14 && (start.state[2] - 0.25).abs() < 1e-14, "{start:?}");
    let tangent = problem.tangent(&start, Orientation::Parameter(1.0)).expect("a tangent");
    assert!((tangent.state[2] / tangent.parameter + 1.0).abs() < 1e-12, "dz/dp = 2 p: {tangent:?}");
    let settings = Settings::new((-0.5, 0.5));
    let mut follower = Follower::start_along(&mut problem, start, tangent, settings).expect("a walk");
    while let Outcome::Step(_) = follower.step() {
        let (problem, _, station) = follower.parts();
        let (point, count) = (station.point.clone(), station.watch.unstable_count);
        assert!((point.state[2] - point.parameter.powi(2)).abs() < 1e-13, "{point:?}");
        let row = problem.describe(&point, 0.0).expect("eigenvalues");
        assert_eq!(count, if point.parameter > 0.0 { 2 } else { 0 });
        let mut exact: [(f64, f64); 3] = [(point.parameter, 1.0), (point.parameter, -1.0), (-1.0, 0.0)];
        exact.sort_by(|a, b| b.0.total_cmp(&a.0).then(b.1.total_cmp(&a.1)));
        for (found, (re, im)) in row.eigenvalues.iter().zip(exact) {
            assert!((found.re - re).abs() < 1e-13 && (found.im - im).abs() < 1e-13, "{found:?} for {re} {im}");
        }
        assert!(row.liouville_defect < 1e-14 && row.profile_error < 1e-13, "{row:?}");
    }
}

/// The Hopf point from a guess off in everything; the normal form by hand: with w = x + i y, w' = (p + i) w - w |w|^2, and q of
/// length 1, w = sqrt 2 z: c = -2. The cycle of radius r has p = r^2, period 2 pi, one multiplier exp(-4 pi r^2).
#[test]
fn a_hopf_point_with_its_cycles() {
    let (mut problem, _) = EquilibriumProblem::start(spec(CIRCLE, 2.0), &[0.0; 3], -0.5).expect("a start");
    let guess = EquilibriumPoint { state: vec![0.02, -0.01, 0.03], parameter: -0.1 };
    let hopf = problem.solve(RestEvent::Hopf, guess, 0.8).expect("a Hopf point");
    assert!(hopf.point.parameter.abs() <= hopf.error && hopf.error < 1e-13, "{hopf:?}");
    let (period, error) = hopf.period().expect("a period");
    assert!((period - std::f64::consts::TAU).abs() <= error && error < 1e-12, "{period} {error:e}");
    let form = problem.hopf_form(&hopf).expect("a normal form");
    assert!(form.is_sure && (form.l1 + 2.0).abs() < 1e-12, "{form:?}");
    let row = birth_row(&mut problem, &hopf).expect("eigenvalues");
    // exp(-2 pi) of z, and 1 twice, of which one is the trivial one.
    assert_eq!((row.multipliers.len(), row.multipliers[0].log_modulus), (2, 0.0));
    assert!((row.multipliers[1].log_modulus + std::f64::consts::TAU).abs() < 1e-12);
    for form in [Some(&form), None] {
        let mut born = problem.cycles(&hopf, form, CycleSettings::new(1e-9)).expect("a first cycle");
        let first = born.problem.describe(&born.point, 1, 0.0).expect("multipliers");
        let radius = first.maxima[0];
        assert!((first.value - radius * radius).abs() < 1e-9 && first.value > 0.0, "{first:?}");
        assert!((first.period - std::f64::consts::TAU).abs() < 1e-9);
        let exact = -4.0 * std::f64::consts::PI * first.value;
        assert!((first.multipliers[0].log_modulus - exact).abs() < 1e-8, "{first:?} for {exact}");
        assert!(born.problem.motion(&born.birth) < 1e-13, "the birth does not move");
    }
}

/// x' = x (p - x): both branches through 0, the other one x = p, from stations on either side.
#[test]
fn a_crossing_is_decided_and_entered() {
    let model = r#"(states: {"x": (begin: 0.0), "y": (begin: 1.0)}, parameters: {"p": (value: -0.5)},
                    rates: {"x": "x*(p - x)", "y": "x - y"})"#;
    let (mut problem, start) = EquilibriumProblem::start(spec(model, 1.0), &[0.0, 0.0], -0.5).expect("a start");
    let settings = Settings { initial: 0.6, longest: 2.0, ..Settings::new((-0.5, 0.5)) };
    let mut follower = Follower::start(&mut problem, start, 1.0, settings).expect("a walk");
    assert!(matches!(follower.step(), Outcome::Step(_)));
    let (problem, before, after) = follower.parts();
    let (before, after) = (before.expect("a step").clone(), after.clone());
    let is_beyond =
        |station: &armilla_follow::Station<_, _>| station.watch.unstable_count != before.watch.unstable_count;
    let located = problem.locate(RestEvent::Branching, (&before, &after), &is_beyond).expect("a branching");
    assert!(located.point.parameter.abs() <= located.error && located.error < 1e-13, "{located:?}");
    let form = problem.branching_form(&located, (&before, &after)).expect("two branches");
    assert_eq!(form.crossing, Crossing::Transcritical);
    assert!((form.other.state[0] / form.other.parameter - 1.0).abs() < 1e-10, "{form:?}");
    for direction in [form.other.clone(), form.other.reversed()] {
        let (point, _, _) = problem.enter(&located.point, &direction).expect("the other branch");
        assert!((point.state[0] - point.parameter).abs() < 1e-12 && point.parameter != 0.0, "{point:?}");
        assert!(point.parameter * direction.parameter > 0.0);
    }
}

/// Between x0 = 0.4 and the root x = -1.3247... of x^3 - x + 1 the derivative 3 x^2 - 1 vanishes twice: a damped iteration stands
/// at x = 0.577, and the way round it finds the root (by hand, Cardano's formula).
#[test]
fn a_start_beyond_a_singular_place() {
    let model = r#"(states: {"x": (begin: 0.4)}, parameters: {"p": (value: 1)}, rates: {"x": "x^3 - x + p"})"#;
    let (_, found) = EquilibriumProblem::start(spec(model, 1.0), &[0.7], 1.0).expect("a root");
    let root = (69f64.sqrt() / 18.0 + 0.5).cbrt() + (0.5 - 69f64.sqrt() / 18.0).cbrt();
    assert!((found.state[0] + root).abs() < 1e-14, "{found:?} for {}", -root);
}

/// No root: x^2 + 1; no isolated root: a rate of zeros.
#[test]
fn starts_without_an_equilibrium() {
    let none = spec(r#"(states: {"x": (begin: 1.0)}, parameters: {"p": (value: 1)}, rates: {"x": "x^2 + p"})"#, 1.0);
    let fault = EquilibriumProblem::start(none, &[1.0], 1.0).err();
    assert!(matches!(fault, Some(RestFault::NotConverged { .. } | RestFault::Singular { .. })), "{fault:?}");
    let family = spec(
        r#"(states: {"x": (begin: 1.0), "y": (begin: 2.0)}, parameters: {"p": (value: 1)},
            rates: {"x": "p*(y - x)", "y": "x - y"})"#,
        1.0,
    );
    let fault = EquilibriumProblem::start(family, &[1.0, 2.0], 1.0).err();
    assert!(matches!(fault, Some(RestFault::Singular { .. })), "{fault:?}");
}
