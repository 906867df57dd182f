//! Models that conserve something or have a continuous symmetry, by hand, started at rest and on a cycle.

use std::sync::atomic::AtomicBool;

use armilla_record::EventKind;
use armilla_study::{ErrorClass, Silent, Study, StudyError, TraceOptions, Traced, trace};

fn run(states: &str, rates: &str, start: &str) -> Result<Traced, StudyError> {
    let place = tempfile::tempdir().expect("a temporary folder");
    let model = format!(r#"(states: {{{states}}}, parameters: {{"p": (value: 3.0)}}, rates: {{{rates}}})"#);
    std::fs::write(place.path().join("family.model.ron"), model).expect("a model written");
    let study = format!(r#"(model: "family.model.ron", start: {start}, follow: (parameter: "p", from: 1.0, to: 5.0))"#);
    let path = place.path().join("family.study.ron");
    std::fs::write(&path, study).expect("a study written");
    let study = Study::read(&path).unwrap_or_else(|fault| panic!("{fault}"));
    let options = TraceOptions { folder: None, replace: false, cascade: false, abort: &AtomicBool::new(false) };
    trace(&study, &options, &mut Silent)
}

#[track_caller]
fn refused(outcome: Result<Traced, StudyError>, why: &str) {
    let fault = outcome.expect_err("refused");
    assert_eq!(fault.class(), ErrorClass::Input, "{fault}");
    let said = fault.to_string();
    assert!(said.contains("come in families") && said.contains(why) && said.contains("help: "), "{said}");
}

const XYZ: &str = r#""x": (begin: 1.5), "y": (begin: 3.0), "z": (begin: 0.2)"#;
/// The Brusselator with a third substance that takes what the two lose: x + y + z stays.
const CLOSED: &str =
    r#""x": "1 - (p + 1)*x + x^2*y", "y": "p*x - x^2*y", "z": "-(1 - (p + 1)*x + x^2*y) - (p*x - x^2*y)""#;
/// An oscillation in each half-plane through the axis x = y = 0.
const MERIDIANS: &str = r#""x": "x*z/2", "y": "y*z/2", "z": "p*(1 - log(x^2 + y^2)^2)*z/3 - log(x^2 + y^2)""#;

#[test]
fn a_conserved_sum_is_named() {
    refused(run(XYZ, CLOSED, r#"Settle(at: {"p": 3.0})"#), "x + y + z keeps its value along every solution");
    refused(run(XYZ, CLOSED, r#"Equilibrium(near: {"x": 1.0, "y": 3.0})"#), "x + y + z keeps its value");
}

#[test]
fn a_rotation_is_named() {
    let why = "a continuous symmetry (x' = y, y' = -x) carries";
    refused(run(XYZ, MERIDIANS, r#"Settle(at: {"p": 3.0})"#), why);
    refused(run(XYZ, MERIDIANS, r#"Equilibrium(near: {"x": 1.0, "y": 0.0, "z": 0.0})"#), why);
}

/// Volterra's prey and predator: a centre at every value of the parameter, cycles about it in families.
#[test]
fn a_centre_is_no_hopf_point() {
    let (states, rates) = (r#""x": (begin: 1.2), "y": (begin: 2.0)"#, r#""x": "x*(p - y)", "y": "y*(x - 1)""#);
    let traced =
        run(states, rates, r#"Equilibrium(near: {"x": 1.0, "y": 3.0})"#).unwrap_or_else(|fault| panic!("{fault}"));
    let kinds: Vec<EventKind> = traced.branches[0].events.iter().map(|event| event.kind).collect();
    assert_eq!(kinds, [EventKind::Edge, EventKind::Start, EventKind::Edge]);
    assert!(traced.notes.iter().any(|note| note.contains("come in families")), "{:?}", traced.notes);
    refused(run(states, rates, r#"Settle(at: {"p": 3.0})"#), "keeps its value along every solution");
}
