//! The armilla program.

use std::process::ExitCode;

use clap::Parser;

mod check;
mod columns;
mod draw;
mod exit;
mod export;
mod progress;
mod settle;
mod table;
mod trace;

/// Follows the steady oscillations of a model through its parameters: says where a cycle is born, folds, doubles its
/// period, and what replaces it, with errors, tables and figures.
///
/// The numbers describe the model, not the machine; local codes and licensed practice decide.
#[derive(Parser)]
#[command(name = "armilla", version, about, max_term_width = 100)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(clap::Subcommand)]
enum Command {
    /// Reads and compiles a model or a study, and shows how it was understood.
    Check(check::Args),
    /// Simulates a model until it settles and says on what.
    Settle(settle::Args),
    /// The main job: start, follow, locate, switch, write branch files, thresholds and figures.
    Trace(trace::Args),
    /// The doubling sequence alone: every branch to its first doubling, the thresholds and the value they tend to.
    Cascade(trace::CascadeArgs),
    /// Draws the figures of a results folder again, without computing.
    Draw(draw::Args),
    /// Writes the tables and orbits of a results folder for other tools: CSV and NumPy arrays.
    Export(export::Args),
}

fn main() -> ExitCode {
    match Arguments::parse().command {
        Command::Check(args) => check::run(&args),
        Command::Settle(args) => settle::run(&args),
        Command::Trace(args) => trace::run(&args),
        Command::Cascade(args) => trace::run_cascade(&args),
        Command::Draw(args) => draw::run(&args),
        Command::Export(args) => export::run(&args),
    }
}
