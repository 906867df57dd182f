//! Branches that close, and doubled branches that return to their parent.

use armilla_record::{EndReason, EventKind};
use armilla_tests::{Random, absolute, branch, event, job};

use crate::words::{check_ratios, value_with_error};

/// Exact: cycles are circles r with (r - 1)^2 + p^2 = 1/4 for every lift, folds at p = -1/2 and 1/2. The third state makes the
/// phase of neighbouring cycles turn: round the loop they come back shifted in time.
#[test]
fn an_isolated_loop_closes() {
    for lift in [0.0, 0.3, 1.0, -2.0] {
        for at in [0.0, 0.3, -0.45] {
            let traced = job(
                "isola",
                &format!(
                    r#"set: {{"lift": {lift:?}}}, start: Settle(at: {{"p": {at:?}}}), follow: (parameter: "p", from: -1.0, to: 2.0)"#
                ),
            );
            assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
            let a = branch(&traced, "a");
            for end in [&a.ends.0, &a.ends.1] {
                assert_eq!(end.reason, EndReason::Closed, "lift {lift}, start {at}: {}", end.words);
                assert_eq!(end.words, "closed upon itself: its start was met again");
            }
            let folds: Vec<f64> = a.events.iter().filter(|e| e.kind == EventKind::Fold).map(|e| e.value).collect();
            assert_eq!(folds.len(), 2, "seen once: {folds:?}");
            absolute("folds", folds[0].abs(), 0.5, 1e-11);
            absolute("folds", folds[0] + folds[1], 0.0, 1e-11);
        }
    }
}

/// Exact: X3 with mu = top - (p - p0)^2. Both ends of the doubled branch are doublings of its parent.
#[test]
fn a_doubled_branch_returns_to_its_parent() {
    let mut random = Random::new(4);
    for _ in 0..6 {
        let (top, p0) = (random.decade(-2.0, -0.5), random.between(-1.0, 1.0));
        let half = top.sqrt();
        let (from, to) = (p0 - half - 0.4, p0 + half + 0.5);
        let traced = job(
            "x3_bubble",
            &format!(
                r#"set: {{"top": {top:?}, "p0": {p0:?}}}, start: Settle(at: {{"p": {:?}}}), follow: (parameter: "p", from: {from:?}, to: {to:?})"#,
                p0 - half - 0.3
            ),
        );
        assert!(traced.shortfalls.is_empty(), "top {top}, p0 {p0}: {:?}", traced.shortfalls);
        assert_eq!(traced.branches.len(), 2, "the bubble is followed once");
        let bubble = branch(&traced, "a.doubling1");
        assert_eq!(bubble.ends.0.reason, EndReason::ReturnsToParent, "{}", bubble.ends.0.words);
        assert_eq!(bubble.ends.1.reason, EndReason::ReturnsToParent, "{}", bubble.ends.1.words);
        assert!(bubble.ends.0.words.starts_with("returns to its parent: born at a/doubling1, p = "));
        assert_eq!(bubble.ends.1.words, "returns to its parent at a/doubling2; the branch born there is this one");
        for (name, value, exact) in
            [("a/doubling1", bubble.ends.0.value, p0 - half), ("a/doubling2", bubble.ends.1.value, p0 + half)]
        {
            absolute(name, event(&traced, name).value, exact, 1e-11);
            absolute("the end there", value, exact, 1e-11);
        }
    }
}

/// The same branch started from inside, where no parent has been followed: the places are extrapolated, with errors.
#[test]
fn a_branch_of_two_turns_ends_where_it_was_born() {
    let mut random = Random::new(5);
    let mut ratios = Vec::new();
    for _ in 0..12 {
        let (top, p0) = (random.decade(-2.0, -0.5), random.between(-1.0, 1.0));
        let half = top.sqrt();
        let (from, to) = (p0 - half - random.between(0.1, 1.0), p0 + half + random.between(0.1, 1.0));
        let traced = job(
            "x3_bubble",
            &format!(
                r#"set: {{"top": {top:?}, "p0": {p0:?}}}, start: Settle(at: {{"p": {:?}}}), follow: (parameter: "p", from: {from:?}, to: {to:?})"#,
                p0 + random.between(-0.5, 0.5) * half
            ),
        );
        let what = format!("top {top}, p0 {p0}");
        assert!(traced.shortfalls.is_empty(), "{what}: {:?}", traced.shortfalls);
        let a = branch(&traced, "a");
        for (end, exact) in [(&a.ends.0, p0 - half), (&a.ends.1, p0 + half)] {
            assert_eq!(end.reason, EndReason::ReturnsToParent, "{what}: {}", end.words);
            assert!(end.words.starts_with("returns to the cycle of half its period"), "{what}: {}", end.words);
            let (_, error) = value_with_error(&end.words);
            let off = (end.value - exact).abs().max(4.0 * f64::EPSILON);
            eprintln!("{what}: off {off:.1e}, error {error:.1e}");
            // One digit of the error is printed.
            ratios.push(1.5 * error / off);
            assert!(error < 1e-2 * half, "{what}: {}", end.words);
        }
    }
    check_ratios("births of two-turn cycles", ratios, 1000.0);
}
