//! Exit codes, in one table, and the two streams.

use std::fmt::Display;
use std::io::{Write, stderr, stdout};
use std::process::ExitCode;

use armilla_study::{ErrorClass, StudyError};

/// How a run ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Exit {
    /// All done.
    Done = 0,
    /// Computed, but something asked was not reached, or interrupted.
    NotReached = 1,
    /// The input is wrong; nothing was written.
    Input = 2,
    /// A fault of the machine.
    Machine = 3,
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        ExitCode::from(exit as u8)
    }
}

/// Says an error and gives its exit code.
pub fn fail(error: &StudyError) -> ExitCode {
    say(error);
    match error.class() {
        ErrorClass::NotReached => Exit::NotReached,
        ErrorClass::Input => Exit::Input,
        ErrorClass::Machine => Exit::Machine,
    }
    .into()
}

/// Says an error.
pub fn say(error: &dyn Display) {
    hint(&format!("armilla: {error}"));
}

/// A further line to standard error.
pub fn hint(line: &str) {
    // Where standard error is gone, there is no one left to tell.
    let _ = writeln!(stderr(), "{line}");
}

/// Text to standard output, with the line ends it has.
pub fn show(text: &str) {
    // A reader that went away, as `head` does, is no fault; `println!` would panic.
    let _ = stdout().write_all(text.as_bytes()).and_then(|()| stdout().flush());
}
