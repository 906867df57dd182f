//! A temporary folder, and the program run inside it.

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

/// A folder of its own for one test; gone at the end.
pub struct Desk {
    folder: tempfile::TempDir,
}

/// What a run of the program gave.
#[derive(Debug)]
pub struct Said {
    pub code: i32,
    pub out: String,
    pub err: String,
}

impl Desk {
    pub fn new() -> Self {
        Self { folder: tempfile::tempdir().expect("a temporary folder") }
    }

    /// A desk with these files on it.
    pub fn with(files: &[(&str, &str)]) -> Self {
        let desk = Self::new();
        files.iter().for_each(|(name, text)| desk.write(name, text));
        desk
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    pub fn write(&self, name: &str, text: impl AsRef<[u8]>) {
        let path = self.path(name);
        fs::create_dir_all(path.parent().expect("inside the desk")).expect("a folder");
        fs::write(path, text).expect("a file");
    }

    pub fn read(&self, name: &str) -> String {
        fs::read_to_string(self.path(name)).unwrap_or_else(|fault| panic!("{name}: {fault}"))
    }

    /// The program, ready to run here with paths as a user types them.
    pub fn command(&self, arguments: &[&str]) -> Command {
        let mut command = Command::new(env!("CARGO_BIN_EXE_armilla"));
        command.current_dir(self.folder.path()).args(arguments);
        command
    }

    pub fn run(&self, arguments: &[&str]) -> Said {
        self.command(arguments).output().expect("the program starts").into()
    }

    /// All files by relative path, with their bytes; folders end with a slash.
    pub fn files(&self) -> BTreeMap<String, Vec<u8>> {
        self.files_in("")
    }

    /// The same for a folder on the desk; paths are relative to it.
    pub fn files_in(&self, name: &str) -> BTreeMap<String, Vec<u8>> {
        let mut all = BTreeMap::new();
        let top = self.path(name);
        list(&top, &top, &mut all);
        all
    }
}

impl From<Output> for Said {
    fn from(output: Output) -> Self {
        Self {
            code: output.status.code().expect("it ended by itself"),
            out: String::from_utf8(output.stdout).expect("UTF-8"),
            err: String::from_utf8(output.stderr).expect("UTF-8"),
        }
    }
}

fn list(top: &Path, folder: &Path, all: &mut BTreeMap<String, Vec<u8>>) {
    for entry in fs::read_dir(folder).expect("a folder") {
        let path = entry.expect("an entry").path();
        let name = path.strip_prefix(top).expect("inside").to_str().expect("UTF-8").to_string();
        if path.is_dir() {
            all.insert(format!("{name}/"), Vec::new());
            list(top, &path, all);
        } else {
            all.insert(name, fs::read(&path).expect("a file"));
        }
    }
}
