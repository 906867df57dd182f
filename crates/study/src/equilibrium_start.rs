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

/// The equilibrium near these states at the start.
pub(crate) fn equilibrium_at(
    study: &Study,
    near: &[f64],
) -> Result<(EquilibriumProblem, EquilibriumPoint), StudyError> {
    let value = study.start_parameters[study.free];
    EquilibriumProblem::start(spec(study), near, value).map_err(|fault| match fault {
        RestFault::NotFinite { state } => StudyError::RateAtStart {
            state: study.model.states()[state].name.clone(),
            formula: study.model.rates().get(state).map(|formula| formula.text.clone()).unwrap_or_default(),
            states: named(study, near),
        },
        RestFault::NotConverged { states, correction } => {
            let stopped = listed(&named(study, &states));
            let asked = digits(correction);
            StudyError::NoEquilibrium {
                reason: format!(
                    "Newton's method came to stand at {stopped}, where it still asks for a step of {asked} times the size \
                     of the states"
                ),
            }
        }
        RestFault::Singular { states } => family_at_rest(study, &states).unwrap_or_else(|| StudyError::NoEquilibrium {
            reason: format!(
                "the Jacobian is singular at {}: equilibria are not isolated there, as where something is conserved",
                listed(&named(study, &states))
            ),
        }),
    })
}
