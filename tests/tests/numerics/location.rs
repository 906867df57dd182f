//! Location of a fold and of doublings from brackets of 1e-2 in the parameter.

use std::f64::consts::TAU;

use armilla_collocation::Report;
use armilla_record::Profile;
use armilla_stability::{CriticalKind, CyclePoint, CycleProblem, CycleSettings, Located, WATCH_DOUBLING, WATCH_FOLD};
use armilla_tests::{Case, Uniform, absolute, settings, station, stations};

/// Most Newton iterations from a bracket of 1e-2.
const MOST: usize = 6;

/// Residuals and corrections must fall quadratically, `c_(k+1) <= C c_k^2`, until they meet the floor of roundoff. C is a
/// property of the problem: second derivative over smallest singular value, of order 1 for cycles of size 1.
fn check_quadratic(what: &str, report: &Report) {
    const C: f64 = 10.0;
    const FLOOR: f64 = 1e-11;
    let shown = |values: &[f64]| values.iter().map(|value| format!("{value:.1e}")).collect::<Vec<_>>().join(" ");
    let (residuals, corrections) = (shown(&report.closing_residuals), shown(&report.corrections));
    eprintln!("{what}: {} iterations, residuals {residuals}, corrections {corrections}", report.iterations);
    assert!(report.iterations <= MOST, "{what}: {report:?}");
    for values in [&report.closing_residuals, &report.corrections] {
        for pair in values.windows(2) {
            assert!(pair[1].abs() <= (C * pair[0] * pair[0]).max(FLOOR), "{what}: {report:?}");
        }
    }
}

/// Newton's method for a doubling from an end of the bracket instead of its secant point, which is too good for the order
/// to show.
fn check_from_the_end(case: &Case, (guess, at): (&Profile, f64), wanted: f64) {
    let mut solved = Uniform::new(case, guess, at, (6, 48));
    solved.hold_parameter();
    let report = solved.threshold(CriticalKind::Doubling);
    let what = format!("{} from {at}", case.model.title());
    check_quadratic(&what, &report);
    absolute(&what, solved.at.parameter, wanted, 1e-10);
    assert_order_shows(&what, &report);
}

#[track_caller]
fn assert_order_shows(what: &str, report: &Report) {
    let above = report.corrections.iter().filter(|correction| **correction > 1e-9).count();
    assert!(above >= 2, "{what}: two corrections above roundoff are needed: {report:?}");
}

fn located(problem: &mut CycleProblem, guess: &CyclePoint, bracket: (f64, f64), kind: CriticalKind) -> Located {
    let index = if kind == CriticalKind::Fold { WATCH_FOLD } else { WATCH_DOUBLING };
    let (before, after) = stations(problem, guess, bracket);
    let signs = (before.watch.values[index].value, after.watch.values[index].value);
    assert!(signs.0 * signs.1 < 0.0, "{bracket:?} brackets nothing: {signs:?}");
    let found = problem.locate(kind, index, &before, &after).expect("located");
    assert_eq!(found.halvings, 0, "Newton's method must do without the safety net");
    found
}

/// Three brackets of 1e-2 on two meshes: quadratic each time, one value.
fn check_doubling(case: &Case, start: (f64, &Profile), wanted: f64) {
    let meshes: [CycleSettings; 2] = [settings(1e-9), settings(1e-10)];
    let mut values = Vec::new();
    for settings in meshes {
        let (mut problem, cycle) = case.start(start.1, settings, start.0);
        for share in [0.5, 0.2, 0.9] {
            let bracket = (wanted - 1e-2 * share, wanted + 1e-2 * (1.0 - share));
            let found = located(&mut problem, &cycle, bracket, CriticalKind::Doubling);
            let what = format!("{} from {bracket:.4?}, {} intervals", case.model.title(), cycle.mesh.len() - 1);
            check_quadratic(&what, &found.report);
            absolute(&what, found.point.unknowns.parameter, wanted, 1e-10);
            values.push(found.point.unknowns.parameter);
        }
    }
    let spread = values.iter().fold(0.0f64, |spread, value| spread.max((value - values[0]).abs()));
    eprintln!("{}: spread of six locations {spread:.1e}", case.model.title());
    assert!(spread <= 1e-10, "{values:?}");
}

/// Exact, by hand: mu = 0.
#[test]
fn doubling_of_the_twisted_band() {
    let case = Case::new("x3", "mu", 0.4).with("kap", 0.5).with("om", 1.0);
    check_doubling(&case, (-0.01, &case.circle(1.0, TAU)), 0.0);
    check_from_the_end(&case, (&case.circle(1.0, TAU), -0.01), 0.0);
}

/// Independent: single shooting with a Taylor integrator in 113-bit arithmetic.
#[test]
fn first_doubling_of_roessler() {
    let case = Case::new("roessler", "c", 3.2);
    check_doubling(&case, (2.82, &case.settled(2.82)), 2.832_445_027_862_539);
    check_from_the_end(&case, (&case.settled(2.8225), 2.8225), 2.832_445_027_862_539);
}

/// Exact, by hand: X2 folds at mu = -1/4. A bracket here has one end on either circle.
#[test]
fn fold_of_two_circles() {
    let case = Case::new("x2", "mu", 0.9);
    let mut values = Vec::new();
    for accuracy in [1e-9, 1e-11] {
        // r2 of the ends; mu = r2^2 - r2 lies 1e-2 to 2.5e-3 above the fold.
        for (inner, outer) in [(0.4, 0.6), (0.45, 0.6), (0.4, 0.55f64)] {
            let start = radius_to_mu(outer);
            let (mut problem, cycle) = case.start(&case.circle(outer.sqrt(), TAU), settings(accuracy), start);
            let (_, small) = case.start(&case.circle(f64::sqrt(inner), TAU), settings(accuracy), radius_to_mu(inner));
            let mut before = station(&mut problem, &cycle, start, None);
            // Downwards, towards the fold and around it.
            let mut down = before.tangent.clone();
            down.row.nodes.iter_mut().for_each(|value| *value = -*value);
            (down.row.period, down.row.parameter) = (-down.row.period, -down.row.parameter);
            before.tangent = down;
            before.watch.values[WATCH_FOLD].value = -before.watch.values[WATCH_FOLD].value;
            let mut after = station(&mut problem, &small, radius_to_mu(inner), Some(&before.tangent));
            after.distance = armilla_follow::Problem::distance(&problem, &before.point, &after.point);
            let found = problem.locate(CriticalKind::Fold, WATCH_FOLD, &before, &after).expect("located");
            assert_eq!(found.halvings, 0);
            let what = format!("fold of X2 from r2 = {outer} and {inner}, {} intervals", cycle.mesh.len() - 1);
            check_quadratic(&what, &found.report);
            assert_order_shows(&what, &found.report);
            absolute(&what, found.point.unknowns.parameter, -0.25, 1e-10);
            values.push(found.point.unknowns.parameter);
        }
    }
    let spread = values.iter().fold(0.0f64, |spread, value| spread.max((value - values[0]).abs()));
    assert!(spread <= 1e-10, "{values:?}");
}

/// mu of the circle whose radius has this square.
fn radius_to_mu(square: f64) -> f64 {
    square * (square - 1.0)
}
