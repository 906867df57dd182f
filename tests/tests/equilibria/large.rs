//! X8 with many states: F = 1/(cos f - cos 2f), f = 2 pi l/n, frequency F (sin f + sin 2f) (van Kekem & Sterk 2018, Physica D
//! 367:38). Up to 200 states the linear systems are dense, beyond they are sparse.

use std::path::Path;

use armilla_record::{Event, EventKind};
use armilla_study::Traced;
use armilla_tests::{branch, within};

fn ring(folder: &Path, n: usize, (from, to): (f64, f64), branches: usize) -> Traced {
    let at = |k: usize| format!("x{}", k % n);
    let states: Vec<String> = (0..n).map(|k| format!("\"x{k}\": (begin: 0.5)")).collect();
    let rate = |k: usize| format!("\"x{k}\": \"{}*({} - {}) - x{k} + F\"", at(k + n - 1), at(k + 1), at(k + n - 2));
    let rates: Vec<String> = (0..n).map(rate).collect();
    let model = format!(
        "(states: {{{}}}, parameters: {{\"F\": (value: 0.85)}}, rates: {{{}}})",
        states.join(", "),
        rates.join(", ")
    );
    std::fs::write(folder.join("ring.model.ron"), model).expect("a model written");
    let study = format!(
        "(model: \"ring.model.ron\", start: Equilibrium(near: {{}}), follow: (parameter: \"F\", from: {from}, to: {to}), \
         pursue: (branches: {branches}))"
    );
    let path = folder.join("ring.study.ron");
    std::fs::write(&path, study).expect("a study written");
    armilla_tests::trace_file(&path)
}

/// Value and period of every Hopf point in a range, ascending.
fn exact(n: usize, (from, to): (f64, f64)) -> Vec<(f64, f64)> {
    let mut found: Vec<(f64, f64)> = (1..=n / 2)
        .map(|l| {
            let f = std::f64::consts::TAU * l as f64 / n as f64;
            let value = 1.0 / (f.cos() - (2.0 * f).cos());
            (value, std::f64::consts::TAU / (value * (f.sin() + (2.0 * f).sin())))
        })
        .filter(|(value, _)| *value > from && *value < to)
        .collect();
    found.sort_by(|a, b| a.0.total_cmp(&b.0));
    found
}

fn check(n: usize, range: (f64, f64), branches: usize) -> Traced {
    let place = tempfile::tempdir().expect("a temporary folder");
    let traced = ring(place.path(), n, range, branches);
    let found: Vec<&Event> = branch(&traced, "a").events.iter().filter(|event| event.kind == EventKind::Hopf).collect();
    let exact = exact(n, range);
    assert_eq!(
        found.len(),
        exact.len(),
        "{n} states: {:?} for {exact:?}",
        found.iter().map(|e| e.value).collect::<Vec<_>>()
    );
    for (hopf, (value, period)) in found.iter().zip(exact) {
        // The cosines of the reference are good to some units in the last place.
        within(&hopf.name, (hopf.value, hopf.error), (value, 1e-14), 1e-12);
        within(&hopf.name, (hopf.period, hopf.period_error), (period, 1e-13), 1e-12);
    }
    traced
}

/// n = 40, first at l = 8: 0.894427191; and the first cycles born there.
#[test]
fn ring_of_forty() {
    let traced = check(40, (0.4, 0.9), 2);
    let hopf = &branch(&traced, "a").events.iter().find(|event| event.kind == EventKind::Hopf).expect("a Hopf point");
    assert!((hopf.value - 0.894_427_191).abs() < 5e-10);
    let cycles = branch(&traced, "a.hopf1");
    assert!(cycles.points.iter().all(|point| point.unstable_count == 0));
    assert_eq!(cycles.points[cycles.points.len() - 1].value, 0.9);
}

/// On both sides of the change from dense to sparse systems.
#[test]
fn rings_of_two_hundred() {
    check(200, (0.4, 0.889), 1);
    check(201, (0.4, 0.889), 1);
}

/// A thousand states, seven Hopf points within 7e-4 of each other.
#[test]
fn ring_of_a_thousand() {
    let started = std::time::Instant::now();
    check(1000, (0.8, 0.8895), 1);
    eprintln!("a ring of a thousand: {:.0} s", started.elapsed().as_secs_f64());
}
