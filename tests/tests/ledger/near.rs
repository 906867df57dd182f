//! Events nearer to each other than 1e-6 of the range, and pairs that look like events.

use armilla_record::EventKind;
use armilla_tests::{branch, job};

use crate::account::{adds_up, of, thresholds, values};

/// Exact: multipliers -exp(2 pi p) and -exp(2 pi (p - d)) of the circle: doublings at 0 and d, the range being 1.
#[test]
fn two_doublings_as_near_as_a_billionth_of_the_range() {
    for d in [1e-5, 1e-7, 1e-9] {
        let fields = format!(
            r#"set: {{"m0": {:?}, "m1": 1.0}}, start: Settle(at: {{"p": -0.31}}), follow: (parameter: "p", from: -0.5, to: 0.5), accuracy: 1e-12, pursue: (doublings: 0)"#,
            -d
        );
        let traced = job("band", &fields);
        let found = of(&traced, "a", EventKind::Doubling);
        assert_eq!(
            found.len(),
            2,
            "{d}: {:?}",
            branch(&traced, "a").events.iter().map(|e| (&e.name, e.value, &e.note)).collect::<Vec<_>>()
        );
        for (event, exact) in found.iter().zip([0.0, d]) {
            let off = (event.value - exact).abs();
            assert!(
                off <= event.error.expect("an error") && off < 1e-13,
                "{d}: {} for {exact}, {:?}",
                event.value,
                event.error
            );
        }
        assert_eq!(thresholds(branch(&traced, "a")).len(), 2);
        adds_up(branch(&traced, "a"));
    }
}

/// Exact: growths `(d - p) (p + 0.2)` and `p (p + 0.4)`: from p = -0.3 the first multiplier goes out at -0.2 and comes in at
/// d, the second goes out at 0, so that two doublings hand over or follow each other. They cancel in the product.
#[test]
fn two_doublings_that_hand_over_are_told() {
    for d in [1e-2, -1e-2, 1e-4, -1e-4, 1e-7, -1e-7] {
        let fields = format!(
            r#"set: {{"m0": {:?}, "m1": {:?}, "m2": -1.0, "l1": 0.4, "l2": 1.0}}, start: Settle(at: {{"p": -0.3}}), follow: (parameter: "p", from: -0.37, to: 0.31), pursue: (doublings: 0)"#,
            0.2 * d,
            d - 0.2
        );
        let traced = job("band", &fields);
        let a = branch(&traced, "a");
        let told = || a.events.iter().map(|e| (&e.name, e.value, &e.note)).collect::<Vec<_>>();
        let found = values(&traced, "a", EventKind::Doubling);
        let covered = |at: f64| {
            a.events.iter().filter(|event| event.kind.is_threshold()).any(|event| {
                let slack = if event.kind == EventKind::Unresolved { event.error.expect("an interval") } else { 1e-10 };
                (event.value - at).abs() <= slack
            })
        };
        assert!([-0.2, 0.0, d].into_iter().all(covered), "{d}: {:?}", told());
        // Nearer to each other than the root of roundoff they are told as one unresolved event.
        assert!(
            found.len() == 3 || d.abs() < 1e-6 && thresholds(a).contains(&EventKind::Unresolved),
            "{d}: {:?}",
            told()
        );
        adds_up(a);
    }
}

/// Exact: fold at p = 0, doubling at p = d^2, before the fold (d > 0) or behind it (d < 0).
#[test]
fn a_fold_and_a_doubling_as_near_as_a_billionth_of_the_range() {
    for d in [1e-2f64, 3.2e-4, 3.2e-5] {
        for sign in [1.0, -1.0] {
            let fields = format!(
                r#"set: {{"d": {:?}}}, start: Settle(at: {{"p": 0.3}}), follow: (parameter: "p", from: -0.5, to: 0.5), pursue: (doublings: 0)"#,
                sign * d
            );
            let traced = job("band_fold", &fields);
            let a = branch(&traced, "a");
            let told = || a.events.iter().map(|e| (&e.name, e.value, &e.note)).collect::<Vec<_>>();
            let (folds, doublings) = (of(&traced, "a", EventKind::Fold), of(&traced, "a", EventKind::Doubling));
            assert!(folds.len() == 1 && doublings.len() == 1 && thresholds(a).len() == 2, "{d} {sign}: {:?}", told());
            assert!(folds[0].value.abs() <= folds[0].error.expect("an error"), "{d} {sign}: {:?}", told());
            let off = (doublings[0].value - d * d).abs();
            assert!(
                off <= doublings[0].error.expect("an error"),
                "{d} {sign}: {:?} off by {off}, error {:?}",
                told(),
                doublings[0].error
            );
            adds_up(a);
            assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
        }
    }
}

/// Exact: the doubling at the fold itself. Whatever it is called, both are told and the branch goes round it.
#[test]
fn a_doubling_on_a_fold_is_told() {
    let traced = job(
        "band_fold",
        r#"set: {"d": 0.0}, start: Settle(at: {"p": 0.3}), follow: (parameter: "p", from: -0.5, to: 0.5), pursue: (doublings: 0)"#,
    );
    let a = branch(&traced, "a");
    let told = || a.events.iter().map(|e| (&e.name, e.value, &e.note)).collect::<Vec<_>>();
    assert!(of(&traced, "a", EventKind::Fold).len() == 1 && thresholds(a).len() == 2, "{:?}", told());
    for event in a.events.iter().filter(|event| event.kind.is_threshold()) {
        assert!(event.value.abs() < 1e-9, "{:?}", told());
    }
    // Beyond: exp(4 pi sqrt p) and -exp(pi sqrt p) are both outside.
    assert_eq!(a.points.first().map(|point| point.unstable_count), Some(2));
    adds_up(a);
}

/// Exact: real multipliers exp(2 pi p) and exp(-0.6 pi) whose product is 1 at p = 0.3; and -exp(2 pi p), -exp(-0.6 pi).
/// Nothing but the crossing of the unit circle at p = 0 is an event.
#[test]
fn neutral_saddles_are_no_torus_points() {
    let follow = r#"follow: (parameter: "p", from: -0.5, to: 0.7), pursue: (doublings: 0)"#;
    let both_signs = [
        ("product", r#"set: {"c0": 0.0, "c1": 1.0, "d0": -0.3}"#, EventKind::Pitchfork),
        ("band", r#"set: {"m0": -0.3}"#, EventKind::Doubling),
    ];
    for (model, set, kind) in both_signs {
        let traced = job(model, &format!(r#"{set}, start: Settle(at: {{"p": -0.4}}), {follow}"#));
        let a = branch(&traced, "a");
        assert_eq!(thresholds(a), [kind], "{model}");
        assert!(a.points.iter().any(|point| point.value > 0.35 && point.unstable_count == 1));
        let product = |at: f64| {
            let point = a.points.iter().min_by(|x, y| (x.value - at).abs().total_cmp(&(y.value - at).abs()));
            point
                .expect("points")
                .multipliers
                .iter()
                .map(|mu| mu.log_modulus)
                .filter(|log| log.abs() < 3.0)
                .sum::<f64>()
        };
        assert!(product(0.2) < 0.0 && product(0.4) > 0.0, "the saddle is passed");
        adds_up(a);
    }
}
