//! `armilla export`.

use std::path::PathBuf;
use std::process::ExitCode;

use armilla_record::{ExportFormat, RecordError, Results};

use crate::exit::{Exit, fail, say, show};

/// Arguments of `export`.
#[derive(clap::Args)]
pub struct Args {
    /// A results folder, NAME.results; the files go to `export` inside it.
    results: PathBuf,
    /// What to write; may be given several times. Both csv and npz if not given.
    #[arg(long, value_name = "FORMAT")]
    format: Vec<Format>,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq, clap::ValueEnum)]
enum Format {
    /// Comma-separated tables.
    Csv,
    /// NumPy arrays.
    Npz,
    /// Not built in this version.
    #[value(hide = true)]
    Parquet,
}

/// Writes tables and orbits of every branch for other tools.
pub fn run(args: &Args) -> ExitCode {
    if args.format.contains(&Format::Parquet) {
        say(&"Parquet is not built in this version\n    help: use --format csv or --format npz");
        return Exit::Input.into();
    }
    match export(args) {
        Ok(written) => {
            written.iter().for_each(|path| show(&format!("{}\n", path.display())));
            Exit::Done.into()
        }
        Err(error) => fail(&error.into()),
    }
}

fn export(args: &Args) -> Result<Vec<PathBuf>, RecordError> {
    let all = [(Format::Csv, ExportFormat::Csv), (Format::Npz, ExportFormat::Npz)];
    let asked = all.iter().filter(|(name, _)| args.format.is_empty() || args.format.contains(name));
    let formats: Vec<ExportFormat> = asked.map(|(_, format)| *format).collect();
    Results::open(&args.results)?.export(&formats)
}
