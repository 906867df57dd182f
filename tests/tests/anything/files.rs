//! What stands in the files of a run.

use std::path::{Path, PathBuf};

fn all(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in std::fs::read_dir(folder).expect("a folder") {
        let path = entry.expect("an entry").path();
        if path.is_dir() { all(&path, found) } else { found.push(path) }
    }
}

/// No number in any file of a results folder is none; `-inf`, the logarithm of an exact zero, is told in the docs.
pub fn check_files(folder: &Path, seed: u64) {
    let mut files = Vec::new();
    all(folder, &mut files);
    assert!(files.len() >= 4, "seed {seed}: {files:?}");
    for file in files {
        let text =
            std::fs::read_to_string(&file).unwrap_or_else(|fault| panic!("seed {seed}, {}: {fault}", file.display()));
        for word in text.split(|c: char| !(c.is_alphanumeric() || c == '-' || c == '.')) {
            let number = matches!(word.to_ascii_lowercase().as_str(), "nan" | "inf" | "+inf" | "-nan" | "infinity");
            assert!(!number, "seed {seed}: `{word}` in {}", file.display());
        }
    }
}
