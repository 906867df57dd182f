//! Events on a branch, and the words they go by.

use serde::{Deserialize, Serialize};

use crate::Profile;

/// What kind of special point an event is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum EventKind {
    /// Where a branch was entered.
    Start,
    /// A fold of cycles (multiplier +1) or of equilibria (eigenvalue 0): the parameter turns back.
    Fold,
    /// A period doubling (multiplier -1).
    Doubling,
    /// A torus (Neimark–Sacker) bifurcation.
    Torus,
    /// Two branches cross, one of them turning back there.
    Pitchfork,
    /// Two branches cross.
    Transcritical,
    /// Multiplier +1 or eigenvalue 0, kind not decided.
    Branching,
    /// The cycle is born at an equilibrium.
    Hopf,
    /// The period grows without bound.
    PeriodBlowUp,
    /// A parameter value the user asked for.
    Target,
    /// End of the asked range.
    Edge,
    /// A change of stability that could not be resolved: value = middle, error = half width.
    Unresolved,
}

impl EventKind {
    /// All kinds in the order of the interface.
    pub const ALL: [EventKind; 12] = [
        Self::Start,
        Self::Fold,
        Self::Doubling,
        Self::Torus,
        Self::Pitchfork,
        Self::Transcritical,
        Self::Branching,
        Self::Hopf,
        Self::PeriodBlowUp,
        Self::Target,
        Self::Edge,
        Self::Unresolved,
    ];

    /// The word in files, event names and text.
    pub fn word(self) -> &'static str {
        match self {
            Self::Start => "start",
            Self::Fold => "fold",
            Self::Doubling => "doubling",
            Self::Torus => "torus",
            Self::Pitchfork => "pitchfork",
            Self::Transcritical => "transcritical",
            Self::Branching => "branching",
            Self::Hopf => "hopf",
            Self::PeriodBlowUp => "period-blow-up",
            Self::Target => "target",
            Self::Edge => "edge",
            Self::Unresolved => "unresolved",
        }
    }

    /// Whether stability or the set of solutions changes there (not a start, target or edge).
    pub fn is_threshold(self) -> bool {
        !matches!(self, Self::Start | Self::Target | Self::Edge)
    }
}

/// On which side the new solution is born.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Criticality {
    /// On the side where the old solution has lost its stability.
    Supercritical,
    /// On the side where the old solution is still stable.
    Subcritical,
}

impl Criticality {
    /// The word in files and text.
    pub fn word(self) -> &'static str {
        match self {
            Self::Supercritical => "supercritical",
            Self::Subcritical => "subcritical",
        }
    }
}

/// A special point with the number it stands for.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Event {
    /// Full name, `<branch>/<kind><number>`.
    pub name: String,
    /// Its kind.
    pub kind: EventKind,
    /// Value of the followed parameter there, in its unit.
    pub value: f64,
    /// Estimated absolute error of `value`, in the same unit, where one was estimated.
    pub error: Option<f64>,
    /// Period there; 0 where there is none. At a Hopf point that of the cycles born.
    pub period: f64,
    /// Estimated absolute error of `period`, where one was estimated.
    pub period_error: Option<f64>,
    /// Turns of the cycle there; 0 at an equilibrium.
    pub turns: usize,
    /// Angle of the critical multiplier, where the kind has one.
    pub angle: Option<f64>,
    /// Side on which the new solution is born, where it is known.
    pub criticality: Option<Criticality>,
    /// Signed distance along the branch from its start.
    pub distance: f64,
    /// Anything the reader must know, in words.
    pub note: String,
    /// The measures of the cycle there, as in [`crate::Point`]: maxima of the states.
    pub maxima: Vec<f64>,
    /// Minima of the states.
    pub minima: Vec<f64>,
    /// Means of the states.
    pub means: Vec<f64>,
    /// Root mean squares of the states about their means.
    pub spreads: Vec<f64>,
    /// The cycle itself.
    pub profile: Option<Profile>,
}
