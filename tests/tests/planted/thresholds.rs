//! Folds and doublings met on a walk through a random range.

use armilla_follow::{Follower, Outcome, Settings};
use armilla_stability::{CriticalKind, CyclePoint, CycleProblem, Located, WATCH_DOUBLING, WATCH_FOLD};
use armilla_tests::{Beneath, Ratios, Sheet};

use crate::draw::{Draw, WIDTH, band, turning, two_circles};
use crate::judge::{Wanted, judge};

/// Cases of each system.
const CASES: u64 = 30;

/// The first event of a kind on the walk from `point` towards it.
fn first(
    problem: &mut CycleProblem,
    point: CyclePoint,
    case: &Draw,
    (from, to): (f64, f64),
    kind: CriticalKind,
) -> Located {
    let index = if kind == CriticalKind::Fold { WATCH_FOLD } else { WATCH_DOUBLING };
    let range = (from.min(to), from.max(to));
    let direction = (to - from).signum();
    let mut follower = Follower::start(problem, point, direction, Settings::new(range))
        .unwrap_or_else(|_| panic!("{}: no walk starts", case.name));
    while let Outcome::Step(step) = follower.step() {
        if step.crossings.iter().any(|crossing| crossing.index == index) {
            let (problem, before, after) = follower.parts();
            let (before, after) = (before.expect("a step was made").clone(), after.clone());
            return problem
                .locate(kind, index, &before, &after)
                .unwrap_or_else(|fault| panic!("{}: not located, {fault:?}", case.name));
        }
    }
    panic!("{}: no event between {from} and {to}, the walk ends by {:?}", case.name, follower.end());
}

/// Walks over the threshold, from a random place on one side to a random place on the other.
fn located(case: &mut Draw, kind: CriticalKind) -> (CycleProblem, Located) {
    let threshold = case.planted.beneath.threshold();
    // A fold is reached from above only; a doubling from either side.
    let side = if kind == CriticalKind::Fold || case.random.coin() { 1.0 } else { -1.0 };
    let share = case.random.between(0.2, 0.6);
    let from = case.planted.value(threshold + side * share * WIDTH);
    let to = case.planted.value(threshold - side * (1.0 - share) * WIDTH);
    let (mut problem, cycle) = case.start(Sheet::First, from);
    let found = first(&mut problem, cycle, case, (from, to), kind);
    (problem, found)
}

/// Place and period of a threshold within their errors.
fn judge_threshold(case: &Draw, found: &Located, ratios: &mut Ratios) {
    let planted = &case.planted;
    let exact = planted.value(planted.beneath.threshold());
    ratios.add("threshold", &case.name, ((found.point.unknowns.parameter - exact).abs(), found.error));
    let period = planted.exact(Sheet::First, exact).period;
    ratios.add("threshold's period", &case.name, ((found.point.unknowns.period - period).abs(), found.period_error));
}

/// X2 folds at mu = -1/4, and both circles exist above: b < 0 where the parameter rises with mu.
#[test]
fn every_fold_is_where_it_was_planted() {
    let mut ratios = Ratios::default();
    for seed in 10_000..10_000 + CASES {
        let mut case = Draw::new(seed, two_circles);
        let (mut problem, found) = located(&mut case, CriticalKind::Fold);
        judge_threshold(&case, &found, &mut ratios);
        let b = problem.fold_form(&found).unwrap_or_else(|| panic!("{}: no normal form", case.name));
        assert!(b * case.planted.unit < 0.0, "{}: b = {b}", case.name);
    }
    ratios.check();
}

/// Doubling, its criticality, and the doubled cycle entered from it.
fn judge_doubling(case: &mut Draw, ratios: &mut Ratios) {
    let (mut problem, found) = located(case, CriticalKind::Doubling);
    judge_threshold(case, &found, ratios);
    let form = problem.doubling_form(&found).unwrap_or_else(|| panic!("{}: no normal form", case.name));
    let subcritical = matches!(case.planted.beneath, Beneath::Turning(g, _) if g > 0.0);
    assert_eq!(form.c > 0.0, subcritical, "{}: {form:?}", case.name);
    // The exponent beneath is mu itself, in the time of the clock.
    let slope = case.planted.clock / case.planted.unit;
    assert!((form.slope / slope - 1.0).abs() < 1e-6, "{}: {form:?} for {slope}", case.name);
    let mut doubled = problem.double(&found, Some(&form)).unwrap_or_else(|fault| panic!("{}: {fault}", case.name));
    let value = doubled.point.unknowns.parameter;
    let side = case.planted.mu(value) * if subcritical { -1.0 } else { 1.0 };
    assert!(side > 0.0, "{}: born on the wrong side, at mu = {}", case.name, case.planted.mu(value));
    let wanted = Wanted { name: &case.name, planted: &case.planted, sheet: Sheet::Doubled };
    judge(&mut doubled.problem, &doubled.point, wanted, ratios);
}

#[test]
fn every_doubling_is_where_it_was_planted() {
    let mut ratios = Ratios::default();
    for seed in 11_000..11_000 + CASES {
        judge_doubling(&mut Draw::new(seed, band), &mut ratios);
    }
    for seed in 12_000..12_000 + CASES {
        judge_doubling(&mut Draw::new(seed, turning), &mut ratios);
    }
    ratios.check();
}
