//! Symmetries of order two found on cycles.

use armilla_record::{Branch, EndReason, EventKind};
use armilla_tests::{branch, job};

fn start_note(model: &str, fields: &str) -> String {
    let traced = job(model, &format!("{fields}, pursue: (doublings: 0, branches: 1)"));
    let start = branch(&traced, "a").events.iter().find(|event| event.kind == EventKind::Start).expect("a start");
    start.note.clone()
}

/// By hand: Lorenz's equations keep their form under (x, y, z) -> (-x, -y, z), van der Pol's under -1; X2 and X1 are circles,
/// half a turn further on a point is its own negative.
#[test]
fn linear_symmetries_are_found() {
    for (model, fields, note) in [
        (
            "lorenz",
            r#"start: Settle(at: {"r": 350}), follow: (parameter: "r", from: 349, to: 351)"#,
            "symmetric: x -> -x, y -> -y half a period later",
        ),
        (
            "vanderpol",
            r#"start: Settle(at: {"mu": 1.0}), follow: (parameter: "mu", from: 0.9, to: 1.1)"#,
            "symmetric: x -> -x, y -> -y half a period later",
        ),
        (
            "x13",
            r#"start: Settle(at: {"mu": -0.2}), follow: (parameter: "mu", from: -0.3, to: -0.1)"#,
            "symmetric: z -> -z",
        ),
    ] {
        assert_eq!(start_note(model, fields), note, "{model}");
    }
}

/// By hand: one of Lorenz's pair is not symmetric; nor are Roessler's equations, nor X12's, whose cycle z = 0 is its own
/// image under z -> -z while the rates are not.
#[test]
fn nothing_is_called_symmetric_that_is_not() {
    for (model, fields) in [
        ("lorenz", r#"start: Settle(at: {"r": 250}), follow: (parameter: "r", from: 249, to: 251)"#),
        ("roessler", r#"start: Settle(at: {"c": 1.0}), follow: (parameter: "c", from: 1.0, to: 1.1)"#),
        ("x12", r#"start: Settle(at: {"mu": -0.2}), follow: (parameter: "mu", from: -0.3, to: -0.1)"#),
    ] {
        assert_eq!(start_note(model, fields), "", "{model}");
    }
}

/// Exact: Lorenz's equations are unchanged by (x, y, z) -> (-x, -y, z), which exchanges the two arms of the pitchfork at
/// r = 1, their Hopf points at r = 470/19 and the cycles born there.
#[test]
fn mirror_images_of_cycles_are_computed_once() {
    let traced = job(
        "lorenz",
        r#"set: {"r": 0.8}, start: Equilibrium(near: {"x": 0.0, "y": 0.0, "z": 0.0}), follow: (parameter: "r", from: 0.5, to: 30.0)"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let twins: Vec<&Branch> =
        traced.branches.iter().filter(|branch| branch.name.starts_with("a.pitchfork1.hopf")).collect();
    let joins = |branch: &&&Branch| matches!(&branch.ends.1.reason, EndReason::Joins { .. });
    assert_eq!(twins.len(), 2);
    let (short, long) =
        (twins.iter().find(joins).expect("one joins"), twins.iter().find(|b| !joins(b)).expect("one does not"));
    assert_eq!(short.ends.1.reason, EndReason::Joins { branch: long.name.clone() });
    assert!(
        short
            .ends
            .1
            .words
            .starts_with(&format!("joins the mirror image (x -> -x, y -> -y) of `{}` at r = ", long.name))
    );
    assert!(short.points.len() <= 5 && long.points.len() > 20, "{} and {}", short.points.len(), long.points.len());
    assert_eq!(long.ends.1.reason, EndReason::PeriodBlowUp, "{}", long.ends.1.words);
}
