//! The results folder of a run: written file by file, each of them whole.
//!
//! Life cycle. [`Results::create`] only looks and plans. The first file written makes the folder; if
//! another one is to be replaced, that is renamed to `<folder>.replaced` in the same moment and removed
//! by [`Results::finish`]. So the old results last until new ones are complete: a run that fails before
//! its first file puts them back, and one that is killed leaves both.

use std::fs;
use std::path::{Path, PathBuf};

use crate::atomic::{temporary_in, write_atomic};
use crate::branch_table::write_branch_table;
use crate::branch_text::write_branch_file;
use crate::cascade::{CascadeRow, write_cascade_table};
use crate::error::Attempt;
use crate::file_name::{branch_file_stem, figure_file_name};
use crate::inventory::{Inventory, STUDY_WHAT};
use crate::journal::{Journal, JournalEntry};
use crate::seal::head;
use crate::threshold::write_threshold_table;
use crate::{Branch, Event, RecordError, Threshold};

/// Format version of `study.ron` as far as this crate is concerned: its first line.
const STUDY_FORMAT: u32 = 1;

#[derive(Debug, PartialEq)]
enum Stage {
    /// Nothing is touched yet; an existing folder may be replaced or not.
    Planned { replace: bool },
    /// The folder is there and takes files.
    Open,
}

/// A results folder.
#[derive(Debug)]
pub struct Results {
    folder: PathBuf,
    stage: Stage,
    /// Where the replaced folder waits for its removal.
    aside: Option<PathBuf>,
    has_files: bool,
    journal: Option<Journal>,
}

impl Results {
    /// Plans a results folder; nothing on disk is changed before the first file is written.
    ///
    /// # Errors
    /// [`RecordError::Exists`] if the folder is there and `replace` is false, [`RecordError::Foreign`]
    /// if it may be replaced but is not wholly armilla's, and what [`Results::check_writable`] finds.
    pub fn create(path: &Path, replace: bool) -> Result<Self, RecordError> {
        let folder = resolve(path)?;
        if folder.is_dir() {
            if !replace {
                return Err(RecordError::Exists { path: path.to_path_buf() });
            }
            Inventory::take(&folder)?;
        }
        Self::check_writable(&folder)?;
        Ok(Self { folder, stage: Stage::Planned { replace }, aside: None, has_files: false, journal: None })
    }

    /// A results folder that is there, to be read or to get new figures.
    ///
    /// # Errors
    /// [`RecordError::NotResults`] if the path does not lead to one.
    pub fn open(path: &Path) -> Result<Self, RecordError> {
        let not_results = |why: &str| RecordError::NotResults { path: path.to_path_buf(), why: why.into() };
        if !path.exists() {
            return Err(not_results("it does not exist"));
        }
        if !path.is_dir() {
            return Err(not_results("it is not a folder"));
        }
        if !path.join("study.ron").is_file() && !path.join("branches").is_dir() {
            return Err(not_results("it holds neither `study.ron` nor `branches`"));
        }
        let folder = path.to_path_buf();
        Ok(Self { folder, stage: Stage::Open, aside: None, has_files: true, journal: None })
    }

    /// Tries whether results could be written to a path, without leaving a trace.
    ///
    /// # Errors
    /// [`RecordError::Permission`], [`RecordError::DiskFull`], [`RecordError::NotAFolder`] or
    /// [`RecordError::Machine`].
    pub fn check_writable(path: &Path) -> Result<(), RecordError> {
        let folder = resolve(path)?;
        let probe = |folder: &Path| {
            let tried = temporary_in(folder).map(drop);
            tried.map_err(|source| RecordError::from_io(folder, Attempt::Probe, source))
        };
        if folder.is_dir() {
            probe(&folder)?;
        }
        // The folder is made, or renamed, in the nearest folder above that is there.
        match folder.ancestors().skip(1).find(|above| fs::symlink_metadata(above).is_ok()) {
            Some(above) if above.is_dir() => probe(above),
            Some(above) => Err(RecordError::NotAFolder { path: above.to_path_buf() }),
            None => Ok(()),
        }
    }

    /// Where the files are, or will be.
    pub fn folder(&self) -> &Path {
        &self.folder
    }

    /// Where the replaced results are kept until [`Results::finish`].
    pub fn kept_aside(&self) -> Option<&Path> {
        self.aside.as_deref()
    }

    /// Writes `study.ron`: the study as it was understood. A first line that marks the folder as one of
    /// armilla is put before the text.
    ///
    /// # Errors
    /// What the machine refused; so for all that writes.
    pub fn write_study(&mut self, text: &str) -> Result<(), RecordError> {
        let path = self.begin(None)?.join("study.ron");
        write_atomic(&path, |out| {
            out.write_all(head(STUDY_WHAT, STUDY_FORMAT).as_bytes())?;
            out.write_all(text.as_bytes())
        })?;
        self.has_files = true;
        Ok(())
    }

    /// Writes `branches/<branch>.ron` and `branches/<branch>.csv`, and says so in the journal if there is
    /// one. A branch may be written again as it grows.
    ///
    /// # Errors
    /// [`RecordError::Inconsistent`] or [`RecordError::BadName`] for a branch that cannot be written.
    pub fn write_branch(&mut self, branch: &Branch) -> Result<(), RecordError> {
        let stem = branch_file_stem(&branch.name)?;
        let folder = self.begin(Some("branches"))?;
        write_branch_file(&folder.join(format!("{stem}.ron")), branch)?;
        self.has_files = true;
        write_branch_table(&folder.join(format!("{stem}.csv")), branch)?;
        let entry = JournalEntry::Branch { name: branch.name.clone(), points: branch.points.len() };
        self.journal.as_mut().map_or(Ok(()), |journal| journal.add(&entry))
    }

