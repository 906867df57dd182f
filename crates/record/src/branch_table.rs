//! `branches/<branch>.csv`: one row per point, for other tools.
//!
//! RFC 4180 with one header row, lines ended by a line feed. Numbers read back to the same 64 bits.

use std::io::{self, Write};
use std::path::Path;

use crate::atomic::write_atomic;
use crate::{Branch, Point, RecordError};

/// The columns before those of the states and multipliers.
const FIRST_COLUMNS: [&str; 9] = [
    "point",
    "value",
    "period",
    "turns",
    "stable",
    "unstable_count",
    "trivial_defect",
    "liouville_defect",
    "profile_error",
];

/// The columns after them.
const LAST_COLUMNS: [&str; 7] =
    ["degree", "intervals", "choice", "reached", "unresolved_count", "unresolved_below", "unresolved_log_sum"];

/// Writes the table of a branch, atomically.
///
/// # Errors
/// What the machine refused.
pub fn write_branch_table(path: &Path, branch: &Branch) -> Result<(), RecordError> {
    write_atomic(path, |out| table(out, branch))
}

/// The header of a branch's table.
pub fn branch_columns(branch: &Branch) -> Vec<String> {
    let mut columns: Vec<String> = FIRST_COLUMNS.iter().map(ToString::to_string).collect();
    for state in &branch.states {
        columns.extend(["max", "min", "mean"].map(|measure| format!("{}_{measure}", state.name)));
    }
    for k in 1..=n_multipliers(branch) {
        columns.extend(["log_modulus", "angle"].map(|part| format!("multiplier{k}_{part}")));
    }
    columns.extend(LAST_COLUMNS.map(String::from));
    for k in 1..=n_eigenvalues(branch) {
        columns.extend(["re", "im"].map(|part| format!("eigenvalue{k}_{part}")));
    }
    columns
}

/// The largest number of eigenvalues of any point; 0 for a branch of cycles.
fn n_eigenvalues(branch: &Branch) -> usize {
    branch.points.iter().map(|point| point.eigenvalues.len()).max().unwrap_or(0)
}

/// The largest number of multipliers of any point; fewer leave cells empty.
fn n_multipliers(branch: &Branch) -> usize {
    branch.points.iter().map(|point| point.multipliers.len()).max().unwrap_or(0)
}

fn table(out: &mut dyn Write, branch: &Branch) -> io::Result<()> {
    let mut writer = csv::Writer::from_writer(out);
    writer.write_record(branch_columns(branch))?;
    let (n_states, n_multipliers, n_eigenvalues) = (branch.states.len(), n_multipliers(branch), n_eigenvalues(branch));
    for (k, point) in branch.points.iter().enumerate() {
        let cells = first_cells(k, point, n_states).into_iter();
        let states = (0..n_states).flat_map(|i| [&point.maxima, &point.minima, &point.means].map(|all| all.get(i)));
        let multipliers = (0..n_multipliers).flat_map(|i| {
            let multiplier = point.multipliers.get(i);
            [multiplier.map(|m| &m.log_modulus), multiplier.map(|m| &m.angle)]
        });
        let middle = states.chain(multipliers).map(|value| cell(value.copied()));
        let eigenvalues = (0..n_eigenvalues).flat_map(|i| {
            let eigenvalue = point.eigenvalues.get(i);
            [eigenvalue.map(|value| value.re), eigenvalue.map(|value| value.im)].map(cell)
        });
        writer.write_record(cells.chain(middle).chain(last_cells(point)).chain(eigenvalues))?;
    }
    writer.flush()
}

/// Under a forcing as many multipliers as states are there, and none is trivial.
fn has_trivial_multiplier(point: &Point, n_states: usize) -> bool {
    point.multipliers.len() + point.unresolved.map_or(0, |unresolved| unresolved.count) < n_states
}

fn first_cells(k: usize, point: &Point, n_states: usize) -> [String; FIRST_COLUMNS.len()] {
    [
        k.to_string(),
        cell(Some(point.value)),
        cell(Some(point.period).filter(|period| *period != 0.0)),
        point.turns.to_string(),
        point.is_stable().to_string(),
        point.unstable_count.to_string(),
        cell(has_trivial_multiplier(point, n_states).then_some(point.trivial_defect)),
        cell(Some(point.liouville_defect)),
        cell(Some(point.profile_error)),
    ]
}

fn last_cells(point: &Point) -> [String; LAST_COLUMNS.len()] {
    [
        point.degree.to_string(),
        point.intervals.to_string(),
        point.choice.word().into(),
        point.reached.word().into(),
        point.unresolved.map_or(0, |unresolved| unresolved.count).to_string(),
        cell(point.unresolved.map(|unresolved| unresolved.below)),
        cell(point.unresolved.map(|unresolved| unresolved.log_sum)),
    ]
}

/// The shortest decimal that reads back to the same bits; empty where nothing applies.
pub(crate) fn cell(value: Option<f64>) -> String {
    value.map_or_else(String::new, |value| format!("{value:?}"))
}
