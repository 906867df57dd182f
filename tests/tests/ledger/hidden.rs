//! Events that a stride could hide: three of a kind, and bumps narrower than a stride.
//!
//! Exact: across the unit circle the solutions grow like exp(g t) along one direction, g a given function of the parameter,
//! and that direction turns by half a turn a period, or rotates; so doublings, or torus points, are the zeros of g.

use armilla_record::EventKind;
use armilla_tests::{branch, job};

use crate::account::adds_up;

/// Values of all events of a kind on the first branch, which must explain every change of stability.
fn found(model: &str, set: &str, kind: EventKind) -> Vec<(f64, f64)> {
    let fields = format!(
        r#"set: {{{set}}}, start: Settle(at: {{"p": -0.5}}), follow: (parameter: "p", from: -1.0, to: 0.6), pursue: (doublings: 0)"#
    );
    let traced = job(model, &fields);
    let a = branch(&traced, "a");
    adds_up(a);
    let of_kind = a.events.iter().filter(|event| event.kind == kind);
    of_kind.map(|event| (event.value, event.error.expect("an error"))).collect()
}

#[track_caller]
fn are(what: &str, found: &[(f64, f64)], exact: &[f64]) {
    assert_eq!(found.len(), exact.len(), "{what}: {found:?} for {exact:?}");
    for ((value, error), exact) in found.iter().zip(exact) {
        // Of three within 0.002 the growth's slope is 1e-5, and the place of its zero that much less certain.
        assert!((value - exact).abs() <= *error && *error < 3e-9, "{what}: {value} ± {error:e} for {exact}");
    }
}

const KINDS: [(&str, EventKind); 2] = [("hidden", EventKind::Doubling), ("hidden_pair", EventKind::Torus)];

#[test]
fn three_in_a_stride() {
    for (model, kind) in KINDS {
        for c in [0.0, 0.0371] {
            for d in [0.05, 0.02, 0.005, 0.001] {
                let set = format!(r#""c": {c:?}, "d": {d:?}"#);
                are(&format!("{model} {set}"), &found(model, &set, kind), &[c - d, c, c + d]);
            }
        }
    }
}

/// Zeros at c -+ width / sqrt 2, a third to four tenths of a stride apart, wherever the points of the branch fall.
#[test]
fn bumps_between_points() {
    for (model, kind) in KINDS {
        for c in [0.123456, 0.17, 0.2, 0.231] {
            for width in [0.02, 0.03] {
                let set = format!(r#""c": {c:?}, "width": {width:?}, "cubic": 0.0, "bump": 1.0"#);
                let half = width * std::f64::consts::FRAC_1_SQRT_2;
                are(&format!("{model} {set}"), &found(model, &set, kind), &[c - half, c + half]);
            }
        }
    }
}
