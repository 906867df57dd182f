//! `export/<branch>.orbits.csv` and `export/quantities.csv`: cycles as one long table, and what its
//! columns are measured in.
//!
//! The states stand at the nodes of the profile, where they are exact; `docs/files.md` says how to go
//! between nodes.

use std::io::{self, Write};
use std::path::Path;

use crate::atomic::write_atomic;
use crate::branch_table::cell;
use crate::export::{Orbit, orbits};
use crate::{Branch, RecordError};

/// The columns before those of the states. None of them ends as those do, in `_value`, so that no name
/// of a state can meet them.
const FIRST_COLUMNS: [&str; 6] = ["orbit", "parameter", "period", "turns", "scaled_time", "time"];

/// Writes the cycles of a branch, one row per node, atomically.
///
/// # Errors
/// What the machine refused.
pub(crate) fn write_orbit_table(path: &Path, branch: &Branch) -> Result<(), RecordError> {
    write_atomic(path, |out| {
        let mut writer = csv::Writer::from_writer(out);
        let states = branch.states.iter().map(|state| format!("{}_value", state.name));
        writer.write_record(FIRST_COLUMNS.map(String::from).into_iter().chain(states))?;
        orbits(branch).iter().try_for_each(|orbit| rows(&mut writer, orbit))?;
        writer.flush()
    })
}

fn rows<W: Write>(writer: &mut csv::Writer<W>, orbit: &Orbit<'_>) -> io::Result<()> {
    let profile = orbit.profile;
    let (value, period) = (cell(Some(orbit.value)), cell(Some(profile.period)));
    let turns = orbit.turns.to_string();
    for (node, time) in profile.node_times().into_iter().enumerate() {
        let first = [
            orbit.name.clone(),
            value.clone(),
            period.clone(),
            turns.clone(),
            cell(Some(time)),
            cell(Some(time * profile.period)),
        ];
        let states = profile.node(node).iter().map(|state| cell(Some(*state)));
        writer.write_record(first.into_iter().chain(states))?;
    }
    Ok(())
}

/// Writes names, labels and units of the states and of the followed parameter, atomically.
///
/// # Errors
/// What the machine refused.
pub(crate) fn write_quantities(path: &Path, branch: &Branch) -> Result<(), RecordError> {
    write_atomic(path, |out| {
        let mut writer = csv::Writer::from_writer(out);
        writer.write_record(["role", "name", "label", "unit"])?;
        let states = branch.states.iter().map(|state| ("state", state));
        for (role, quantity) in states.chain([("parameter", &branch.parameter)]) {
            writer.write_record([role, &quantity.name, &quantity.label, &quantity.unit])?;
        }
        writer.flush()
    })
}
