//! What can go wrong between memory and disk, with the words a user needs.

use std::fmt;
use std::io;
use std::path::{Path, PathBuf};

/// What was being done to a file or folder.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Attempt {
    /// Reading a file.
    Read,
    /// Listing a folder.
    List,
    /// Writing a file.
    Write,
    /// Making a folder.
    MakeFolder,
    /// Renaming a folder.
    Move,
    /// Removing a file or folder.
    Remove,
    /// Trying whether a folder takes new files.
    Probe,
}

impl Attempt {
    /// The attempt as the object of "cannot".
    pub fn words(self) -> &'static str {
        match self {
            Self::Read => "read",
            Self::List => "list the folder",
            Self::Write => "write",
            Self::MakeFolder => "make the folder",
            Self::Move => "rename",
            Self::Remove => "remove",
            Self::Probe => "write into the folder",
        }
    }
}

/// Why a file or a results folder could not be written or read.
#[derive(Debug)]
pub enum RecordError {
    /// The operating system does not allow it, or the disk is mounted for reading only.
    Permission {
        /// The file or folder.
        path: PathBuf,
        /// What was tried.
        attempt: Attempt,
    },
    /// No room left on the disk, or the user's share of it is used up.
    DiskFull {
        /// The file or folder.
        path: PathBuf,
        /// What was tried.
        attempt: Attempt,
    },
    /// A file stands where a folder is needed.
    NotAFolder {
        /// The file that is in the way.
        path: PathBuf,
    },
    /// Any other refusal of the operating system.
    Machine {
        /// The file or folder.
        path: PathBuf,
        /// What was tried.
        attempt: Attempt,
        /// What the operating system said.
        source: io::Error,
    },
    /// The folder is there already and may not be replaced.
    Exists {
        /// The folder.
        path: PathBuf,
    },
    /// The folder may be replaced, but holds something that armilla did not write.
    Foreign {
        /// The folder.
        path: PathBuf,
        /// What was found in it.
        why: String,
    },
    /// The path does not lead to a results folder.
    NotResults {
        /// The path.
        path: PathBuf,
        /// What is missing.
        why: String,
    },
    /// A file does not follow its format.
    Malformed {
        /// The file.
        path: PathBuf,
        /// Line, from 1.
        line: usize,
        /// Column, from 1: characters, in a table the number of the field.
        column: usize,
        /// What is wrong there.
        what: String,
    },
    /// A file was cut short or changed since it was written.
    Damaged {
        /// The file.
        path: PathBuf,
        /// How that is known.
        what: &'static str,
    },
    /// A file of a format that this version does not know.
    Format {
        /// The file.
        path: PathBuf,
        /// Format version of the file.
        found: u32,
        /// Newest format version that can be read.
        known: u32,
    },
    /// The numbers of a file, or those to be written into it, contradict each other.
    Inconsistent {
        /// The file.
        path: PathBuf,
        /// The contradiction.
        what: String,
    },
    /// A name that cannot be that of a file in the results folder.
    BadName {
        /// The name.
        name: String,
        /// What names may be.
        allowed: &'static str,
    },
}

impl RecordError {
    /// Whether the machine (disk, permission) is at fault rather than what was asked of it.
    pub fn is_machine_fault(&self) -> bool {
        matches!(self, Self::Permission { .. } | Self::DiskFull { .. } | Self::NotAFolder { .. } | Self::Machine { .. })
    }

    /// Sorts what the operating system said.
    pub(crate) fn from_io(path: &Path, attempt: Attempt, source: io::Error) -> Self {
        let path = path.to_path_buf();
        match source.kind() {
            io::ErrorKind::PermissionDenied | io::ErrorKind::ReadOnlyFilesystem => Self::Permission { path, attempt },
            io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded => Self::DiskFull { path, attempt },
            io::ErrorKind::NotADirectory => Self::NotAFolder { path },
            _ => Self::Machine { path, attempt, source },
        }
    }

    pub(crate) fn inconsistent(path: &Path, what: String) -> Self {
        Self::Inconsistent { path: path.to_path_buf(), what }
    }
}

impl fmt::Display for RecordError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Permission { path, attempt } => write!(
                f,
                "cannot {} {}: permission denied; change the permissions or choose another folder",
                attempt.words(),
                path.display()
            ),
            Self::DiskFull { path, attempt } => write!(
                f,
                "cannot {} {}: the disk is full; make room or choose another folder",
                attempt.words(),
                path.display()
            ),
            Self::NotAFolder { path } => {
                write!(f, "{} lies at or below a file where a folder is needed; choose another folder", path.display())
            }
            Self::Machine { path, attempt, source } => {
                write!(f, "cannot {} {}: {source}", attempt.words(), path.display())
            }
            Self::Exists { path } => write!(
                f,
                "the results folder {} exists; allow it to be replaced (--replace) or choose another one (--out)",
                path.display()
            ),
            Self::Foreign { path, why } => write!(
                f,
                "{} is not replaced because {why}; move what is yours away or choose another folder (--out)",
                path.display()
            ),
            Self::NotResults { path, why } => {
                write!(f, "{} is no results folder: {why}", path.display())
            }
            Self::Malformed { path, line, column, what } => {
                write!(f, "{}:{line}:{column}: {what}", path.display())
            }
            Self::Damaged { path, what } => {
                write!(f, "{} is damaged: {what}; restore it from a copy or compute it again", path.display())
            }
            Self::Format { path, found, known } => write!(
                f,
                "{} has format version {found}, this armilla reads versions up to {known}; use a newer armilla",
                path.display()
            ),
            Self::Inconsistent { path, what } => {
                write!(f, "the content of {} contradicts itself: {what}", path.display())
            }
            Self::BadName { name, allowed } => write!(f, "`{name}` cannot be a file name here: {allowed}"),
        }
    }
}

impl std::error::Error for RecordError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Self::Machine { source, .. } => Some(source),
            _ => None,
        }
    }
}

#[cfg(test)]
mod tests {
    use std::io::Write;

    use super::*;

    /// Outside: the kernel's own /dev/full refuses every byte with "no space left on device".
    #[cfg(target_os = "linux")]
    #[test]
    fn a_full_disk_is_called_a_full_disk() {
        let mut full = std::fs::OpenOptions::new().write(true).open("/dev/full").expect("linux has /dev/full");
        let said = full.write_all(b"x").expect_err("nothing fits");
        let error = RecordError::from_io(Path::new("a.ron"), Attempt::Write, said);
        assert!(matches!(error, RecordError::DiskFull { .. }), "{error:?}");
        assert!(error.is_machine_fault());
        assert_eq!(error.to_string(), "cannot write a.ron: the disk is full; make room or choose another folder");
    }

    #[test]
    fn asking_the_wrong_thing_is_no_fault_of_the_machine() {
        assert!(!RecordError::Exists { path: "a.results".into() }.is_machine_fault());
        let denied = io::Error::from(io::ErrorKind::PermissionDenied);
        assert!(RecordError::from_io(Path::new("a"), Attempt::Probe, denied).is_machine_fault());
    }
}
