//! The main job on a study of `examples/`.

use std::path::PathBuf;
use std::sync::atomic::AtomicBool;

use armilla_study::{Silent, Study, TraceOptions, Traced, trace};

/// Traces `examples/NAME.study.ron`; the results folder is dropped.
///
/// # Panics
/// Where the study is refused or fails.
pub fn example_job(name: &str) -> Traced {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path: PathBuf = [env!("CARGO_MANIFEST_DIR"), "..", "examples", &format!("{name}.study.ron")].iter().collect();
    let study = Study::read(&path).unwrap_or_else(|fault| panic!("{fault}"));
    let folder = Some(place.path().join("results"));
    let options = TraceOptions { folder, replace: false, cascade: false, abort: &AtomicBool::new(false) };
    trace(&study, &options, &mut Silent).unwrap_or_else(|fault| panic!("{fault}"))
}
