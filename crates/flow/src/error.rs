//! Why a time integration could not go on.

/// A time integration that could not be carried out or carried on.
#[derive(Clone, Debug, PartialEq)]
pub enum FlowError {
    /// A list has the wrong length for this model.
    Length {
        /// What the list holds.
        what: &'static str,
        /// How many numbers it has.
        found: usize,
        /// How many the model has.
        wanted: usize,
    },
    /// A setting is outside its range.
    Setting {
        /// Which one.
        name: &'static str,
        /// Its value.
        value: f64,
        /// What is allowed, in words.
        allowed: &'static str,
    },
    /// The model uses the time, but no forcing period was given.
    ForcingPeriodMissing,
    /// A rate is not finite.
    NotFinite {
        /// Index of the state whose rate it is.
        state_index: usize,
        /// Time at which it happened.
        time: f64,
        /// State at which it happened.
        state: Vec<f64>,
    },
    /// A state left every bound.
    Diverges {
        /// Index of that state.
        state_index: usize,
        /// Time at which it happened.
        time: f64,
        /// State at that time.
        state: Vec<f64>,
    },
    /// The step that the tolerance asks for cannot be told from zero at this time.
    StepTooSmall {
        /// The step.
        step: f64,
        /// Time at which it happened.
        time: f64,
        /// State at that time.
        state: Vec<f64>,
    },
    /// The number of steps allowed was spent.
    Budget {
        /// That number.
        steps: usize,
        /// Time reached.
        time: f64,
        /// State at that time.
        state: Vec<f64>,
    },
    /// The caller asked to stop.
    Aborted {
        /// Time reached.
        time: f64,
    },
}

impl std::fmt::Display for FlowError {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Length { what, found, wanted } => {
                write!(f, "{found} {what} were given, the model has {wanted}")
            }
            Self::Setting { name, value, allowed } => {
                write!(f, "{name} is {value}, it must be {allowed}")
            }
            Self::ForcingPeriodMissing => {
                write!(f, "the rates use the time, so settling needs the forcing period: give it in the model")
            }
            Self::NotFinite { state_index, time, state } => write!(
                f,
                "the rate of state number {} is not finite at time {time}, state {state:?}: start elsewhere, or mend \
                 the formula there",
                state_index + 1
            ),
            Self::Diverges { state_index, time, state } => write!(
                f,
                "state number {} grows without bound, at time {time} the state is {state:?}: start elsewhere, or change \
                 the parameters",
                state_index + 1
            ),
            Self::StepTooSmall { step, time, state } => write!(
                f,
                "the integration cannot go on at time {time}: it would need steps of {step:e}, state {state:?}; the \
                 solution blows up or jumps there, or the tolerance is beyond 64-bit numbers"
            ),
            Self::Budget { steps, time, state } => write!(
                f,
                "all {steps} steps allowed were spent by time {time}, state {state:?}: allow more steps or ask a looser \
                 tolerance"
            ),
            Self::Aborted { time } => write!(f, "stopped on request at time {time}"),
        }
    }
}

impl std::error::Error for FlowError {}
