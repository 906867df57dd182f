//! `thresholds.csv`: one row per event of all branches, and reading it back.
//!
//! Rows stand in order of descent (see [`crate::descent_order`]); within a branch in the order along
//! it, then by kind. Never in the order of time, so that the table does not depend on threads.

use std::path::Path;

use crate::atomic::write_atomic;
use crate::branch_table::cell;
use crate::descent::{along_branch, descent_order};
use crate::{Branch, Criticality, Event, EventKind, RecordError};

/// The columns of `thresholds.csv`. Later ones are only ever added at the end.
pub const THRESHOLD_COLUMNS: [&str; 12] = [
    "event",
    "branch",
    "kind",
    "parameter",
    "value",
    "error",
    "period",
    "period_error",
    "turns",
    "angle",
    "criticality",
    "note",
];

/// One row of `thresholds.csv`: an event as a number for the user.
#[derive(Clone, Debug, PartialEq)]
pub struct Threshold {
    /// Full name of the event, `<branch>/<kind><number>`.
    pub event: String,
    /// Name of the branch.
    pub branch: String,
    /// Kind of the event.
    pub kind: EventKind,
    /// Name of the followed parameter.
    pub parameter: String,
    /// Value of the followed parameter, in its unit.
    pub value: f64,
    /// Estimated absolute error of `value`, in the same unit.
    pub error: Option<f64>,
    /// Period, in the model's time unit; infinite where it grows without bound, none at an equilibrium but a Hopf point.
    pub period: Option<f64>,
    /// Estimated absolute error of `period`.
    pub period_error: Option<f64>,
    /// Turns the cycle makes before it closes.
    pub turns: usize,
    /// Angle of the critical multiplier in radians in (-pi, pi].
    pub angle: Option<f64>,
    /// Side on which the new solution is born.
    pub criticality: Option<Criticality>,
    /// Anything else, in words.
    pub note: String,
}

impl Threshold {
    /// The rows of all events, in order of descent.
    pub fn rows(branches: &[Branch]) -> Vec<Threshold> {
        let mut rows = Vec::new();
        for k in descent_order(branches) {
            let branch = &branches[k];
            let mut events: Vec<&Event> = branch.events.iter().collect();
            events.sort_by(|a, b| along_branch(a, b));
            rows.extend(events.into_iter().map(|event| Self::new(branch, event)));
        }
        rows
    }

    fn new(branch: &Branch, event: &Event) -> Self {
        Self {
            event: event.name.clone(),
            branch: branch.name.clone(),
            kind: event.kind,
            parameter: branch.parameter.name.clone(),
            value: event.value,
            error: event.error,
            // That of a limit is infinite; the event's own is that of the last cycle before it.
            period: (event.kind != EventKind::PeriodBlowUp && event.period != 0.0).then_some(event.period),
            period_error: event.period_error.filter(|_| event.kind != EventKind::PeriodBlowUp),
            turns: event.turns,
            angle: event.angle,
            criticality: event.criticality,
            note: event.note.clone(),
        }
    }

    fn cells(&self) -> [String; THRESHOLD_COLUMNS.len()] {
        [
            self.event.clone(),
            self.branch.clone(),
            self.kind.word().to_string(),
            self.parameter.clone(),
            cell(Some(self.value)),
            cell(self.error),
            cell(self.period),
            cell(self.period_error),
            self.turns.to_string(),
            cell(self.angle),
            self.criticality.map_or("", Criticality::word).to_string(),
            self.note.clone(),
        ]
    }

    fn has_nan(&self) -> bool {
        let numbers = [Some(self.value), self.error, self.period, self.period_error, self.angle];
        numbers.into_iter().flatten().any(f64::is_nan)
    }
}

/// Writes `thresholds.csv`, atomically, in the order given.
///
/// # Errors
/// [`RecordError::Inconsistent`] for a row with something that is not a number, or what the machine
/// refused.
pub fn write_threshold_table(path: &Path, rows: &[Threshold]) -> Result<(), RecordError> {
    if let Some(row) = rows.iter().find(|row| row.has_nan()) {
        return Err(RecordError::inconsistent(path, format!("{} holds something that is not a number", row.event)));
    }
    write_atomic(path, |out| {
        let mut writer = csv::Writer::from_writer(out);
        writer.write_record(THRESHOLD_COLUMNS)?;
        rows.iter().try_for_each(|row| writer.write_record(row.cells()))?;
        writer.flush()
    })
}

/// Reads `thresholds.csv` from its bytes; `path` is for messages. Columns that a later version has
/// added at the end are passed over.
///
/// # Errors
/// [`RecordError::Malformed`] with the line, and the number of the field as column.
pub fn parse_threshold_table(path: &Path, bytes: &[u8]) -> Result<Vec<Threshold>, RecordError> {
    let mut reader = csv::ReaderBuilder::new().has_headers(false).from_reader(bytes);
    let mut records = reader.records();
    let header = records.next().transpose().map_err(|error| malformed_table(path, &error))?.unwrap_or_default();
    for (k, &name) in THRESHOLD_COLUMNS.iter().enumerate() {
        if header.get(k) != Some(name) {
            return Err(RecordError::Malformed {
                path: path.to_path_buf(),
                line: 1,
                column: k + 1,
                what: format!("column {} must be `{name}`, found `{}`", k + 1, header.get(k).unwrap_or_default()),
            });
        }
    }
    records
        .map(|record| {
            let record = record.map_err(|error| malformed_table(path, &error))?;
            let line = record.position().map_or(0, |place| place.line() as usize);
            parse_row(&record).map_err(|(k, wanted)| RecordError::Malformed {
                path: path.to_path_buf(),
                line,
                column: k + 1,
                what: format!("`{}` in column `{}` is not {wanted}", &record[k], THRESHOLD_COLUMNS[k]),
            })
        })
        .collect()
}

fn malformed_table(path: &Path, error: &csv::Error) -> RecordError {
    let line = error.position().map_or(1, |place| place.line() as usize);
    RecordError::Malformed { path: path.to_path_buf(), line, column: 1, what: error.to_string() }
}

/// A row, or the index of the field that cannot be read and what it should have been.
fn parse_row(record: &csv::StringRecord) -> Result<Threshold, (usize, &'static str)> {
    let number = |k: usize| record[k].parse::<f64>().ok().filter(|x| !x.is_nan()).ok_or((k, "a number"));
    let optional = |k: usize| if record[k].is_empty() { Ok(None) } else { number(k).map(Some) };
    let kind = EventKind::ALL.into_iter().find(|kind| kind.word() == &record[2]).ok_or((2, "a kind of event"))?;
    let sides = [Criticality::Supercritical, Criticality::Subcritical];
    let criticality = match &record[10] {
        "" => None,
        word => Some(sides.into_iter().find(|side| side.word() == word).ok_or((10, "a criticality"))?),
    };
    Ok(Threshold {
        event: record[0].to_string(),
        branch: record[1].to_string(),
        kind,
        parameter: record[3].to_string(),
        value: number(4)?,
        error: optional(5)?,
        period: optional(6)?,
        period_error: optional(7)?,
        turns: record[8].parse().map_err(|_| (8, "a whole number"))?,
        angle: optional(9)?,
        criticality,
        note: record[11].to_string(),
    })
}
