//! From the start of a study to a first equilibrium.

use armilla_stability::{EquilibriumPoint, EquilibriumProblem, EquilibriumSpec, RestFault};

use crate::error::StudyError;
use crate::families::family_at_rest;
use crate::file::Values;
use crate::start::named;
use crate::study::Study;
use crate::words::{digits, listed};

/// The model as the equilibrium problem needs it.
pub(crate) fn spec(study: &Study) -> EquilibriumSpec {
    EquilibriumSpec {
        field: study.model.field(),
        parameters: study.parameters.clone(),
        free: study.free,
        typical: study.model.begin().iter().map(|value| value.abs()).collect(),
        parameter_scale: study.range.1 - study.range.0,
    }
}

/// The states a search begins from: the model's, those given instead.
pub(crate) fn near_states(study: &Study, near: &Values) -> Vec<f64> {
    let states = study.model.states().iter();
    states.map(|state| near.0.get(&state.name).copied().unwrap_or(state.begin)).collect()
}

/// Displacements of a guess at which the Jacobian is singular, in the sizes of its states: small ones first, so that the
/// equilibrium is one near by where there is any.
const DISPLACED: [f64; 3] = [0.01, 0.1, 0.5];

/// The equilibrium near these states at the start.
pub(crate) fn equilibrium_at(
    study: &Study,
    near: &[f64],
) -> Result<(EquilibriumProblem, EquilibriumPoint), StudyError> {
    let value = study.start_parameters[study.free];
    EquilibriumProblem::start(spec(study), near, value).or_else(|fault| match fault {
        RestFault::NotFinite { state } => Err(StudyError::RateAtStart {
            state: study.model.states()[state].name.clone(),
            formula: study.model.rates().get(state).map(|formula| formula.text.clone()).unwrap_or_default(),
            states: named(study, near),
        }),
        RestFault::NotConverged { states, correction } => {
            let stopped = listed(&named(study, &states));
            let asked = digits(correction);
            Err(StudyError::NoEquilibrium {
                reason: format!(
                    "Newton's method came to stand at {stopped}, where it still asks for a step of {asked} times the size \
                     of the states"
                ),
            })
        }
        RestFault::Singular { states, is_at_rest } => match family_at_rest(study, &states) {
            Some(family) => Err(family),
            None if is_at_rest => Err(singular_rest(study, &states)),
            None => from_beside(study, near, value).ok_or_else(|| StudyError::NoEquilibrium {
                reason: format!(
                    "none was found near {}, where the Jacobian is singular, nor from states beside it",
                    listed(&named(study, near))
                ),
            }),
        },
    })
}

/// An equilibrium that cannot be followed in the parameter.
fn singular_rest(study: &Study, states: &[f64]) -> StudyError {
    let name = &study.file.follow.parameter;
    StudyError::NoEquilibrium {
        reason: format!(
            "the Jacobian is singular at the equilibrium {}: either it stands on a fold or a branching, and another value of \
             `{name}` to start at helps, `set: {{\"{name}\": ...}}`, or \
             equilibria are not isolated there, or this one is degenerate at every value",
            listed(&named(study, states))
        ),
    }
}

/// The equilibrium found from a guess slightly displaced, the same way in every run.
fn from_beside(study: &Study, near: &[f64], value: f64) -> Option<(EquilibriumProblem, EquilibriumPoint)> {
    let begin = study.model.begin();
    let size = |k: usize| match near[k].abs().max(begin[k].abs()) {
        size if size > 0.0 => size,
        _ => 1.0,
    };
    // All states to one side, and in turn to both, so that no line of symmetry holds all guesses.
    let side = |k: usize, alternates: bool| if alternates && k % 2 == 1 { -1.0 } else { 1.0 };
    let displaced = |share: f64, alternates: bool| -> Vec<f64> {
        near.iter().enumerate().map(|(k, x)| x + share * side(k, alternates) * size(k)).collect()
    };
    let shares = DISPLACED.iter().flat_map(|share| [*share, -*share]);
    let mut guesses = shares.flat_map(|share| [displaced(share, false), displaced(share, true)]);
    guesses.find_map(|guess| EquilibriumProblem::start(spec(study), &guess, value).ok())
}
