//! `armilla check`.

use std::path::PathBuf;
use std::process::ExitCode;

use armilla_model::{DerivativeTest, Kink, Model, test_derivatives};
use armilla_study::Study;

use crate::columns::section;
use crate::exit::{Exit, fail, hint, say, show};

/// Arguments of `check`.
#[derive(clap::Args)]
pub struct Args {
    /// A study file (NAME.study.ron) or a model file (any other name).
    file: PathBuf,
}

/// Any fixed number: the same model gives the same words.
const SEED: u64 = 1;

/// Reads, compiles and shows a model or a study.
pub fn run(args: &Args) -> ExitCode {
    if args.file.to_string_lossy().ends_with(".study.ron") {
        return match Study::read(&args.file) {
            Ok(study) => {
                show(&format!("study\n{}\n", study.understood()));
                tell(&study.model, &study.start_parameters)
            }
            Err(error) => fail(&error),
        };
    }
    match Model::read(&args.file) {
        Ok(model) => tell(&model, &model.values()),
        Err(error) => {
            say(&error);
            Exit::Input.into()
        }
    }
}

fn tell(model: &Model, parameters: &[f64]) -> ExitCode {
    let sections = [parameter_section(model, parameters), equations(model), sizes(model), start(model, parameters)];
    show(&format!("{}{}\n", head(model), sections.join("\n")));
    if let Err(fault) = model.check_start(parameters) {
        say(&fault);
        hint("    help: begin elsewhere (`begin` in the model file) or change the parameters");
        return Exit::Input.into();
    }
    let tests = test_derivatives(model, SEED);
    show(&derivatives(&tests));
    if !model.kinks().is_empty() {
        show(&format!("\n{}", kinks(model.kinks())));
    }
    if tests.iter().all(DerivativeTest::passed) { Exit::Done.into() } else { Exit::NotReached.into() }
}

fn head(model: &Model) -> String {
    let title = if model.title().is_empty() { "(no title)" } else { model.title() };
    let mut text = format!("model: {title}\n");
    if !model.note().is_empty() {
        text.push_str(&format!("  {}\n", model.note()));
    }
    text.push_str(&format!("  fingerprint {}\n\n", model.fingerprint()));
    text
}

fn parameter_section(model: &Model, parameters: &[f64]) -> String {
    let rows: Vec<[String; 4]> = model
        .parameters()
        .iter()
        .zip(parameters)
        .map(|(parameter, value)| {
            let spread = parameter.uncertainty.map(|deviation| format!("standard deviation {deviation:?}"));
            [parameter.name.clone(), format!("{value:?}"), parameter.unit.clone(), spread.unwrap_or_default()]
        })
        .collect();
    section("parameters", &rows)
}

fn equations(model: &Model) -> String {
    let rows: Vec<[String; 2]> = model
        .equations()
        .into_iter()
        .map(|equation| {
            let left = if equation.is_rate { format!("rate of {}", equation.name) } else { equation.name };
            [left, format!("= {}", equation.text)]
        })
        .collect();
    let mut text = section("equations as understood", &rows);
    if let Some(forcing) = model.forcing() {
        text.push_str(&format!("  forced with period {}\n", forcing.text));
    }
    text
}

fn sizes(model: &Model) -> String {
    let sizes = model.sizes();
    let mut rows = vec![
        ["states".to_string(), sizes.states.to_string()],
        ["parameters".into(), sizes.parameters.to_string()],
        ["entries of the Jacobian that can differ from zero".into(), sizes.nonzeros.to_string()],
    ];
    if let Some(instructions) = sizes.instructions {
        rows.push(["instructions for rates and Jacobian".into(), instructions.to_string()]);
    }
    section("sizes", &rows)
}

fn start(model: &Model, parameters: &[f64]) -> String {
    let mut rows = vec![["state", "value", "rate", "unit of the state"].map(String::from)];
    rows.extend(model.at_start(parameters).into_iter().zip(model.states()).map(|(start, state)| {
        [start.name, format!("{:?}", start.value), format!("{:?}", start.rate), state.unit.clone()]
    }));
    section("at the start", &rows)
}

fn derivatives(tests: &[DerivativeTest]) -> String {
    if tests.is_empty() {
        return "derivatives: none could be compared; no point near the start has finite rates\n".into();
    }
    let mut rows = vec![["derivative", "against", "compared", "worst", "allowed", ""].map(String::from)];
    rows.extend(tests.iter().map(|test| {
        let word = if test.passed() { "passed" } else { "FAILED" };
        [
            test.derivative.to_string(),
            test.against.to_string(),
            test.compared.to_string(),
            format!("{:.1e}", test.worst),
            format!("{:.0e}", test.allowed),
            word.to_string(),
        ]
    }));
    section("derivatives near the start, against independent ways (worst relative disagreement)", &rows)
}

fn kinks(kinks: &[Kink]) -> String {
    let rows: Vec<[String; 1]> = kinks
        .iter()
        .map(|kink| [format!("line {}, column {}: `{}` in `{}`", kink.line, kink.column, kink.function, kink.formula)])
        .collect();
    let mut text = section("warning: corners or jumps", &rows);
    text.push_str(
        "  A cycle that crosses one of them is computed with less accuracy than asked, and derivatives there are \
         one-sided;\n  replace it by a smooth form where the machine itself is smooth, for example abs(u) by \
         sqrt(u^2 + d^2) with a small d.\n",
    );
    text
}
