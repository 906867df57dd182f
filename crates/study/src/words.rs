//! Numbers and faults in words, with the names of the model.

use armilla_flow::{Evidence, FlowError, Verdict};
use armilla_model::Model;

/// `level = 0.4, flow = 0.0`, six digits each.
pub fn listed(states: &[(String, f64)]) -> String {
    states.iter().map(|(name, value)| format!("{name} = {}", digits(*value))).collect::<Vec<_>>().join(", ")
}

/// A number for a sentence: six significant digits, the shortest way to write them.
pub fn digits(value: f64) -> String {
    let rounded = format!("{value:.5e}").parse::<f64>().unwrap_or(value);
    format!("{rounded:?}")
}

/// Why a simulation failed, with the names of the states instead of their numbers.
pub fn settling_words(error: &FlowError, model: &Model) -> String {
    let name = |index: usize| model.states().get(index).map_or("?", |state| state.name.as_str());
    let at = |state: &[f64]| {
        let names = model.states().iter().map(|state| state.name.clone());
        listed(&names.zip(state.iter().copied()).collect::<Vec<_>>())
    };
    match error {
        FlowError::NotFinite { state_index, time, state } => format!(
            "the rate of `{}` is not finite at time {} ({})\n    help: begin elsewhere (`begin` in the model file), or \
             mend the formula for such states",
            name(*state_index),
            digits(*time),
            at(state)
        ),
        FlowError::Diverges { state_index, time, state } => format!(
            "`{}` grows without bound: at time {} it is {}\n    help: begin elsewhere (`begin` in the model file), or \
             change the parameters",
            name(*state_index),
            digits(*time),
            digits(state.get(*state_index).copied().unwrap_or(f64::NAN))
        ),
        FlowError::StepTooSmall { step, time, state } => format!(
            "the simulation cannot go on at time {} ({}): it would need steps of {}\n    help: the motion blows up \
             there, or a rate jumps; replace `floor`, `abs`, `min` and `max` by smooth formulas, or begin elsewhere",
            digits(*time),
            at(state),
            digits(*step)
        ),
        FlowError::Budget { steps, time, state } => format!(
            "all {steps} steps allowed were spent by time {} ({})\n    help: shorten `transient`, or start at parameter \
             values where the motion is slower to change",
            digits(*time),
            at(state)
        ),
        other => other.to_string(),
    }
}

/// What a motion is that settled neither at rest nor on a cycle, and what was seen of it. Empty for one that did.
pub fn unsettled_words(verdict: &Verdict, model: &Model) -> String {
    let (kind, evidence) = match verdict {
        Verdict::Equilibrium(_) | Verdict::Cycle(_) => return String::new(),
        Verdict::QuasiPeriodic(evidence) => {
            ("it is quasi-periodic, with frequencies that no whole number relates", evidence)
        }
        Verdict::Irregular(evidence) => ("it is irregular and amplifies disturbances", evidence),
        Verdict::NotSettled(evidence) => ("neither rest nor a cycle was recognised", evidence),
        _ => return "it is neither at rest nor periodic".into(),
    };
    format!("{kind}; {}", evidence_words(evidence, model))
}

fn evidence_words(evidence: &Evidence, model: &Model) -> String {
    let ranges = model.states().iter().zip(&evidence.ranges);
    let ranges: Vec<String> = ranges
        .map(|(state, (low, high))| format!("`{}` between {} and {}", state.name, digits(*low), digits(*high)))
        .collect();
    let mut words =
        format!("by time {} after {} returns, {}", digits(evidence.time), evidence.returns, ranges.join(", "));
    if let Some(near) = &evidence.nearest {
        words.push_str(&format!(
            "; the nearest of the last returns came back after {} turns to within {:.1e} of the range",
            near.returns, near.distance
        ));
    }
    if let Some(exponent) = &evidence.exponent {
        words.push_str(&format!(
            "; disturbances grow at {} ± {} per time unit",
            digits(exponent.value),
            digits(exponent.spread)
        ));
    }
    words
}

#[cfg(test)]
mod tests {
    use super::*;

    fn model() -> Model {
        let text = r#"(states: {"level": (begin: 1.0), "flow": (begin: 0.0)}, parameters: {"k": (value: 1.0)},
                       rates: {"level": "flow", "flow": "k"})"#;
        Model::parse(text, "a.model.ron").expect("a model")
    }

    #[test]
    fn six_digits_and_no_row_of_zeros() {
        assert_eq!(digits(1.0 / 3.0), "0.333333");
        assert_eq!(digits(2.695_228_618_421_903e30), "2.69523e30");
        assert_eq!(digits(-1e-9), "-1e-9");
        assert_eq!(digits(0.0), "0.0");
    }

    #[test]
    fn faults_name_the_state() {
        let fault = FlowError::Diverges { state_index: 1, time: 1.5, state: vec![0.0, 1e30] };
        assert!(settling_words(&fault, &model()).starts_with("`flow` grows without bound: at time 1.5 it is 1e30\n"));
        let fault = FlowError::NotFinite { state_index: 0, time: 0.25, state: vec![2.0, -0.5] };
        assert!(
            settling_words(&fault, &model())
                .starts_with("the rate of `level` is not finite at time 0.25 (level = 2.0, flow = -0.5)\n")
        );
    }
}
