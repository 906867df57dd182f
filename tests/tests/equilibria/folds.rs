//! Folds of equilibria.

use armilla_record::{EndReason, EventKind, Solutions};
use armilla_tests::{branch, event, job, within};

/// Exact, by hand: p = x^3 - x turns back at x = ±1/sqrt 3, p = ∓2/(3 sqrt 3); stable, unstable, stable.
#[test]
fn both_folds_of_a_cubic() {
    let traced = job("hysteresis", r#"start: Equilibrium(near: {}), follow: (parameter: "p", from: -1, to: 1)"#);
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let exact = 2.0 / (3.0 * 3f64.sqrt());
    for (name, sign) in [("a/fold1", 1.0), ("a/fold2", -1.0)] {
        let fold = event(&traced, name);
        within(name, (fold.value, fold.error), (sign * exact, 0.0), 1e-14);
        within(name, (fold.maxima[0], Some(1e-12)), (-sign / 3f64.sqrt(), 0.0), 1e-12);
        assert_eq!((fold.period, fold.turns, fold.profile.is_none()), (0.0, 0, true));
    }
    let a = branch(&traced, "a");
    assert_eq!(a.of, Solutions::Equilibria);
    assert!(a.ends.0.reason == EndReason::Edge && a.ends.1.reason == EndReason::Edge, "{:?}", a.ends);
    for point in &a.points {
        let [slope, lag] = [1.0 - 3.0 * point.maxima[0].powi(2), -2.0];
        let mut exact = [slope, lag];
        exact.sort_by(|a, b| b.total_cmp(a));
        for (found, exact) in point.eigenvalues.iter().zip(exact) {
            assert!((found.re - exact).abs() < 1e-12 && found.im == 0.0, "{found:?} for {exact}");
        }
        assert_eq!(point.unstable_count, usize::from(slope > 0.0), "at {}", point.value);
    }
    assert!(a.events.iter().filter(|event| event.kind == EventKind::Fold).count() == 2);
}

/// The same two folds 1e-4 apart in x: p = x^3 - e^2 x, both inside one stride. Exact: p = ∓2 e^3/(3 sqrt 3).
#[test]
fn two_folds_inside_one_stride() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let model = place.path().join("near.model.ron");
    let e: f64 = 0.02;
    let text = format!(
        r#"(states: {{"x": (begin: -1.0)}}, parameters: {{"p": (value: -1.0)}}, rates: {{"x": "p + {}*x - x^3"}})"#,
        e * e
    );
    std::fs::write(&model, text).expect("a model written");
    let path = place.path().join("near.study.ron");
    let study = r#"(model: "near.model.ron", start: Equilibrium(near: {}), follow: (parameter: "p", from: -1, to: 1))"#;
    std::fs::write(&path, study).expect("a study written");
    let traced = armilla_tests::trace_file(&path);
    let exact = 2.0 * e.powi(3) / (3.0 * 3f64.sqrt());
    for (name, sign) in [("a/fold1", 1.0), ("a/fold2", -1.0)] {
        let fold = event(&traced, name);
        within(name, (fold.value, fold.error), (sign * exact, 0.0), 1e-13);
    }
}
