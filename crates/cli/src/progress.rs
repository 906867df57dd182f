//! A progress line per branch on a terminal, nothing otherwise.

use std::io::{IsTerminal, Write, stderr};

use armilla_study::{Observer, Progress};

/// Shows the news of a run.
pub struct ProgressLine {
    shown: bool,
}

impl ProgressLine {
    /// Shows lines where standard error is a terminal and `quiet` is not asked.
    pub fn new(quiet: bool) -> Self {
        Self { shown: !quiet && stderr().is_terminal() }
    }

    /// Overwrites the current line.
    fn line(&self, text: &str) {
        // A terminal that went away is no reason to end the run.
        let _ = write!(stderr(), "\r\x1b[K{text}");
        let _ = stderr().flush();
    }
}

impl Observer for ProgressLine {
    fn notice(&mut self, progress: Progress<'_>) {
        if !self.shown {
            return;
        }
        match progress {
            Progress::Settling => self.line("settling ..."),
            Progress::Note(note) => self.line(&format!("{note}\n")),
            Progress::Branch { name } => self.line(&format!("{name}: begins")),
            Progress::Point { name, points, value, stable } => {
                let word = if stable { "stable" } else { "unstable" };
                self.line(&format!("{name}: {points} points, at {value:.6}, {word}"));
            }
            Progress::Event { name, value } => self.line(&format!("{name} at {value:.10}\n")),
            Progress::Finished { name, points } => self.line(&format!("{name}: {points} points\n")),
        }
    }
}
