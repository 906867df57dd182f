//! Two branches that a longer stride confuses: the program stays on its own.

use std::f64::consts::TAU;

use armilla_follow::{Closing, Follower, Orientation, Outcome, Problem, Settings, Station};
use armilla_record::EventKind;
use armilla_stability::{CriticalKind, CyclePoint, CycleProblem, CycleTangent, WATCH_DOUBLING};
use armilla_tests::{Case, branch, job, settings, station, stations};

use crate::account::{adds_up, thresholds};

/// Radius minus 2 of a point on a circle.
fn height(point: &armilla_record::Point) -> f64 {
    point.maxima[0] - 2.0
}

/// Where Newton's method lands from a prediction of a stride, without any guard.
fn raw(problem: &mut CycleProblem, from: &Station<CyclePoint, CycleTangent>, stride: f64) -> Option<CyclePoint> {
    let prediction = problem.advance(&from.point, &from.tangent, stride);
    let closing = Closing::Component { from: &from.point, direction: &from.tangent, amount: stride };
    problem.correct(&prediction, closing).ok().map(|corrected| corrected.point)
}

fn radius(problem: &CycleProblem, point: &CyclePoint) -> f64 {
    problem.profile(point).extremes()[0].1 - 2.0
}

/// The long strides that the tests below allow do land elsewhere where nothing guards them.
#[test]
fn the_bare_corrector_is_confused_by_long_strides() {
    // On the upper branch of the hyperbola, before its turn: straight on lies the lower one.
    let gap = 1e-3;
    let case = Case::new("sheet", "p", 1.6).with("hyperbola", 1.0).with("gap", gap * gap);
    let (mut problem, start) = case.start(&case.circle(2.1, TAU), settings(1e-9), -0.1);
    let from = station(&mut problem, &start, -0.1, None);
    let landed = raw(&mut problem, &from, 0.15).expect("converges");
    assert!(radius(&problem, &landed) < -0.05, "{}", radius(&problem, &landed));
    // Of three parallel branches, from the uppermost: some of these strides land on each of the others.
    let gap = 1e-2;
    let case = Case::new("sheet", "p", 2.0).with("bundle", 1.0).with("delta", gap).with("k", 2.0 / (gap * gap));
    let height = |p: f64| 2.0 + 0.3 * (3.0 * p).sin();
    let (mut problem, start) = case.start(&case.circle(height(-0.2) + gap, TAU), settings(1e-9), -0.2);
    let from = station(&mut problem, &start, -0.2, None);
    let mut met = [false; 3];
    for k in 1..60 {
        let Some(landed) = raw(&mut problem, &from, 0.01 * f64::from(k)) else { continue };
        let offset = (radius(&problem, &landed) + 2.0 - height(landed.unknowns.parameter)) / gap;
        met[(offset.round() + 1.0).clamp(0.0, 2.0) as usize] = true;
    }
    assert_eq!(met, [true; 3]);
}

/// From a doubled cycle, a long stride lands on the parent told twice where nothing guards it.
#[test]
fn the_bare_corrector_falls_onto_the_parent() {
    let b = 0.3;
    let case = Case::new("band", "p", 1.0).with("l0", b * b).with("l1", 0.0).with("l2", -1.0);
    let (mut problem, start) = case.start(&case.circle(1.0, TAU), settings(1e-9), -0.4);
    let (before, after) = stations(&mut problem, &start, (-0.35, -0.2));
    let located = problem.locate(CriticalKind::Doubling, WATCH_DOUBLING, &before, &after).expect("a doubling");
    let form = problem.doubling_form(&located);
    let mut doubled = problem.double(&located, form.as_ref()).expect("a doubled branch");
    let problem = &mut doubled.problem;
    let tangent = problem.tangent(&doubled.point, Orientation::Along(&doubled.outwards)).expect("a tangent");
    let mut arch = Vec::new();
    let mut follower =
        Follower::start_along(problem, doubled.point, tangent, Settings::new((-0.5, 0.5))).expect("the walk starts");
    while arch.len() < 12 && matches!(follower.step(), Outcome::Step(_)) {
        arch.push(follower.current().clone());
    }
    let mut fell = 0;
    for at in &arch {
        assert!(
            problem.split(&at.point) > 1e-3,
            "on the arch at {}: {}",
            at.point.unknowns.parameter,
            problem.split(&at.point)
        );
        let landed: Vec<CyclePoint> = (1..20).filter_map(|k| raw(problem, at, 0.05 * f64::from(k))).collect();
        fell += usize::from(landed.iter().any(|point| problem.split(point) < 1e-8));
    }
    assert!(fell > 0);
}

