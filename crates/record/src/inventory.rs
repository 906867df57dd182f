//! Which files of a folder armilla wrote, and the careful removal of exactly those.
//!
//! Replacing results deletes files, so this errs on the side of the user: a single entry that a run
//! does not write makes the whole folder foreign, and removal goes file by file, never recursively.

use std::fs::{self, DirEntry};
use std::io::Read;
use std::path::{Path, PathBuf};

use crate::RecordError;
use crate::atomic::TEMPORARY_PREFIX;
use crate::error::Attempt;
use crate::{journal, seal};

/// First words of `study.ron`, by which a results folder is known.
pub(crate) const STUDY_WHAT: &str = "study";

/// Files that file managers leave in any folder they have shown.
const LEFT_BY_FILE_MANAGERS: [&str; 3] = [".DS_Store", "Thumbs.db", "desktop.ini"];

/// What a results folder holds.
#[derive(Debug, Default)]
pub(crate) struct Inventory {
    files: Vec<PathBuf>,
    folders: Vec<PathBuf>,
    is_marked: bool,
}

/// What a name within a results folder stands for.
enum Place {
    Top,
    Branches,
    Figures,
    Export,
}

impl Inventory {
    /// Lists a folder.
    ///
    /// # Errors
    /// [`RecordError::Foreign`] if anything in it was not written by armilla.
    pub(crate) fn take(folder: &Path) -> Result<Self, RecordError> {
        let mut inventory = Self::default();
        inventory.list(folder, folder, &Place::Top)?;
        if !inventory.files.is_empty() && !inventory.is_marked {
            return Err(foreign(folder, "no file in it says that armilla wrote it".into()));
        }
        Ok(inventory)
    }

    fn list(&mut self, top: &Path, folder: &Path, place: &Place) -> Result<(), RecordError> {
        let fault = |source| RecordError::from_io(folder, Attempt::List, source);
        for entry in fs::read_dir(folder).map_err(fault)? {
            let entry = entry.map_err(fault)?;
            // Not followed: a link to elsewhere is neither file nor folder here.
            let kind = entry.file_type().map_err(fault)?;
            let inner = if kind.is_dir() { inner_place(&entry, place) } else { None };
            if let Some(inner) = inner {
                self.list(top, &entry.path(), &inner)?;
                self.folders.push(entry.path());
            } else if kind.is_file() && is_ours(&entry, place) {
                self.is_marked |= is_marker(&entry, place)?;
                self.files.push(entry.path());
            } else {
                let path = entry.path();
                let inside = path.strip_prefix(top).unwrap_or(&path);
                return Err(foreign(top, format!("it holds `{}`, which armilla did not write", inside.display())));
            }
        }
        Ok(())
    }

    /// Removes the listed files and then the folders, which must be empty by then.
    ///
    /// # Errors
    /// What the machine refused; a folder that has got new files in the meantime stays.
    pub(crate) fn remove(self, top: &Path) -> Result<(), RecordError> {
        let fault = |path: &Path, source| RecordError::from_io(path, Attempt::Remove, source);
        for file in &self.files {
            fs::remove_file(file).map_err(|source| fault(file, source))?;
        }
        for folder in self.folders.iter().map(PathBuf::as_path).chain([top]) {
            fs::remove_dir(folder).map_err(|source| fault(folder, source))?;
        }
        Ok(())
    }
}

fn foreign(folder: &Path, why: String) -> RecordError {
    RecordError::Foreign { path: folder.to_path_buf(), why }
}

fn inner_place(entry: &DirEntry, place: &Place) -> Option<Place> {
    match (place, entry.file_name().to_str()?) {
        (Place::Top, "branches") => Some(Place::Branches),
        (Place::Top, "figures") => Some(Place::Figures),
        (Place::Top, "export") => Some(Place::Export),
        _ => None,
    }
}

fn is_ours(entry: &DirEntry, place: &Place) -> bool {
    let name = entry.file_name();
    let Some(name) = name.to_str() else { return false };
    if name.starts_with(TEMPORARY_PREFIX) || LEFT_BY_FILE_MANAGERS.contains(&name) {
        return true;
    }
    match place {
        Place::Top => matches!(name, "study.ron" | "thresholds.csv" | "cascade.csv" | "journal.ron"),
        Place::Branches => name.ends_with(".ron") || name.ends_with(".csv"),
        Place::Figures => name.ends_with(".svg"),
        Place::Export => name.ends_with(".csv") || name.ends_with(".npz"),
    }
}

/// Whether this file says that armilla wrote the folder.
fn is_marker(entry: &DirEntry, place: &Place) -> Result<bool, RecordError> {
    let name = entry.file_name();
    let what = match (place, name.to_str()) {
        (Place::Top, Some("study.ron")) => STUDY_WHAT,
        (Place::Top, Some("journal.ron")) => journal::WHAT,
        _ => return Ok(false),
    };
    let path = entry.path();
    /// More than the longest first words.
    const ENOUGH: u64 = 64;
    let mut begin = Vec::new();
    fs::File::open(&path)
        .and_then(|file| file.take(ENOUGH).read_to_end(&mut begin))
        .map_err(|source| RecordError::from_io(&path, Attempt::Read, source))?;
    Ok(seal::has_head(what, &begin))
}
