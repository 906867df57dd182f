//! `armilla settle`.

use std::path::PathBuf;
use std::process::ExitCode;
use std::sync::atomic::{AtomicBool, Ordering};

use armilla_flow::{Cycle, Equilibrium, SettleOptions, Settled, Verdict, settle};
use armilla_model::{Model, nearest_name};
use armilla_study::{digits, settling_words, unsettled_words};

use crate::columns::section;
use crate::exit::{Exit, hint, say, show};

/// Arguments of `settle`.
#[derive(clap::Args)]
pub struct Args {
    /// The model file, NAME.model.ron.
    model: PathBuf,
    /// A parameter value that differs from the model's; may be given several times.
    #[arg(long = "set", value_name = "NAME=VALUE")]
    set: Vec<String>,
    /// Time simulated before anything is judged, in the model's time unit.
    #[arg(long, value_name = "TIME")]
    transient: Option<f64>,
}

static STOP: AtomicBool = AtomicBool::new(false);

/// Simulates until the motion settles.
pub fn run(args: &Args) -> ExitCode {
    let model = match Model::read(&args.model) {
        Ok(model) => model,
        Err(error) => {
            say(&error);
            return Exit::Input.into();
        }
    };
    let parameters = match parameters(&model, &args.set) {
        Ok(parameters) => parameters,
        Err(message) => {
            say(&message);
            return Exit::Input.into();
        }
    };
    if let Err(fault) = model.check_start(&parameters) {
        say(&fault);
        hint("    help: begin elsewhere (`begin` in the model file) or change the parameters (`--set`)");
        return Exit::Input.into();
    }
    if let Err(fault) = model.check_forcing(&parameters) {
        say(&fault);
        hint(&format!("    help: {}", fault.help()));
        return Exit::Input.into();
    }
    let _ = ctrlc::set_handler(|| STOP.store(true, Ordering::Relaxed));
    let forcing_period = model.forcing().map(|forcing| forcing.period(&parameters));
    let options = SettleOptions { transient: args.transient, forcing_period, abort: &STOP, ..SettleOptions::default() };
    match settle(model.field().as_ref(), &parameters, &model.begin(), &options) {
        Ok(settled) => tell(&model, &settled),
        Err(error) => {
            say(&settling_words(&error, &model));
            settle_fault(&error).into()
        }
    }
}

fn settle_fault(error: &armilla_flow::FlowError) -> Exit {
    use armilla_flow::FlowError;
    match error {
        FlowError::Setting { .. } | FlowError::ForcingPeriodMissing => Exit::Input,
        // A rate that is not finite at time 0 is one of the start itself.
        FlowError::NotFinite { time, .. } if *time == 0.0 => Exit::Input,
        _ => Exit::NotReached,
    }
}

fn parameters(model: &Model, set: &[String]) -> Result<Vec<f64>, String> {
    let mut parameters = model.values();
    for entry in set {
        let (name, value) =
            entry.split_once('=').ok_or_else(|| format!("`--set {entry}` must have the form NAME=VALUE"))?;
        let (name, value) = (name.trim(), value.trim());
        let index = model.parameter_index(name).ok_or_else(|| unknown(model, name))?;
        let number: f64 = value.parse().map_err(|_| format!("`--set {entry}`: `{value}` is not a number"))?;
        if !number.is_finite() {
            return Err(format!("`--set {entry}`: the value must be finite"));
        }
        parameters[index] = number;
    }
    Ok(parameters)
}

fn unknown(model: &Model, name: &str) -> String {
    let names: Vec<&str> = model.parameters().iter().map(|parameter| parameter.name.as_str()).collect();
    let help = match nearest_name(name, names.iter().copied()) {
        Some(near) => format!("did you mean `{near}`?"),
        None => format!("the model's parameters are {}", names.join(", ")),
    };
    format!("the model has no parameter `{name}`\n    help: {help}")
}

fn tell(model: &Model, settled: &Settled) -> ExitCode {
    for push in &settled.pushes {
        show(&format!(
            "the start sat on an unstable state of rest and was pushed off it at time {}\n",
            digits(push.time)
        ));
    }
    match &settled.verdict {
        Verdict::Equilibrium(rest) => {
            show(&rest_section(model, rest, settled.time));
            Exit::Done.into()
        }
        Verdict::Cycle(cycle) => {
            show(&cycle_section(model, cycle, settled.time));
            Exit::Done.into()
        }
        other => {
            show(&format!("did not settle: {}\n", unsettled_words(other, model)));
            Exit::NotReached.into()
        }
    }
}

fn rest_section(model: &Model, rest: &Equilibrium, time: f64) -> String {
    let states = model.states().iter().zip(&rest.state);
    let rows: Vec<[String; 3]> =
        states.map(|(state, value)| [state.name.clone(), format!("{value:?}"), state.unit.clone()]).collect();
    let mut text = section(&format!("equilibrium, reached by time {}", digits(time)), &rows);
    // At a degenerate state of rest there is no rate of decay to tell.
    if rest.growth() < 0.0 {
        text.push_str(&format!("  slowest decay rate {} per time unit\n", digits(-rest.growth())));
    }
    text
}

fn cycle_section(model: &Model, cycle: &Cycle, time: f64) -> String {
    let word = if cycle.turns == 1 { "turn" } else { "turns" };
    let states = model.states().iter().zip(cycle.orbit.extremes());
    let mut rows = vec![["state", "lowest", "highest", "unit"].map(String::from)];
    // Nine digits: what a simulation is good for.
    rows.extend(states.map(|(state, (low, high))| {
        [state.name.clone(), format!("{low:.8e}"), format!("{high:.8e}"), state.unit.clone()]
    }));
    let mut text = section(&format!("cycle of {} {word}, reached by time {}", cycle.turns, digits(time)), &rows);
    text.push_str(&format!("  period {:?}\n", cycle.period()));
    text.push_str(&format!("  one more period leads away by {:.1e} of the range\n", cycle.distance));
    text
}
