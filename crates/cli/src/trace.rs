//! `armilla trace`.

use std::path::PathBuf;
use std::process::ExitCode;
use std::sync::atomic::{AtomicBool, Ordering};

use armilla_study::{Study, TraceOptions, Traced, trace};

use crate::exit::{Exit, fail, say, show};
use crate::progress::ProgressLine;
use crate::table::{closing, sequence};

/// What `trace` and `cascade` are told alike.
#[derive(clap::Args)]
pub struct Job {
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

/// Arguments of `trace`.
#[derive(clap::Args)]
pub struct Args {
    #[command(flatten)]
    job: Job,
}

/// Set by Ctrl-C; the run then ends with everything found so far on disk.
static STOP: AtomicBool = AtomicBool::new(false);

/// Stands below every table of numbers.
const CAUTION: &str = "These numbers describe the model, not the machine; local codes and licensed practice decide.";

/// Runs the main job.
pub fn run(args: &Args) -> ExitCode {
    match Study::read(&args.job.study) {
        Ok(study) => follow(&study, &args.job, false),
        Err(error) => fail(&error),
    }
}

/// Arguments of `cascade`.
#[derive(clap::Args)]
pub struct CascadeArgs {
    #[command(flatten)]
    job: Job,
    /// Doublings to locate, each on the branch born at the one before.
    #[arg(long, value_name = "NUMBER", default_value_t = 10, value_parser = clap::value_parser!(u8).range(1..=20))]
    doublings: u8,
}

/// Runs the doubling sequence alone: every branch to its first doubling only.
pub fn run_cascade(args: &CascadeArgs) -> ExitCode {
    match Study::read(&args.job.study) {
        Ok(mut study) => {
            // The last doubling is located on its branch but not entered.
            study.file.pursue.doublings = usize::from(args.doublings) - 1;
            follow(&study, &args.job, true)
        }
        Err(error) => fail(&error),
    }
}

fn follow(study: &Study, job: &Job, cascade: bool) -> ExitCode {
    // Where no handler can be set, Ctrl-C ends the run at once: files are whole all the same.
    let _ = ctrlc::set_handler(|| STOP.store(true, Ordering::Relaxed));
    let options = TraceOptions { folder: job.out.clone(), replace: job.replace, cascade, abort: &STOP };
    let mut progress = ProgressLine::new(job.quiet);
    match trace(study, &options, &mut progress) {
        Ok(traced) => close(&traced),
        Err(error) => fail(&error),
    }
}

fn close(traced: &Traced) -> ExitCode {
    let table = format!("{}{}", closing(&traced.branches), sequence(&traced.cascade));
    show(&format!("{table}\nresults: {}\n{CAUTION}\n", traced.folder.display()));
    traced.notes.iter().for_each(|note| say(note));
    traced.shortfalls.iter().for_each(|shortfall| say(shortfall));
    if traced.interrupted {
        say(&"stopped by the user; everything found so far is in the results folder");
    }
    if traced.interrupted || !traced.shortfalls.is_empty() { Exit::NotReached.into() } else { Exit::Done.into() }
}
