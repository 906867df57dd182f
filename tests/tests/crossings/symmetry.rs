//! Symmetries of order two found on cycles.

use armilla_record::EventKind;
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
