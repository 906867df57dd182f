//! Folds that are easily taken for something else: beside a crossing, and where the parameter stands still.

use armilla_record::EventKind;
use armilla_tests::{branch, job};

/// Exact: cycles p = c z + z^2 fold at p = -c^2/4 and cross those with z = 0 at p = 0, all in one stride.
#[test]
fn a_fold_beside_a_crossing() {
    for c in [2e-2, 2e-3, 6e-4, 1e-4] {
        let traced = job(
            "fold_beside",
            &format!(
                r#"set: {{"c": {c:?}}}, start: Settle(at: {{"p": 0.5}}), follow: (parameter: "p", from: -0.5, to: 1.0), pursue: (branches: 1)"#
            ),
        );
        let a = branch(&traced, "a");
        let mut found: Vec<_> = a.events.iter().filter(|event| event.kind.is_threshold()).collect();
        found.sort_by_key(|event| event.kind);
        let kinds: Vec<EventKind> = found.iter().map(|event| event.kind).collect();
        assert_eq!(kinds, [EventKind::Fold, EventKind::Transcritical], "c = {c}");
        for (event, exact) in found.iter().zip([-0.25 * c * c, 0.0]) {
            let error = event.error.expect("an error");
            assert!(
                (event.value - exact).abs() <= error && error < 1e-10,
                "c = {c}: {} ± {error:e} for {exact}",
                event.value
            );
        }
    }
}

/// By hand: a Hopf point where v^2 = 1 - eps b. From there the branch leads away from the cycles at first and turns back in
/// a canard explosion, in which the parameter stands still to rounding (Krupa & Szmolyan 2001, J. Differential Equations
/// 174:312, for the turn; from memory): one fold beside each of the two Hopf points, and no crossing of branches.
#[test]
fn folds_in_a_canard_explosion_are_folds() {
    let (a, b): (f64, f64) = (0.7, 0.8);
    for eps in [0.02f64, 0.03] {
        let traced = job(
            "nagumo",
            &format!(
                r#"set: {{"eps": {eps:?}}}, start: Settle(at: {{"I": 0.8}}), follow: (parameter: "I", from: 0.0, to: 2.0)"#
            ),
        );
        let events = &branch(&traced, "a").events;
        let of = |kind: EventKind| events.iter().filter(move |event| event.kind == kind).collect::<Vec<_>>();
        assert!(of(EventKind::Branching).is_empty() && of(EventKind::Unresolved).is_empty(), "eps = {eps}");
        assert_eq!(of(EventKind::Fold).len(), 2, "eps = {eps}");
        let mut births: Vec<_> = of(EventKind::Hopf);
        births.sort_by(|x, y| x.value.total_cmp(&y.value));
        for (event, v) in births.iter().zip([-1.0, 1.0].map(|sign: f64| sign * (1.0 - eps * b).sqrt())) {
            let exact = (v + a) / b - v + v.powi(3) / 3.0;
            assert!(
                (event.value - exact).abs() <= event.error.expect("an error"),
                "eps = {eps}: {event:?} for {exact}"
            );
        }
        let mut folds: Vec<f64> = of(EventKind::Fold).iter().map(|event| event.value).collect();
        folds.sort_by(f64::total_cmp);
        assert!(folds[0] < births[0].value && births[1].value < folds[1], "eps = {eps}: {folds:?}");
    }
}
