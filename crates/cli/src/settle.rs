//! `armilla settle`.

use std::path::PathBuf;
use std::process::ExitCode;
use std::sync::atomic::{AtomicBool, Ordering};

use armilla_flow::{Cycle, Evidence, SettleOptions, Settled, Verdict, settle};
use armilla_model::{Model, nearest_name};

use crate::exit::{Exit, say};

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
    let _ = ctrlc::set_handler(|| STOP.store(true, Ordering::Relaxed));
    let forcing_period = model.forcing().map(|forcing| forcing.period(&parameters));
    let options = SettleOptions { transient: args.transient, forcing_period, abort: &STOP, ..SettleOptions::default() };
    match settle(model.field().as_ref(), &parameters, &model.begin(), &options) {
        Ok(settled) => tell(&model, &settled),
        Err(error) => {
            say(&error);
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
        let (name, value) = entry
            .split_once('=')
            .ok_or_else(|| format!("`--set {entry}` must have the form NAME=VALUE"))?;
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
        println!("the start sat on an unstable state of rest and was pushed off it at time {}", push.time);
    }
    match &settled.verdict {
        Verdict::Equilibrium(rest) => {
            println!("equilibrium, reached by time {:.6}", settled.time);
            for (state, value) in model.states().iter().zip(&rest.state) {
                println!("  {} = {value} {}", state.name, state.unit);
            }
            println!("  slowest decay rate {:e}", -rest.growth());
            Exit::Done.into()
        }
        Verdict::Cycle(cycle) => {
            tell_cycle(model, cycle, settled.time);
            Exit::Done.into()
        }
        Verdict::NotSettled(evidence) => {
            tell_evidence(model, evidence);
            Exit::NotReached.into()
        }
        _ => {
            println!("neither at rest nor periodic, by time {:.6}", settled.time);
            Exit::NotReached.into()
        }
    }
}

fn tell_cycle(model: &Model, cycle: &Cycle, time: f64) {
    let word = if cycle.turns == 1 { "turn" } else { "turns" };
    println!("cycle of {} {word}, reached by time {time:.6}", cycle.turns);
    println!("  period {}", cycle.period());
    for (state, (low, high)) in model.states().iter().zip(cycle.orbit.extremes()) {
        println!("  {} between {low:.9} and {high:.9} {}", state.name, state.unit);
    }
    println!("  one more period leads away by {:.1e} of the range", cycle.distance);
}

fn tell_evidence(model: &Model, evidence: &Evidence) {
    println!("did not settle by time {:.6}, after {} returns", evidence.time, evidence.returns);
    for (state, (low, high)) in model.states().iter().zip(&evidence.ranges) {
        println!("  {} between {low:.9} and {high:.9} {}", state.name, state.unit);
    }
    if let Some(near) = &evidence.nearest {
        println!("  nearest return: after {} turns, to within {:.1e} of the range", near.returns, near.distance);
    }
}
