//! The main job from a table of samples written in a test.

use std::sync::atomic::AtomicBool;

use armilla_study::{Silent, Study, StudyError, TraceOptions, Traced, trace};

/// Traces a study of `models/NAME.model.ron` with the fields `fields`, beside which `cycle.csv` holds `table`.
///
/// # Errors
/// What the study is refused for, or fails by.
///
/// # Panics
/// Where nothing can be written.
pub fn sampled_job(model: &str, table: &str, fields: &str) -> Result<Traced, StudyError> {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("test.study.ron");
    let model = crate::case::model_path(model);
    std::fs::write(place.path().join("cycle.csv"), table).expect("a table written");
    std::fs::write(&path, format!("(model: {:?}, {fields})", model.display().to_string())).expect("a study written");
    let study = Study::read(&path)?;
    let options = TraceOptions { folder: None, replace: false, cascade: false, abort: &AtomicBool::new(false) };
    trace(&study, &options, &mut Silent)
}
