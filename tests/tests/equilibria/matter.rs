//! Starts, records and words.

use std::sync::atomic::AtomicBool;

use armilla_record::{EventKind, Results, Solutions};
use armilla_study::{Silent, Study, StudyError, TraceOptions, trace};
use armilla_tests::{branch, event, job};

/// A motion that settles at rest is followed from there: X1 at mu = -0.2, exact as from a given equilibrium.
#[test]
fn settling_at_rest_goes_on() {
    let fields = r#"start: Settle(at: {"mu": -0.2}), follow: (parameter: "mu", from: -0.5, to: 0.5)"#;
    let traced = job("x1", fields);
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    assert_eq!(branch(&traced, "a").of, Solutions::Equilibria);
    let hopf = event(&traced, "a/hopf1");
    assert!(hopf.value.abs() <= hopf.error.expect("an error"), "{}", hopf.value);
    assert_eq!(branch(&traced, "a.hopf1").of, Solutions::Cycles);
}

/// A start on the Hopf point itself still finds it: X1 at mu = 0.
#[test]
fn a_start_on_an_event() {
    let fields =
        r#"start: Equilibrium(near: {"x": 0, "y": 0}), set: {"mu": 0}, follow: (parameter: "mu", from: -0.5, to: 0.5)"#;
    let traced = job("x1", fields);
    let hopfs = || traced.branches.iter().flat_map(|branch| &branch.events).filter(|e| e.kind == EventKind::Hopf);
    assert_eq!(hopfs().count(), 1, "{:?}", hopfs().map(|e| (&e.name, e.value)).collect::<Vec<_>>());
    assert!(hopfs().all(|hopf| hopf.value.abs() < 1e-14));
    assert_eq!(branch(&traced, "a.hopf1").points[0].value, hopfs().next().expect("one").value);
}

/// A range that ends on the Hopf point: X1 up to mu = 0, where the cycles lead out of it.
#[test]
fn an_event_on_the_edge() {
    let fields =
        r#"start: Equilibrium(near: {"x": 0}), set: {"mu": -0.2}, follow: (parameter: "mu", from: -0.5, to: 0)"#;
    let traced = job("x1", fields);
    let hopf = event(&traced, "a/hopf1");
    assert!(hopf.value.abs() < 1e-14);
    assert_eq!(traced.branches.len(), 1);
    assert!(branch(&traced, "a").points.iter().all(|point| point.is_stable()));
}

/// What is written is read back: eigenvalues in the table, no period at rest, that of the cycles at the Hopf point.
#[test]
fn records_of_equilibria() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let model: std::path::PathBuf = [env!("CARGO_MANIFEST_DIR"), "models", "x1.model.ron"].iter().collect();
    let study = format!(
        "(model: {:?}, start: Equilibrium(near: {{}}), set: {{\"mu\": -0.2}}, follow: (parameter: \"mu\", from: -0.5, to: 0.5))",
        model.display().to_string()
    );
    let path = place.path().join("rest.study.ron");
    std::fs::write(&path, study).expect("a study written");
    let study = Study::read(&path).expect("a study");
    let options = TraceOptions { folder: None, replace: false, cascade: false, abort: &AtomicBool::new(false) };
    let traced = trace(&study, &options, &mut Silent).expect("done");
    let read = Results::open(&traced.folder).expect("results").read_branch("a").expect("a branch");
    assert_eq!(&read, branch(&traced, "a"));
    let table = std::fs::read_to_string(traced.folder.join("branches/a.csv")).expect("a table");
    let mut lines = table.lines();
    let header: Vec<&str> = lines.next().expect("a header").split(',').collect();
    assert_eq!(header[header.len() - 4..], ["eigenvalue1_re", "eigenvalue1_im", "eigenvalue2_re", "eigenvalue2_im"]);
    for line in lines {
        let cells: Vec<&str> = line.split(',').collect();
        let number = |k: usize| cells[k].parse::<f64>().expect("a number");
        // Exact: mu ± i.
        let n = cells.len();
        assert!((number(n - 4) - number(1)).abs() < 1e-14 && (number(n - 3) - 1.0).abs() < 1e-14, "{line}");
        assert_eq!(cells[2], "", "an equilibrium has no period");
    }
    let thresholds = std::fs::read_to_string(traced.folder.join("thresholds.csv")).expect("a table");
    let row = thresholds.lines().find(|line| line.starts_with("a/hopf1,")).expect("the Hopf point");
    let period: f64 = row.split(',').nth(6).and_then(|cell| cell.parse().ok()).expect("a period");
    assert!((period - std::f64::consts::TAU).abs() < 1e-13);
    let edge = thresholds.lines().find(|line| line.starts_with("a/edge1,")).expect("an edge");
    assert_eq!(edge.split(',').nth(6), Some(""));
    let figure = std::fs::read_to_string(traced.folder.join("figures/diagram1.svg")).expect("a figure");
    assert!(figure.contains("equilibria"));
}

fn refused(model: &str, fields: &str) -> StudyError {
    let place = tempfile::tempdir().expect("a temporary folder");
    std::fs::write(place.path().join("m.model.ron"), model).expect("a model written");
    let path = place.path().join("m.study.ron");
    std::fs::write(&path, format!("(model: \"m.model.ron\", {fields})")).expect("a study written");
    let study = match Study::read(&path) {
        Ok(study) => study,
        Err(error) => return error,
    };
    let options = TraceOptions { folder: None, replace: false, cascade: false, abort: &AtomicBool::new(false) };
    let error = trace(&study, &options, &mut Silent).expect_err("nothing to follow");
    assert!(!place.path().join("m.results").exists(), "nothing is written");
    error
}

/// No equilibrium at all, one of a continuum, a name that is none, a rate that is not finite: words and a way out.
#[test]
fn starts_that_find_nothing() {
    let follow = r#"start: Equilibrium(near: {}), follow: (parameter: "p", from: -1, to: 1)"#;
    let model = |rates: &str| {
        format!(
            r#"(states: {{"x": (begin: 0.5), "y": (begin: 0.5)}}, parameters: {{"p": (value: 0.5)}}, rates: {{{rates}}})"#
        )
    };
    let none = refused(&model(r#""x": "p + 1 + x^2", "y": "x - y""#), follow).to_string();
    assert!(none.starts_with("no equilibrium to follow: Newton's method came to stand at x = "), "{none}");
    assert!(none.contains("help: give states nearer to one"), "{none}");
    let continuum = refused(&model(r#""x": "p*(y - x)", "y": "x - y""#), follow).to_string();
    assert!(continuum.contains("x + 0.5*y keeps its value"), "{continuum}");
    let wrong = follow.replace("{}", r#"{"xx": 1}"#);
    let name = refused(&model(r#""x": "p - x", "y": "x - y""#), &wrong).to_string();
    assert!(name.contains("the model has no state `xx`") && name.contains("did you mean `x`?"), "{name}");
    let infinite = refused(&model(r#""x": "1/(y - 0.5)", "y": "x - y""#), follow).to_string();
    assert!(infinite.contains("the rate of `x` is not finite at the start"), "{infinite}");
}
