//! Exit codes, in one table, and the last words to standard error.

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
pub fn say(error: &dyn std::fmt::Display) {
    eprintln!("armilla: {error}");
}
