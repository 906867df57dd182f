//! Ends that are not the model's: the edge, the budget, the resolution.

use armilla_record::EndReason;
use armilla_tests::{branch, job};

#[test]
fn edges_are_met_exactly() {
    let traced = job("x1", r#"start: Settle(at: {"mu": 0.25}), follow: (parameter: "mu", from: 0.1, to: 0.7)"#);
    let a = branch(&traced, "a");
    assert_eq!((&a.ends.0.reason, a.ends.0.value, a.points[0].value), (&EndReason::Edge, 0.1, 0.1));
    let last = a.points.last().expect("points").value;
    assert_eq!((&a.ends.1.reason, a.ends.1.value, last), (&EndReason::Edge, 0.7, 0.7));
    assert_eq!(a.ends.0.words, "reaches the edge of the asked range, mu = 0.1");
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
}

#[test]
fn the_budget_is_an_end_and_a_shortfall() {
    let traced = job(
        "x1",
        r#"start: Settle(at: {"mu": 0.25}), follow: (parameter: "mu", from: 0.1, to: 0.7), pursue: (points: 5)"#,
    );
    let a = branch(&traced, "a");
    assert!([&a.ends.0, &a.ends.1].into_iter().any(|end| end.reason == EndReason::Budget), "{:?}", a.ends);
    assert!(a.points.len() <= 5, "{} points", a.points.len());
    assert!(traced.shortfalls.iter().any(|words| words.contains("all points allowed by `pursue` were used")));
}

/// Relaxation on ten cubic pieces: at mu = 100 a cycle has jumps of a ten-thousandth of its period (Grasman 1987, Asymptotic
/// Methods for Relaxation Oscillations, from memory), which no ten pieces hold.
#[test]
fn a_mesh_that_may_not_grow_loses_the_cycle() {
    let traced = job(
        "vanderpol",
        r#"start: Settle(at: {"mu": 1.0}), follow: (parameter: "mu", from: 0.5, to: 100.0), mesh: (intervals: 10, degree: 3)"#,
    );
    let a = branch(&traced, "a");
    assert_eq!(a.ends.1.reason, EndReason::ResolutionLost, "{}", a.ends.1.words);
    assert!(
        a.ends.1.words.starts_with("resolution limit: the cycle is not resolved any more at mu = "),
        "{}",
        a.ends.1.words
    );
    assert!(a.ends.1.words.contains("on 10 intervals"), "{}", a.ends.1.words);
    assert!(traced.shortfalls.iter().any(|words| words.starts_with("branch a stops early: resolution limit")));
}

/// A stride that may not shrink cannot go round a loop of a fifth of its length.
#[test]
fn a_stride_that_may_not_shrink_gets_stuck() {
    let traced = job(
        "isola",
        r#"start: Settle(at: {"p": 0.0}), follow: (parameter: "p", from: -1.0, to: 2.0),
           stride: (initial: 0.5, shortest: 0.5, longest: 0.5)"#,
    );
    let a = branch(&traced, "a");
    assert_eq!(a.ends.1.reason, EndReason::Stuck, "{}", a.ends.1.words);
    assert!(a.ends.1.words.starts_with("resolution limit: the corrector fails at the shortest stride at p = "));
    assert!(!traced.shortfalls.is_empty());
}

/// Exact: at mu = 0 the model is a pendulum; the cycles born there all belong to that one value.
#[test]
fn a_continuum_of_cycles_ends_a_walk() {
    let traced = job("centre", r#"start: Settle(at: {"mu": -0.3}), follow: (parameter: "mu", from: -1.0, to: 1.0)"#);
    let cycles = branch(&traced, "a.hopf1");
    assert_eq!(cycles.ends.1.reason, EndReason::Continuum, "{}", cycles.ends.1.words);
    assert_eq!(cycles.ends.1.words, "cycles fill a continuum at the one value mu = 0");
    assert!(cycles.points.len() < 20, "{}", cycles.points.len());
}
