//! What stops a study, by whose fault it is.

use std::path::PathBuf;

use armilla_flow::FlowError;
use armilla_model::{Diagnostic, ModelError};
use armilla_record::{RecordError, SamplesError};

use crate::words::{digits, listed};

/// Why a study could not be done. [`StudyError::class`] tells whose fault it is.
#[derive(Debug)]
pub enum StudyError {
    /// The study file could not be read.
    Unreadable {
        /// Its path.
        path: PathBuf,
        /// Why.
        source: std::io::Error,
    },
    /// Something in the study file is wrong.
    Invalid(Box<Diagnostic>),
    /// The model file is at fault.
    Model(ModelError),
    /// Writing or reading results failed.
    Record(RecordError),
    /// A rate is not finite where the study starts.
    RateAtStart {
        /// The state whose rate it is.
        state: String,
        /// The formula, where the model comes from a file.
        formula: String,
        /// The states there, by name.
        states: Vec<(String, f64)>,
    },
    /// The simulation could not be carried out.
    Settling {
        /// Why.
        error: FlowError,
        /// The same with the names of the model.
        words: String,
    },
    /// The motion settles at rest.
    SettlesAtRest {
        /// The state of rest, by name.
        states: Vec<(String, f64)>,
        /// Largest real part of its eigenvalues, in the inverse of the model's time unit.
        growth: f64,
    },
    /// The motion did not settle.
    DidNotSettle {
        /// What was seen, in words.
        evidence: String,
    },
    /// The settled motion could not be corrected to a cycle.
    NoCycle {
        /// Why.
        reason: String,
    },
    /// The samples to start from are wrong.
    Samples(SamplesError),
    /// No cycle of the model was found near the samples.
    NoCycleInSamples {
        /// Why.
        reason: String,
    },
    /// No equilibrium was found, or it cannot be followed.
    NoEquilibrium {
        /// Why.
        reason: String,
    },
    /// Cycles come in families, so that none is singled out by the parameters.
    Families {
        /// Why.
        reason: String,
        /// What to do.
        instead: &'static str,
    },
    /// Something this version does not do.
    NotInThisVersion {
        /// What was asked.
        what: &'static str,
        /// What to use instead.
        instead: &'static str,
    },
    /// The user stopped the run before there was a result.
    Interrupted,
}

/// Whose fault an error is; the exit code follows from it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ErrorClass {
    /// The computation did not reach what was asked.
    NotReached,
    /// The input is wrong.
    Input,
    /// The machine failed.
    Machine,
}

impl StudyError {
    /// Whose fault it is.
    pub fn class(&self) -> ErrorClass {
        match self {
            Self::Invalid(_) | Self::RateAtStart { .. } | Self::NotInThisVersion { .. } => ErrorClass::Input,
            Self::Unreadable { .. } | Self::Model(_) | Self::Samples(_) | Self::Families { .. } => ErrorClass::Input,
            Self::Record(error) if error.is_machine_fault() => ErrorClass::Machine,
            Self::Record(_) => ErrorClass::Input,
            Self::Settling { error: FlowError::Aborted { .. }, .. } | Self::Interrupted => ErrorClass::NotReached,
            Self::Settling { error: FlowError::Setting { .. } | FlowError::ForcingPeriodMissing, .. } => {
                ErrorClass::Input
            }
            Self::Settling { .. } | Self::SettlesAtRest { .. } | Self::DidNotSettle { .. } => ErrorClass::NotReached,
            Self::NoCycle { .. } | Self::NoCycleInSamples { .. } | Self::NoEquilibrium { .. } => ErrorClass::NotReached,
        }
    }
}

impl std::fmt::Display for StudyError {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Unreadable { path, source } => write!(f, "cannot read the study file `{}`: {source}", path.display()),
            Self::Invalid(diagnostic) => diagnostic.fmt(f),
            Self::Model(error) => error.fmt(f),
            Self::Record(error) => error.fmt(f),
            Self::RateAtStart { state, formula, states } => {
                write!(f, "the rate of `{state}` is not finite at the start ({})", listed(states))?;
                if !formula.is_empty() {
                    write!(f, ": {formula}")?;
                }
                write!(
                    f,
                    "\n    help: begin elsewhere (`begin` in the model file) or change the parameters of the start"
                )
            }
            Self::Settling { error: FlowError::Aborted { .. }, .. } | Self::Interrupted => {
                write!(f, "stopped before there was a result; nothing was written")
            }
            Self::Settling { words, .. } => write!(f, "settling failed: {words}"),
            Self::SettlesAtRest { states, growth } => write!(
                f,
                "the motion settles at rest ({}){}, but no isolated equilibrium was found there to follow\n    help: start at \
                 parameter values where the model oscillates (`start: Settle(at: ...)`), or begin farther from rest (`begin` \
                 in the model file)",
                listed(states),
                // At a degenerate state of rest there is no rate of decay to tell.
                if *growth < 0.0 {
                    format!(", all disturbances shrinking at {} per time unit or faster", digits(-growth))
                } else {
                    String::new()
                }
            ),
            Self::DidNotSettle { evidence } => write!(
                f,
                "the motion did not settle: {evidence}\n    help: allow a longer `transient`, or start at parameter \
                 values where the motion is periodic"
            ),
            Self::NoCycle { reason } => write!(
                f,
                "no cycle was found from the settled motion: {reason}\n    help: start at parameter values where the \
                 cycle attracts more strongly, or allow a longer `transient`"
            ),
            Self::Samples(fault) => fault.fmt(f),
            Self::NoCycleInSamples { reason } => write!(
                f,
                "no cycle of the model was found near the samples: {reason}\n    help: check that the parameters (`set`) are \
                 those of the samples and their units those of the model, and state the `period` where it is known"
            ),
            Self::NoEquilibrium { reason } => write!(
                f,
                "no equilibrium to follow: {reason}\n    help: give states nearer to one, `start: Equilibrium(near: {{ ... \
                 }})`, or let the motion settle, `start: Settle(at: {{ ... }})`"
            ),
            Self::Families { reason, instead } => write!(
                f,
                "the solutions of this model come in families: {reason}; the parameters single out none of them\n    help: {instead}"
            ),
            Self::NotInThisVersion { what, instead } => {
                write!(f, "{what} is not built in this version\n    help: {instead}")
            }
        }
    }
}

impl std::error::Error for StudyError {}

impl From<Diagnostic> for StudyError {
    fn from(diagnostic: Diagnostic) -> Self {
        Self::Invalid(Box::new(diagnostic))
    }
}
impl From<ModelError> for StudyError {
    fn from(error: ModelError) -> Self {
        Self::Model(error)
    }
}
impl From<SamplesError> for StudyError {
    fn from(error: SamplesError) -> Self {
        Self::Samples(error)
    }
}
impl From<RecordError> for StudyError {
    fn from(error: RecordError) -> Self {
        Self::Record(error)
    }
}
