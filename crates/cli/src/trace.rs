//! `armilla trace`.

use std::path::PathBuf;
use std::process::ExitCode;
use std::sync::atomic::{AtomicBool, Ordering};

use armilla_study::{Study, TraceOptions, Traced, trace};

use crate::exit::{Exit, fail, say, show};
use crate::progress::ProgressLine;
use crate::table::closing;

/// Arguments of `trace`.
#[derive(clap::Args)]
pub struct Args {
    /// The study file, NAME.study.ron.
    study: PathBuf,
    /// Results folder; NAME.results beside the study if not given.
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Replace results that are there already.
    #[arg(long)]
    replace: bool,
    /// No progress on standard error.
    #[arg(long)]
    quiet: bool,
}

/// Set by Ctrl-C; the run then ends with everything found so far on disk.
static STOP: AtomicBool = AtomicBool::new(false);

/// Stands below every table of numbers.
const CAUTION: &str = "These numbers describe the model, not the machine; local codes and licensed practice decide.";

/// Runs the main job.
pub fn run(args: &Args) -> ExitCode {
    let study = match Study::read(&args.study) {
        Ok(study) => study,
        Err(error) => return fail(&error),
    };
    // Where no handler can be set, Ctrl-C ends the run at once: files are whole all the same.
    let _ = ctrlc::set_handler(|| STOP.store(true, Ordering::Relaxed));
    let options = TraceOptions { folder: args.out.clone(), replace: args.replace, abort: &STOP };
    let mut progress = ProgressLine::new(args.quiet);
    match trace(&study, &options, &mut progress) {
        Ok(traced) => close(&traced),
        Err(error) => fail(&error),
    }
}

fn close(traced: &Traced) -> ExitCode {
    show(&format!("{}\nresults: {}\n{CAUTION}\n", closing(&traced.branches), traced.folder.display()));
    traced.notes.iter().for_each(|note| say(note));
    traced.shortfalls.iter().for_each(|shortfall| say(shortfall));
    if traced.interrupted {
        say(&"stopped by the user; everything found so far is in the results folder");
    }
    if traced.interrupted || !traced.shortfalls.is_empty() { Exit::NotReached.into() } else { Exit::Done.into() }
}
