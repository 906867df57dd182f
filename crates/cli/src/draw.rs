//! `armilla draw`.

use std::path::PathBuf;
use std::process::ExitCode;

use armilla_study::redraw;

use crate::exit::{Exit, fail, say};

/// Arguments of `draw`.
#[derive(clap::Args)]
pub struct Args {
    /// A results folder, NAME.results.
    results: PathBuf,
}

/// Draws the figures of a results folder again.
pub fn run(args: &Args) -> ExitCode {
    match redraw(&args.results) {
        Ok(failed) if failed.is_empty() => Exit::Done.into(),
        Ok(failed) => {
            failed.iter().for_each(|sentence| say(sentence));
            Exit::NotReached.into()
        }
        Err(error) => fail(&error),
    }
}
