//! `armilla check`.

use std::path::PathBuf;
use std::process::ExitCode;

use armilla_model::Model;
use armilla_study::Study;

use crate::exit::{Exit, fail, say};

/// Arguments of `check`.
#[derive(clap::Args)]
pub struct Args {
    /// A model file (NAME.model.ron) or a study file (NAME.study.ron).
    file: PathBuf,
}

/// Reads, compiles and shows a model or a study.
pub fn run(args: &Args) -> ExitCode {
    let is_study = args.file.to_string_lossy().ends_with(".study.ron");
    if is_study {
        return match Study::read(&args.file) {
            Ok(study) => {
                print!("{}", study.understood());
                tell(&study.model)
            }
            Err(error) => fail(&error),
        };
    }
    match Model::read(&args.file) {
        Ok(model) => tell(&model),
        Err(error) => {
            say(&error);
            Exit::Input.into()
        }
    }
}

fn tell(model: &Model) -> ExitCode {
    println!("{}", model.title());
    Exit::Done.into()
}
