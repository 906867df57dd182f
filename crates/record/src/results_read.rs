//! Reading a results folder back.

use std::fs;
use std::path::{Path, PathBuf};

use crate::branch_text::parse_branch;
use crate::descent::descent_order;
use crate::error::Attempt;
use crate::file_name::branch_file_stem;
use crate::journal::{Journal, JournalContent};
use crate::threshold::parse_threshold_table;
use crate::{Branch, RecordError, Results, Threshold};

impl Results {
    /// Reads one branch, equal to the last bit to the one written.
    ///
    /// # Errors
    /// What [`parse_branch`] finds, [`RecordError::Inconsistent`] if the file holds another branch.
    pub fn read_branch(&self, name: &str) -> Result<Branch, RecordError> {
        let stem = branch_file_stem(name)?;
        read_branch_file(&self.folder().join("branches").join(format!("{stem}.ron")))
    }

    /// Reads all branches, in order of descent.
    ///
    /// # Errors
    /// Those of [`Results::read_branch`] for the first branch, by file name, that cannot be read.
    pub fn read_all_branches(&self) -> Result<Vec<Branch>, RecordError> {
        let branches: Vec<Branch> =
            self.branch_files()?.iter().map(|file| read_branch_file(file)).collect::<Result<_, _>>()?;
        let order = descent_order(&branches);
        let mut waiting: Vec<Option<Branch>> = branches.into_iter().map(Some).collect();
        Ok(order.into_iter().filter_map(|k| waiting[k].take()).collect())
    }

    /// Reads `study.ron` without its first line.
    ///
    /// # Errors
    /// What the machine refused.
    pub fn read_study(&self) -> Result<String, RecordError> {
        let path = self.folder().join("study.ron");
        let text = fs::read_to_string(&path).map_err(|source| RecordError::from_io(&path, Attempt::Read, source))?;
        Ok(text.split_once('\n').map_or(String::new(), |(_, rest)| rest.to_string()))
    }

    /// Reads `thresholds.csv`.
    ///
    /// # Errors
    /// [`RecordError::Malformed`] with the place.
    pub fn read_thresholds(&self) -> Result<Vec<Threshold>, RecordError> {
        let path = self.folder().join("thresholds.csv");
        parse_threshold_table(&path, &read(&path)?)
    }

    /// Reads the journal that a run which was cut short has left, if there is one.
    ///
    /// # Errors
    /// What [`Journal::read`] finds.
    pub fn read_journal(&self) -> Result<Option<JournalContent>, RecordError> {
        let path = self.folder().join("journal.ron");
        if path.exists() { Journal::read(&path).map(Some) } else { Ok(None) }
    }

    /// The branch files by name; none if no branch was written.
    fn branch_files(&self) -> Result<Vec<PathBuf>, RecordError> {
        let folder = self.folder().join("branches");
        if !folder.exists() {
            return Ok(Vec::new());
        }
        let fault = |source| RecordError::from_io(&folder, Attempt::List, source);
        let mut files = Vec::new();
        for entry in fs::read_dir(&folder).map_err(fault)? {
            let path = entry.map_err(fault)?.path();
            let is_hidden = path.file_name().is_some_and(|name| name.to_string_lossy().starts_with('.'));
            if !is_hidden && path.extension().is_some_and(|ending| ending == "ron") {
                files.push(path);
            }
        }
        files.sort();
        Ok(files)
    }
}

fn read(path: &Path) -> Result<Vec<u8>, RecordError> {
    fs::read(path).map_err(|source| RecordError::from_io(path, Attempt::Read, source))
}

/// Reads a branch file of a results folder, whose name must be that of the branch inside.
fn read_branch_file(path: &Path) -> Result<Branch, RecordError> {
    let branch = parse_branch(path, &read(path)?)?;
    let stem = branch_file_stem(&branch.name)?;
    if path.file_stem().is_some_and(|found| found == stem.as_str()) {
        return Ok(branch);
    }
    let what = format!("it holds the branch {}, whose file is {stem}.ron", branch.name);
    Err(RecordError::inconsistent(path, what))
}
