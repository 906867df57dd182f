//! `cascade.csv`: the thresholds of a doubling sequence and the value they tend to.

use std::path::Path;

use crate::RecordError;
use crate::atomic::write_atomic;

/// Columns of `cascade.csv`. Later columns are only ever added at the end.
pub const CASCADE_COLUMNS: [&str; 7] =
    ["event", "turns", "threshold", "error", "ratio", "predicted", "predicted_error"];

/// One threshold of a doubling sequence, or, as the last row, `accumulation`: the value the thresholds tend to.
#[derive(Clone, Debug, PartialEq)]
pub struct CascadeRow {
    /// Full name of the doubling, or `accumulation`.
    pub event: String,
    /// Turns of the cycle that doubles; none for the accumulation.
    pub turns: Option<usize>,
    /// Value of the followed parameter, in its unit.
    pub value: f64,
    /// Estimated absolute error of it.
    pub error: Option<f64>,
    /// Ratio of the last two intervals between thresholds, from the third threshold on.
    pub ratio: Option<f64>,
    /// Where the threshold was predicted from those before it, from the third on.
    pub predicted: Option<f64>,
    /// Estimated absolute error of that.
    pub predicted_error: Option<f64>,
}

/// Writes `cascade.csv`, atomically.
///
/// # Errors
/// [`RecordError::Inconsistent`] for a row with something that is not finite, or what the machine refused.
pub fn write_cascade_table(path: &Path, rows: &[CascadeRow]) -> Result<(), RecordError> {
    let numbers = |row: &CascadeRow| [Some(row.value), row.error, row.ratio, row.predicted, row.predicted_error];
    let finite = |row: &CascadeRow| numbers(row).into_iter().flatten().all(f64::is_finite);
    if let Some(row) = rows.iter().find(|row| !finite(row)) {
        return Err(RecordError::inconsistent(path, format!("{} holds something that is not finite", row.event)));
    }
    let cell = |number: Option<f64>| number.map_or(String::new(), |number| format!("{number:?}"));
    write_atomic(path, |out| {
        let mut writer = csv::Writer::from_writer(out);
        writer.write_record(CASCADE_COLUMNS)?;
        for row in rows {
            let turns = row.turns.map_or(String::new(), |turns| turns.to_string());
            writer.write_record([row.event.clone(), turns].into_iter().chain(numbers(row).map(cell)))?;
        }
        writer.flush()
    })
}
