//! A forcing that does not repeat with the stated period is refused when it is read, with the way out.

use std::path::Path;

use armilla_study::{ErrorClass, Study};

const MODEL: &str = r#"(
    states: { "x": (begin: 0.0), "v": (begin: 0.0) },
    parameters: { "omega": (value: 1.0), "f": (value: 1.0) },
    rates: { "x": "v", "v": "f*cos(omega*t) - 0.2*v - x" },
    forcing: (period: "PERIOD"),
)"#;

fn refusal(place: &Path, period: &str, fields: &str) -> Option<String> {
    std::fs::write(place.join("a.model.ron"), MODEL.replace("PERIOD", period)).expect("a model written");
    let path = place.join("a.study.ron");
    std::fs::write(&path, format!("(model: \"a.model.ron\", {fields})")).expect("a study written");
    let error = Study::read(&path).err()?;
    assert_eq!(error.class(), ErrorClass::Input);
    Some(error.to_string())
}

/// By hand: cos(omega t) repeats with 2 pi/omega, and with 2 pi where omega is whole only.
#[test]
fn wherever_the_study_goes() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let omega = r#"start: Settle(), follow: (parameter: "omega", from: 1.0, to: 2.0)"#;
    let strength = r#"start: Settle(), follow: (parameter: "f", from: 0.5, to: 2.0)"#;
    assert_eq!(refusal(place.path(), "2*pi/omega", omega), None);
    assert_eq!(refusal(place.path(), "2*pi", strength), None);
    assert_eq!(refusal(place.path(), "4*pi/omega", omega), None);
    // Wrong with the values of the model.
    let message = refusal(place.path(), "pi/omega", strength).expect("a refusal");
    assert!(
        message.contains("a.model.ron:5:") && message.contains("^^^") && message.contains("help: state a period"),
        "{message}"
    );
    // Right at both ends of the range, wrong between.
    let message = refusal(place.path(), "2*pi", omega).expect("a refusal");
    assert!(message.contains("a.study.ron:1:") && message.contains("`omega` = 1."), "{message}");
    // Right in the model, wrong with what the study sets.
    let set = r#"set: {"omega": 1.5}, start: Settle(), follow: (parameter: "f", from: 0.5, to: 2.0)"#;
    assert!(refusal(place.path(), "2*pi", set).is_some());
    // A period that is none somewhere in the range.
    let through_zero = r#"start: Settle(), follow: (parameter: "omega", from: 0.0, to: 2.0)"#;
    let message = refusal(place.path(), "2*pi/omega", through_zero).expect("a refusal");
    assert!(message.contains("the period of the forcing is inf"), "{message}");
    // A forced model has no states of rest.
    let rest = r#"start: Equilibrium(near: {"x": 0.0}), follow: (parameter: "f", from: 0.5, to: 2.0)"#;
    let message = refusal(place.path(), "2*pi/omega", rest).expect("a refusal");
    assert!(message.contains("a forced model has no states of rest"), "{message}");
}