    /// Writes `thresholds.csv`; see [`Threshold::rows`].
    ///
    /// # Errors
    /// [`RecordError::Inconsistent`] for a row with something that is not a number.
    pub fn write_thresholds(&mut self, rows: &[Threshold]) -> Result<(), RecordError> {
        let path = self.begin(None)?.join("thresholds.csv");
        write_threshold_table(&path, rows)?;
        self.has_files = true;
        Ok(())
    }

    /// Writes `cascade.csv`.
    ///
    /// # Errors
    /// [`RecordError::Inconsistent`] for a row with something that is not finite.
    pub fn write_cascade(&mut self, rows: &[CascadeRow]) -> Result<(), RecordError> {
        let path = self.begin(None)?.join("cascade.csv");
        write_cascade_table(&path, rows)?;
        self.has_files = true;
        Ok(())
    }

    /// Writes `figures/<name>.svg`.
    ///
    /// # Errors
    /// [`RecordError::BadName`] for a name that cannot be one of a file.
    pub fn write_figure(&mut self, name: &str, svg: &str) -> Result<(), RecordError> {
        let file = figure_file_name(name)?;
        let path = self.begin(Some("figures"))?.join(file);
        write_atomic(&path, |out| out.write_all(svg.as_bytes()))?;
        self.has_files = true;
        Ok(())
    }

    /// Adds an event to `journal.ron`, which keeps it until the run is finished.
    ///
    /// # Errors
    /// What the machine refused.
    pub fn write_event(&mut self, event: &Event) -> Result<(), RecordError> {
        let folder = self.begin(None)?;
        let mut journal = match self.journal.take() {
            Some(journal) => journal,
            None => Journal::open(&folder.join("journal.ron"))?,
        };
        self.has_files = true;
        let added = journal.add(&JournalEntry::Event(Box::new(event.clone())));
        self.journal = Some(journal);
        added
    }

    /// Ends a run whose results are all written: the replaced results and the journal are removed.
    ///
    /// # Errors
    /// What the machine refused; the new results are complete all the same.
    pub fn finish(mut self) -> Result<(), RecordError> {
        if let Some(journal) = self.journal.take() {
            drop(journal);
            let path = self.folder.join("journal.ron");
            fs::remove_file(&path).map_err(|source| RecordError::from_io(&path, Attempt::Remove, source))?;
        }
        match self.aside.take() {
            Some(aside) => Inventory::take(&aside)?.remove(&aside),
            None => Ok(()),
        }
    }

    /// Makes the folder, and the one inside that is about to be used, and gives the latter.
    fn begin(&mut self, inside: Option<&str>) -> Result<PathBuf, RecordError> {
        if let Stage::Planned { replace } = self.stage {
            if self.folder.is_dir() {
                if !replace {
                    return Err(RecordError::Exists { path: self.folder.clone() });
                }
                self.move_aside()?;
            }
            make_folder(&self.folder)?;
            self.stage = Stage::Open;
        }
        let folder = inside.map_or_else(|| self.folder.clone(), |inside| self.folder.join(inside));
        make_folder(&folder)?;
        Ok(folder)
    }

    fn move_aside(&mut self) -> Result<(), RecordError> {
        Inventory::take(&self.folder)?;
        let aside = free_name(&self.folder);
        fs::rename(&self.folder, &aside).map_err(|source| RecordError::from_io(&self.folder, Attempt::Move, source))?;
        self.aside = Some(aside);
        Ok(())
    }
}

impl Drop for Results {
    /// Puts the replaced results back if no new file came about.
    fn drop(&mut self) {
        if let Some(aside) = self.aside.take()
            && !self.has_files
        {
            // Fails, as it must, on a folder that is not empty; then both stay.
            for inside in ["branches", "figures", "export", ""] {
                let _ = fs::remove_dir(self.folder.join(inside));
            }
            if !self.folder.exists() {
                let _ = fs::rename(aside, &self.folder);
            }
        }
    }
}

/// The absolute path, links followed if it is there.
fn resolve(path: &Path) -> Result<PathBuf, RecordError> {
    let fault = |source| RecordError::from_io(path, Attempt::Probe, source);
    if fs::symlink_metadata(path).is_err() {
        return std::path::absolute(path).map_err(fault);
    }
    let folder = fs::canonicalize(path).map_err(fault)?;
    if folder.is_dir() { Ok(folder) } else { Err(RecordError::NotAFolder { path: path.to_path_buf() }) }
}

pub(crate) fn make_folder(folder: &Path) -> Result<(), RecordError> {
    fs::create_dir_all(folder).map_err(|source| RecordError::from_io(folder, Attempt::MakeFolder, source))
}

/// The first of `<folder>.replaced`, `<folder>.replaced2`, ... that is free.
fn free_name(folder: &Path) -> PathBuf {
    let name = folder.file_name().unwrap_or_default();
    (1usize..)
        .map(|k| {
            let mut free = name.to_os_string();
            free.push(if k == 1 { ".replaced".to_string() } else { format!(".replaced{k}") });
            folder.with_file_name(free)
        })
        .find(|path| fs::symlink_metadata(path).is_err())
        .expect("a folder holds fewer than usize::MAX names")
}
