//! Two events that cancel inside one stride of 0.05, the longest: a pair 0.3 strides apart, and narrower ones.

use armilla_record::EventKind;
use armilla_study::Traced;
use armilla_tests::{branch, job};

use crate::account::{adds_up, thresholds, values};

/// Longest stride of the follower in the parameter, on branches on which nothing else moves: 0.05 of the range, which is 1.
const STRIDE: f64 = 0.05;

fn near(name: &str, found: &[f64], wanted: &[f64], tolerance: f64) {
    assert_eq!(found.len(), wanted.len(), "{name}: {found:?}, wanted {wanted:?}");
    for (a, b) in found.iter().zip(wanted) {
        assert!((a - b).abs() <= tolerance, "{name}: {found:?}, wanted {wanted:?}");
    }
}

/// Growth `20 ((w/2)^2 - (p - c)^2)`: positive between `c - w/2` and `c + w/2`.
fn growth((c, w): (f64, f64), name: char) -> String {
    let steep = 20.0;
    format!(
        r#""{name}0": {:?}, "{name}1": {:?}, "{name}2": {:?}"#,
        steep * (0.25 * w * w - c * c),
        2.0 * steep * c,
        -steep
    )
}

fn doubling_bubble(c: f64, w: f64) -> Traced {
    job(
        "band",
        &format!(
            r#"set: {{{}}}, start: Settle(at: {{"p": -0.45}}), follow: (parameter: "p", from: -0.5, to: 0.5), pursue: (doublings: 0)"#,
            growth((c, w), 'l')
        ),
    )
}

/// Exact: multiplier -exp(2 pi l(p)) of the circle, see the model. Bubbles of 0.3, 0.1, 0.02 and 0.002 strides at eleven
/// places relative to the points.
#[test]
fn two_doublings_inside_one_stride_are_both_found() {
    for share in [0.3, 0.1, 0.02, 0.002] {
        for place in 0..11 {
            let (c, w) = (0.1 + STRIDE * place as f64 / 11.0, share * STRIDE);
            let traced = doubling_bubble(c, w);
            let exact = [c - 0.5 * w, c + 0.5 * w];
            near(&format!("{share} at {place}"), &values(&traced, "a", EventKind::Doubling), &exact, 1e-9);
            assert_eq!(thresholds(branch(&traced, "a")).len(), 2);
            adds_up(branch(&traced, "a"));
        }
    }
}

/// Exact: the same with the growth never positive, -20 (p - c)^2 - 0.004: nothing is invented.
#[test]
fn a_dip_that_stays_clear_is_no_event() {
    for place in 0..11 {
        let c = 0.1 + STRIDE * place as f64 / 11.0;
        let fields = format!(
            r#"set: {{"l0": {:?}, "l1": {:?}, "l2": -20.0}}, start: Settle(at: {{"p": -0.45}}), follow: (parameter: "p", from: -0.5, to: 0.5), pursue: (doublings: 0)"#,
            -0.004 - 20.0 * c * c,
            40.0 * c
        );
        let traced = job("band", &fields);
        assert_eq!(thresholds(branch(&traced, "a")), [], "at {place}");
        assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    }
}

/// Exact: the growth touches zero at c; nothing passes -1, which no computation with rounding can tell from two doublings
/// some 1e-8 apart. It must not be passed in silence.
#[test]
fn a_touch_is_told_as_unresolved() {
    for place in 0..3 {
        let c = 0.1 + STRIDE * place as f64 / 3.0;
        let traced = doubling_bubble(c, 0.0);
        let a = branch(&traced, "a");
        assert_eq!(
            thresholds(a),
            [EventKind::Unresolved],
            "at {place}: {:?}",
            a.events.iter().map(|e| (&e.name, e.value)).collect::<Vec<_>>()
        );
        let event = a.events.iter().find(|event| event.kind == EventKind::Unresolved).expect("one");
        assert!((event.value - c).abs() <= event.error.expect("an interval"), "{} for {c}", event.value);
    }
}

/// Exact: p = q^3 - 3 q0^2 q has folds at q = +-q0, p = -+2 q0^3, between them the multiplier is above 1. The second is
/// met within 0.4 to 0.1 strides of the first, the stride being 0.05 of the size of the cycle (q moves by 4 of these).
#[test]
fn two_folds_inside_one_stride_are_both_found() {
    for q0 in [0.06, 0.02, 0.01, 0.005] {
        for start in [-0.51, -0.503] {
            let fields = format!(
                r#"set: {{"cubic": 1.0, "slope": {:?}}}, start: Settle(at: {{"p": {start:?}}}), follow: (parameter: "p", from: -0.6, to: 0.4), stride: (longest: 0.1)"#,
                3.0 * q0 * q0
            );
            let traced = job("sheet", &fields);
            let exact = 2.0 * q0 * q0 * q0;
            near(&format!("{q0} from {start}"), &values(&traced, "a", EventKind::Fold), &[-exact, exact], 1e-9);
            adds_up(branch(&traced, "a"));
            assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
        }
    }
}

/// Exact: multipliers exp(2 pi (s(p) +- i f)): two torus points that cancel.
#[test]
fn two_torus_points_inside_one_stride_are_both_found() {
    for share in [0.3, 0.1] {
        for place in 0..5 {
            let (c, w) = (0.1 + STRIDE * place as f64 / 5.0, share * STRIDE);
            let fields = format!(
                r#"set: {{{}}}, start: Settle(at: {{"p": -0.4}}), follow: (parameter: "p", from: -0.5, to: 0.5)"#,
                growth((c, w), 's')
            );
            let traced = job("product", &fields);
            let exact = [c - 0.5 * w, c + 0.5 * w];
            near(&format!("{share} at {place}"), &values(&traced, "a", EventKind::Torus), &exact, 1e-10);
            assert_eq!(thresholds(branch(&traced, "a")).len(), 2);
            adds_up(branch(&traced, "a"));
        }
    }
}

/// Exact: multiplier exp(2 pi c(p)) passes +1 and comes back, c' = c (c(p) - c^2): two pitchforks that cancel.
#[test]
fn two_branchings_inside_one_stride_are_both_found() {
    for share in [0.3, 0.1] {
        for place in 0..5 {
            let (c, w) = (0.1 + STRIDE * place as f64 / 5.0, share * STRIDE);
            let fields = format!(
                r#"set: {{{}}}, start: Settle(at: {{"p": -0.4}}), follow: (parameter: "p", from: -0.5, to: 0.5)"#,
                growth((c, w), 'c')
            );
            let traced = job("product", &fields);
            let exact = [c - 0.5 * w, c + 0.5 * w];
            near(&format!("{share} at {place}"), &values(&traced, "a", EventKind::Pitchfork), &exact, 1e-10);
            assert_eq!(thresholds(branch(&traced, "a")).len(), 2);
            adds_up(branch(&traced, "a"));
        }
    }
}
