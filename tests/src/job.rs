//! The main job on a study written in a test.

use std::path::Path;
use std::sync::atomic::AtomicBool;

use armilla_record::{Branch, Event};
use armilla_study::{Silent, Study, TraceOptions, Traced, trace};

/// Traces a study of `models/NAME.model.ron` whose other fields are `fields`; the results folder is dropped.
///
/// # Panics
/// Where the study is refused or fails.
pub fn job(model: &str, fields: &str) -> Traced {
    run(model, fields, false)
}

/// The same with every branch followed to its first doubling only.
///
/// # Panics
/// Where the study is refused or fails.
pub fn cascade_job(model: &str, fields: &str) -> Traced {
    run(model, fields, true)
}

fn run(model: &str, fields: &str, cascade: bool) -> Traced {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("test.study.ron");
    let model = crate::case::model_path(model);
    std::fs::write(&path, format!("(model: {:?}, {fields})", model.display().to_string())).expect("a study written");
    done(&path, cascade)
}

/// Traces the study of a file.
///
/// # Panics
/// Where the study is refused or fails.
pub fn trace_file(path: &Path) -> Traced {
    done(path, false)
}

fn done(path: &Path, cascade: bool) -> Traced {
    let study = Study::read(path).unwrap_or_else(|fault| panic!("{fault}"));
    let options = TraceOptions { folder: None, replace: false, cascade, abort: &AtomicBool::new(false) };
    trace(&study, &options, &mut Silent).unwrap_or_else(|fault| panic!("{fault}"))
}

/// The branch with a name.
///
/// # Panics
/// Where there is none.
pub fn branch<'a>(traced: &'a Traced, name: &str) -> &'a Branch {
    let names: Vec<&str> = traced.branches.iter().map(|branch| branch.name.as_str()).collect();
    traced.branches.iter().find(|branch| branch.name == name).unwrap_or_else(|| panic!("no {name} among {names:?}"))
}

/// The event with a full name.
///
/// # Panics
/// Where there is none.
pub fn event<'a>(traced: &'a Traced, name: &str) -> &'a Event {
    let events = || traced.branches.iter().flat_map(|branch| &branch.events);
    let names: Vec<(&str, f64)> = events().map(|event| (event.name.as_str(), event.value)).collect();
    events().find(|event| event.name == name).unwrap_or_else(|| panic!("no {name} among {names:?}"))
}
