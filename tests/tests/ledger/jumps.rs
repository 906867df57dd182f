//! Two branches that a longer stride confuses: the program stays on its own.

use armilla_record::EventKind;
use armilla_tests::{branch, job};

use crate::account::{adds_up, thresholds};

/// Radius minus 2 of a point on a circle.
fn height(point: &armilla_record::Point) -> f64 {
    point.maxima[0] - 2.0
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
                    assert!((height(point) - exact).abs() < 1e-7, "{gap} {longest}: {} at {}", height(point), point.value);
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
                assert!((point.maxima[2].powi(2) - exact).abs() < 1e-7, "{b} {longest}: {} {}", point.value, point.maxima[2]);
                assert!(point.maxima[2] > 1e-4 * b, "{b} {longest}: fell onto its parent at {}", point.value);
            }
            assert!((child.ends.1.value.abs() - b).abs() < 1e-2 * b, "{b} {longest}: {:?}", child.ends.1);
        }
    }
}
