//! Events at a target, at an edge, near the start: located, told once, nothing lost.

use armilla_record::{EndReason, EventKind};
use armilla_study::Traced;
use armilla_tests::{branch, job};

use crate::account::{adds_up, of, thresholds};

fn told(traced: &Traced) -> Vec<(&str, f64, &str)> {
    traced.branches.iter().flat_map(|b| &b.events).map(|e| (e.name.as_str(), e.value, e.note.as_str())).collect()
}

/// X3 with the range ending on the doubling, as an edge and as a target (exact: doubling at mu = 0).
#[test]
fn a_doubling_on_an_edge_is_told_once() {
    for (from, to, at, targets) in [(-1.0, 0.0, -0.4, "[]"), (-1.0, 0.0, -0.4, "[0.0]"), (-0.3, 0.0, -0.2, "[]")] {
        let fields = format!(
            r#"start: Settle(at: {{"mu": {at:?}}}), follow: (parameter: "mu", from: {from:?}, to: {to:?}), targets: {targets}, pursue: (doublings: 0)"#
        );
        let traced = job("x3", &fields);
        let a = branch(&traced, "a");
        let doublings = of(&traced, "a", EventKind::Doubling);
        assert_eq!(thresholds(a), [EventKind::Doubling], "{:?}", told(&traced));
        let error = doublings[0].error.expect("an error");
        assert!(
            doublings[0].value.abs() <= error && doublings[0].value.abs() < 1e-13 && error < 1e-12,
            "{error:e}: {:?}",
            told(&traced)
        );
        assert_eq!((a.ends.1.reason.clone(), a.ends.1.value), (EndReason::Edge, 0.0));
        assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    }
}

/// X3 with the doubling as a target inside the range, and one near the start.
#[test]
fn a_doubling_on_a_target_is_told_once() {
    for at in [-0.2, -1e-3] {
        let fields = format!(
            r#"start: Settle(at: {{"mu": {at:?}}}), follow: (parameter: "mu", from: -0.5, to: 0.5), targets: [0.0], pursue: (doublings: 0)"#
        );
        let traced = job("x3", &fields);
        let a = branch(&traced, "a");
        assert_eq!(thresholds(a), [EventKind::Doubling], "{:?}", told(&traced));
        assert_eq!(of(&traced, "a", EventKind::Target).len(), 1, "{:?}", told(&traced));
        assert!(of(&traced, "a", EventKind::Doubling)[0].value.abs() < 1e-12, "{:?}", told(&traced));
        adds_up(a);
        assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    }
}

/// The doubled branch is entered at a doubling on the edge where it lies inside the range (X4 with g > 0: exact U^2 = -l/g)
/// and is left alone where it does not.
#[test]
fn a_doubling_on_an_edge_gives_birth_inside_the_range() {
    let fields = |g: f64| {
        format!(
            r#"set: {{"g": {g:?}}}, start: Settle(at: {{"p": -0.3}}), follow: (parameter: "p", from: -0.5, to: 0.0), pursue: (doublings: 1)"#
        )
    };
    let inside = job("band", &fields(1.0));
    let child = branch(&inside, "a.doubling1");
    assert!(child.points.len() > 5 && child.ends.1.reason == EndReason::Edge, "{:?}", child.ends);
    for point in child.points.iter().skip(1) {
        assert!((point.maxima[2] - (-point.value).sqrt()).abs() < 1e-6, "{} {}", point.value, point.maxima[2]);
    }
    let outside = job("band", &fields(-1.0));
    assert_eq!(thresholds(branch(&outside, "a")), [EventKind::Doubling], "{:?}", told(&outside));
    assert!(outside.branches.len() == 1, "nothing to follow outside the range: {:?}", told(&outside));
}

/// X2 with the lower edge on the fold (exact: mu = -1/4 at r2 = 1/2), and a little before and beyond it.
#[test]
fn a_fold_on_an_edge_is_told_once() {
    for edge in [-0.25, -0.25 - 1e-9, -0.25 - 1e-6] {
        let fields = format!(r#"start: Settle(at: {{"mu": 0.1}}), follow: (parameter: "mu", from: {edge:?}, to: 0.5)"#);
        let traced = job("x2", &fields);
        let a = branch(&traced, "a");
        let folds = of(&traced, "a", EventKind::Fold);
        assert_eq!(folds.len(), 1, "{edge}: {:?}", told(&traced));
        assert!((folds[0].value + 0.25).abs() <= folds[0].error.expect("an error"), "{edge}: {:?}", told(&traced));
        assert!(traced.shortfalls.is_empty(), "{edge}: {:?}", traced.shortfalls);
        adds_up(a);
    }
    for before in [1e-9, 1e-6] {
        let edge = -0.25 + before;
        let fields = format!(r#"start: Settle(at: {{"mu": 0.1}}), follow: (parameter: "mu", from: {edge:?}, to: 0.5)"#);
        let traced = job("x2", &fields);
        let a = branch(&traced, "a");
        assert_eq!(thresholds(a), [], "{edge}: {:?}", told(&traced));
        assert_eq!((a.ends.0.reason.clone(), a.ends.0.value), (EndReason::Edge, edge));
        assert!(traced.shortfalls.is_empty(), "{edge}: {:?}", traced.shortfalls);
    }
}
