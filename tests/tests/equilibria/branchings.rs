//! Branches of equilibria that cross.

use armilla_record::{Criticality, EndReason, EventKind};
use armilla_tests::{branch, event, job, within};

/// Exact, see the model: pitchforks at p = ±1 of a line and a circle, the circle stable, followed once and closed.
#[test]
fn a_circle_across_a_line() {
    let traced = job("rest_circle", r#"start: Equilibrium(near: {}), follow: (parameter: "p", from: -3, to: 3)"#);
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    for (name, exact) in [("a/pitchfork1", -1.0), ("a/pitchfork2", 1.0)] {
        let found = event(&traced, name);
        within(name, (found.value, found.error), (exact, 0.0), 1e-13);
        assert_eq!(found.criticality, Some(Criticality::Supercritical));
    }
    let names: Vec<&str> = traced.branches.iter().map(|branch| branch.name.as_str()).collect();
    assert_eq!(names, ["a", "a.pitchfork1"]);
    let circle = branch(&traced, "a.pitchfork1");
    assert_eq!(circle.ends.0.reason, EndReason::Closed);
    assert!(circle.points.iter().all(|point| (point.maxima[0].hypot(point.value) - 1.0).abs() < 1e-12));
    assert!(circle.points.iter().all(|point| point.unstable_count == 0));
    assert_eq!(event(&traced, "a.pitchfork1/pitchfork1").note, "a crosses here, at a/pitchfork2");
}

/// Exact, see the model: transcriticals at p = ±1; the parabola is met at both and followed once, both ways to the edge.
#[test]
fn a_parabola_across_a_line() {
    let traced = job("rest_parabola", r#"start: Equilibrium(near: {}), follow: (parameter: "p", from: -3, to: 3)"#);
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    for (name, exact) in [("a/transcritical1", -1.0), ("a/transcritical2", 1.0)] {
        let found = event(&traced, name);
        within(name, (found.value, found.error), (exact, 0.0), 1e-13);
        assert_eq!(found.criticality, None);
    }
    let names: Vec<&str> = traced.branches.iter().map(|branch| branch.name.as_str()).collect();
    assert_eq!(names, ["a", "a.transcritical1"]);
    let parabola = branch(&traced, "a.transcritical1");
    assert!(parabola.ends.0.reason == EndReason::Edge && parabola.ends.1.reason == EndReason::Edge);
    assert_eq!((parabola.points[0].value, parabola.points[parabola.points.len() - 1].value), (-3.0, 3.0));
    for point in &parabola.points {
        assert!((point.maxima[0] - (point.value.powi(2) - 1.0)).abs() < 1e-11, "{point:?}");
        // At the birth itself the count is that of its neighbours.
        let stable = point.value.abs() < 1.0;
        assert!(point.is_stable() == stable || (point.value.abs() - 1.0).abs() < 1e-9, "{point:?}");
    }
    let line = branch(&traced, "a");
    assert!(line.events.iter().all(|event| event.kind != EventKind::Fold));
}

/// Lorenz 1963: the origin loses its stability at r = 1 exactly, and a pair x = y = ±sqrt(b (r - 1)), z = r - 1 is born.
#[test]
fn the_pair_of_convection() {
    let traced =
        job("lorenz", r#"start: Equilibrium(near: {}), set: {"r": 0.5}, follow: (parameter: "r", from: 0.1, to: 20)"#);
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let found = event(&traced, "a/pitchfork1");
    within("pitchfork", (found.value, found.error), (1.0, 0.0), 1e-12);
    assert_eq!(found.criticality, Some(Criticality::Supercritical));
    let pair = branch(&traced, "a.pitchfork1");
    let b = 8.0 / 3.0;
    for point in &pair.points {
        let z = point.value - 1.0;
        let x = (b * z.max(0.0)).sqrt();
        // x is the root of what rounding leaves of r - 1.
        let off = (point.maxima[0].abs() - x).abs();
        assert!(off < 1e-11 || (off < 1e-7 && z.abs() < 1e-12), "{point:?}");
    }
    let ends = [pair.points[0].maxima[0], pair.points[pair.points.len() - 1].maxima[0]];
    assert!(ends[0] * ends[1] < 0.0 && pair.points.iter().all(|point| point.unstable_count == 0), "{ends:?}");
}

/// Exact, by hand: x' = p x + x^3 has its pair where the line is still stable: subcritical.
#[test]
fn a_subcritical_pair() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let text = r#"(states: {"x": (begin: 0.0), "y": (begin: 1.0)}, parameters: {"p": (value: -1.0)},
                   rates: {"x": "p*x + x^3", "y": "x^2 - y"})"#;
    std::fs::write(place.path().join("pair.model.ron"), text).expect("a model written");
    let path = place.path().join("pair.study.ron");
    let study = r#"(model: "pair.model.ron", start: Equilibrium(near: {}), follow: (parameter: "p", from: -2, to: 1))"#;
    std::fs::write(&path, study).expect("a study written");
    let traced = armilla_tests::trace_file(&path);
    let found = event(&traced, "a/pitchfork1");
    within("pitchfork", (found.value, found.error), (0.0, 0.0), 1e-13);
    assert_eq!(found.criticality, Some(Criticality::Subcritical));
    let pair = branch(&traced, "a.pitchfork1");
    assert!(pair.points.iter().all(|point| point.unstable_count == 1 && point.value <= 1e-12));
}
