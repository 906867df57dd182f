//! A results folder for other tools: `export/` with the tables and orbits of every branch.
//!
//! What is exported is copied from the branch files, which stay the record: it can be removed and made
//! again at any time.

use std::path::PathBuf;

use crate::export_arrays::write_arrays;
use crate::export_table::{write_orbit_table, write_quantities};
use crate::file_name::branch_file_stem;
use crate::results::make_folder;
use crate::{Branch, Profile, RecordError, Results, write_branch_table};

/// A format to export to.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ExportFormat {
    /// Comma-separated tables: points and orbits of each branch, and the units.
    Csv,
    /// One archive of NumPy arrays a branch.
    Npz,
}

/// A cycle that a branch keeps, with what belongs to it.
pub(crate) struct Orbit<'a> {
    /// Name of the event, or `<branch>/point<index>`.
    pub name: String,
    /// Index of the point, none for an event.
    pub point: Option<usize>,
    pub value: f64,
    pub turns: usize,
    pub distance: f64,
    pub profile: &'a Profile,
}

/// All cycles that a branch keeps, in the order along it; at equal distance the point before its events.
pub(crate) fn orbits(branch: &Branch) -> Vec<Orbit<'_>> {
    let points = branch.profiles.iter().filter_map(|stored| {
        let point = branch.points.get(stored.point)?;
        Some(Orbit {
            name: format!("{}/point{}", branch.name, stored.point),
            point: Some(stored.point),
            value: point.value,
            turns: point.turns,
            distance: point.distance,
            profile: &stored.profile,
        })
    });
    let events = branch.events.iter().filter_map(|event| {
        Some(Orbit {
            name: event.name.clone(),
            point: None,
            value: event.value,
            turns: event.turns,
            distance: event.distance,
            profile: event.profile.as_ref()?,
        })
    });
    let mut all: Vec<Orbit<'_>> = points.chain(events).collect();
    // Stable, and points come first.
    all.sort_by(|a, b| a.distance.total_cmp(&b.distance));
    all
}

impl Results {
    /// Writes `export/` from the branch files: points and orbits of every branch in the given formats.
    /// Gives the files written.
    ///
    /// # Errors
    /// [`RecordError::NotResults`] if there is no branch yet, what [`Results::read_all_branches`]
    /// finds, and what the machine refused.
    pub fn export(&self, formats: &[ExportFormat]) -> Result<Vec<PathBuf>, RecordError> {
        let branches = self.read_all_branches()?;
        let Some(first) = branches.first() else {
            let why = "it holds no branch yet".to_string();
            return Err(RecordError::NotResults { path: self.folder().to_path_buf(), why });
        };
        let folder = self.folder().join("export");
        make_folder(&folder)?;
        let mut written = Vec::new();
        if formats.contains(&ExportFormat::Csv) {
            let path = folder.join("quantities.csv");
            write_quantities(&path, first)?;
            written.push(path);
        }
        for branch in &branches {
            let stem = branch_file_stem(&branch.name)?;
            if formats.contains(&ExportFormat::Csv) {
                let (points, orbits) = (format!("{stem}.points.csv"), format!("{stem}.orbits.csv"));
                write_branch_table(&folder.join(&points), branch)?;
                write_orbit_table(&folder.join(&orbits), branch)?;
                written.extend([folder.join(points), folder.join(orbits)]);
            }
            if formats.contains(&ExportFormat::Npz) {
                let path = folder.join(format!("{stem}.npz"));
                write_arrays(&path, branch)?;
                written.push(path);
            }
        }
        Ok(written)
    }
}
