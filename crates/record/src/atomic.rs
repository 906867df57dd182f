//! Whole files appear or do not.
//!
//! The bytes go to a temporary file in the same folder, are forced to the disk, and take the place of
//! the final name in one rename. A run that is killed, or a disk that fills up, leaves either the old
//! file or the new one, never a part.

use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::Path;

use crate::RecordError;
use crate::error::Attempt;

/// Temporary files begin so; a killed run may leave one behind, and a results folder may hold them.
pub(crate) const TEMPORARY_PREFIX: &str = ".armilla-";

/// Large enough that a system call costs nothing beside the formatting of its numbers.
const BUFFER: usize = 1 << 16;

/// Writes a file that appears whole or not at all; an existing file is replaced.
///
/// # Errors
/// What the operating system refused; then the file is as it was before.
pub fn write_atomic(path: &Path, fill: impl FnOnce(&mut dyn Write) -> io::Result<()>) -> Result<(), RecordError> {
    let fault = |source| RecordError::from_io(path, Attempt::Write, source);
    let folder = match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    };
    let mut temporary = temporary_in(folder).map_err(fault)?;
    let mut buffer = BufWriter::with_capacity(BUFFER, temporary.as_file_mut());
    fill(&mut buffer).and_then(|()| buffer.flush()).map_err(fault)?;
    drop(buffer);
    temporary.as_file().sync_all().map_err(fault)?;
    temporary.persist(path).map_err(|refused| fault(refused.error))?;
    sync_folder(folder).map_err(fault)
}

/// A temporary file beside its goal, with the permissions the user's other new files have.
pub(crate) fn temporary_in(folder: &Path) -> io::Result<tempfile::NamedTempFile> {
    let mut builder = tempfile::Builder::new();
    builder.prefix(TEMPORARY_PREFIX);
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // Everyone, as far as the user's umask lets them; the crate's default is the owner alone.
        builder.permissions(std::fs::Permissions::from_mode(0o666));
    }
    builder.tempfile_in(folder)
}

/// Makes the rename itself survive a loss of power; elsewhere than on unix folders cannot be opened.
fn sync_folder(folder: &Path) -> io::Result<()> {
    if cfg!(unix) { File::open(folder)?.sync_all() } else { Ok(()) }
}

#[cfg(test)]
mod tests {
    use std::fs;

    use super::*;

    #[test]
    fn a_failed_write_leaves_the_old_file_and_nothing_else() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let path = folder.path().join("a.txt");
        write_atomic(&path, |out| out.write_all(b"old")).expect("the first write");
        let error = write_atomic(&path, |out| {
            out.write_all(&[b'x'; 200_000])?;
            Err(io::Error::from(io::ErrorKind::StorageFull))
        });
        assert!(matches!(error, Err(RecordError::DiskFull { .. })), "{error:?}");
        assert_eq!(fs::read(&path).expect("still there"), b"old");
        assert_eq!(fs::read_dir(folder.path()).expect("a folder").count(), 1);
        write_atomic(&path, |out| out.write_all(b"new")).expect("the second write");
        assert_eq!(fs::read(&path).expect("still there"), b"new");
    }

    #[test]
    fn a_path_below_a_file_is_named() {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let file = folder.path().join("plain");
        fs::write(&file, "x").expect("a plain file");
        let error = write_atomic(&file.join("a.txt"), |out| out.write_all(b"1"));
        assert!(matches!(error, Err(RecordError::NotAFolder { .. })), "{error:?}");
    }

    #[cfg(unix)]
    #[test]
    fn others_may_read_what_the_umask_allows() {
        use std::os::unix::fs::PermissionsExt;
        let folder = tempfile::tempdir().expect("a temporary folder");
        let (plain, atomic) = (folder.path().join("plain"), folder.path().join("atomic"));
        fs::write(&plain, "x").expect("a plain file");
        write_atomic(&atomic, |out| out.write_all(b"x")).expect("an atomic file");
        let mode = |path| fs::metadata(path).expect("it is there").permissions().mode();
        assert_eq!(mode(&plain), mode(&atomic));
    }
}