/// Exact: circles at q^2 = p^2 + e^2; the upper branch turns at p = 0 where the lower one is 2 e away, and straight on lies
/// the lower one. Multiplier exp(-4 pi k r q): stable above, unstable below.
#[test]
fn a_branch_that_turns_away_from_its_neighbour_is_followed_round_the_turn() {
    for gap in [1e-2, 1e-3, 1e-4, 1e-5] {
        for longest in [0.05, 0.3, 1.0] {
            for start in [-0.5, -0.63] {
                let fields = format!(
                    r#"set: {{"hyperbola": 1.0, "gap": {:?}, "p": {start:?}}}, start: Settle(at: {{"p": {start:?}}}), follow: (parameter: "p", from: -0.8, to: 0.8), stride: (longest: {longest:?})"#,
                    gap * gap
                );
                let traced = job("sheet", &fields);
                let a = branch(&traced, "a");
                assert!(traced.shortfalls.is_empty(), "{gap} {longest}: {:?}", traced.shortfalls);
                assert_eq!(thresholds(a), [], "{gap} {longest}");
                for point in &a.points {
                    let exact = point.value.hypot(gap);
                    assert!(
                        (height(point) - exact).abs() < 1e-7,
                        "{gap} {longest}: {} at {}",
                        height(point),
                        point.value
                    );
                }
                assert_eq!(a.points.last().map(|point| point.value), Some(0.8), "{gap} {longest}");
            }
        }
    }
}

/// Exact: circles at q^2 = p^2 - e^2: the branch folds at p = e; straight on, beyond the gap, lies its mirror image.
#[test]
fn a_sharp_fold_is_not_stepped_over() {
    for gap in [1e-2, 1e-3, 1e-4, 1e-5] {
        for longest in [0.05, 0.3, 1.0] {
            let fields = format!(
                r#"set: {{"hyperbola": 1.0, "gap": {:?}}}, start: Settle(at: {{"p": 0.5}}), follow: (parameter: "p", from: -0.8, to: 0.8), stride: (longest: {longest:?})"#,
                -gap * gap
            );
            let traced = job("sheet", &fields);
            let a = branch(&traced, "a");
            assert!(traced.shortfalls.is_empty(), "{gap} {longest}: {:?}", traced.shortfalls);
            assert_eq!(thresholds(a), [EventKind::Fold], "{gap} {longest}");
            assert!(a.points.iter().all(|point| point.value > 0.0), "{gap} {longest}");
            let fold = a.events.iter().find(|event| event.kind == EventKind::Fold).expect("one");
            assert!((fold.value - gap).abs() <= fold.error.expect("an error"), "{gap} {longest}: {}", fold.value);
            adds_up(a);
        }
    }
}

/// Exact: three circles at d = -h, 0, h around q = 0.3 sin 3p; the outer ones stable, the middle one not. From the outer
/// one the next is one gap away, the one of the same stability two.
#[test]
fn one_of_three_parallel_branches_is_followed() {
    for gap in [3e-2, 1e-2, 3e-3, 1e-3, 3e-4] {
        for longest in [0.05, 0.3, 1.0] {
            for start in [-0.5, -0.2, 0.15] {
                let k = 2.0 / (gap * gap);
                let fields = format!(
                    r#"set: {{"bundle": 1.0, "delta": {gap:?}, "k": {k:?}}}, start: Settle(at: {{"p": {start:?}}}), follow: (parameter: "p", from: -1.0, to: 1.0), stride: (longest: {longest:?})"#
                );
                let traced = job("sheet", &fields);
                let a = branch(&traced, "a");
                assert!(traced.shortfalls.is_empty(), "{gap} {longest}: {:?}", traced.shortfalls);
                assert_eq!(thresholds(a), [], "{gap} {longest}");
                let offset = |point: &armilla_record::Point| height(point) - 0.3 * (3.0 * point.value).sin();
                let own = offset(&a.points[0]).signum();
                for point in &a.points {
                    let off = (offset(point) - own * gap).abs();
                    assert!(off < 1e-2 * gap, "{gap} {longest} {start}: {off:.1e} off at {}", point.value);
                }
            }
        }
    }
}

/// Exact: doubled cycles at U^2 = b^2 - p^2 between the doublings at p = -b and b, so U and p run along a circle; the parent
/// told twice lies below it. The doubled branch is followed over its arch, in whatever strides, and back to the parent.
#[test]
fn a_doubled_branch_does_not_fall_onto_its_parent() {
    for b in [0.3, 0.05, 0.01] {
        for longest in [0.05, 0.3, 1.0] {
            let fields = format!(
                r#"set: {{"l0": {:?}, "l1": 0.0, "l2": -1.0}}, start: Settle(at: {{"p": -0.4}}), follow: (parameter: "p", from: -0.5, to: 0.5), stride: (longest: {longest:?}), pursue: (doublings: 1)"#,
                b * b
            );
            let traced = job("band", &fields);
            assert!(traced.shortfalls.is_empty(), "{b} {longest}: {:?}", traced.shortfalls);
            assert_eq!(thresholds(branch(&traced, "a")), [EventKind::Doubling; 2], "{b} {longest}");
            assert_eq!(traced.branches.len(), 2, "{b} {longest}: the arch is one branch");
            let child = &traced.branches[1];
            assert_eq!(thresholds(child), [], "{b} {longest}");
            for point in child.points.iter().skip(1) {
                let exact = b * b - point.value * point.value;
                assert!(
                    (point.maxima[2].powi(2) - exact).abs() < 1e-7,
                    "{b} {longest}: {} {}",
                    point.value,
                    point.maxima[2]
                );
                assert!(point.maxima[2] > 1e-4 * b, "{b} {longest}: fell onto its parent at {}", point.value);
            }
            assert!((child.ends.1.value.abs() - b).abs() < 1e-2 * b, "{b} {longest}: {:?}", child.ends.1);
        }
    }
}
