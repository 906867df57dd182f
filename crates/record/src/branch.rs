//! A branch as it is kept: every point, every event, why each end is an end.

use serde::{Deserialize, Serialize};

use crate::{Event, Point, Profile};

/// Why a branch stops.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[serde(rename_all = "kebab-case")]
pub enum EndReason {
    /// The end of the asked range.
    Edge,
    /// The first point was met again.
    Closed,
    /// The cycle shrinks to an equilibrium at about this parameter value.
    Equilibrium {
        /// Extrapolated parameter value.
        value: f64,
    },
    /// The period grows without bound.
    PeriodBlowUp,
    /// A doubled branch came back to the cycle it was born from.
    ReturnsToParent,
    /// It has come onto a branch followed before.
    Joins {
        /// Name of that branch.
        branch: String,
    },
    /// Its cycles fill a continuum at one value of the parameter.
    Continuum,
    /// The asked accuracy cannot be held on the largest mesh allowed.
    ResolutionLost,
    /// The corrector failed even at the shortest stride.
    Stuck,
    /// The allowed number of points is used up.
    Budget,
    /// The user stopped the run.
    Interrupted,
    /// A rate was not finite.
    NotFinite,
    /// A state of the equilibria grows without bound.
    Unbounded,
}

impl EndReason {
    /// The word in files and text.
    pub fn word(&self) -> &'static str {
        match self {
            Self::Edge => "edge",
            Self::Closed => "closed",
            Self::Equilibrium { .. } => "equilibrium",
            Self::PeriodBlowUp => "period-blow-up",
            Self::ReturnsToParent => "returns-to-parent",
            Self::Joins { .. } => "joins",
            Self::Continuum => "continuum",
            Self::ResolutionLost => "resolution-lost",
            Self::Stuck => "stuck",
            Self::Budget => "budget",
            Self::Interrupted => "interrupted",
            Self::NotFinite => "not-finite",
            Self::Unbounded => "unbounded",
        }
    }
}

/// One end of a branch.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct End {
    /// Why.
    pub reason: EndReason,
    /// Parameter value of the last point.
    pub value: f64,
    /// The reason in a sentence, with the numbers that belong to it.
    pub words: String,
}

/// What a figure or table needs to know of a state or a parameter.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Quantity {
    /// Name in the model file.
    pub name: String,
    /// What figures show; the name where the model gives none.
    pub label: String,
    /// Unit, empty where none is stated.
    pub unit: String,
}

/// A profile kept with the index of its point.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct StoredProfile {
    /// Index into [`Branch::points`].
    pub point: usize,
    /// The cycle there.
    pub profile: Profile,
}

/// What the points of a branch are.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Solutions {
    /// Cycles.
    #[default]
    Cycles,
    /// Equilibria: no period, no multipliers; eigenvalues instead, all measures of a state equal.
    Equilibria,
}

impl Solutions {
    /// The word in files and text.
    pub fn word(self) -> &'static str {
        match self {
            Self::Cycles => "cycles",
            Self::Equilibria => "equilibria",
        }
    }
}

/// A branch of cycles or equilibria in one parameter.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Branch {
    /// Version of the file format; see `docs/files.md`.
    pub format: u32,
    /// Version of armilla that wrote the branch.
    pub armilla: String,
    /// Name by descent: `a`, `a.doubling1`, ...
    pub name: String,
    /// Event the branch was born at, none for the first.
    pub born_at: Option<String>,
    /// Title of the model.
    pub model_title: String,
    /// Fingerprint of the model file.
    pub model_fingerprint: String,
    /// The states in order.
    pub states: Vec<Quantity>,
    /// The followed parameter.
    pub parameter: Quantity,
    /// The asked range of the followed parameter, ascending.
    pub range: (f64, f64),
    /// All other parameters and their values.
    pub fixed: Vec<(String, f64)>,
    /// The asked accuracy.
    pub accuracy: f64,
    /// Every point, in the order along the branch (ascending `distance`).
    pub points: Vec<Point>,
    /// Events, in the order along the branch.
    pub events: Vec<Event>,
    /// The two ends: at the first and at the last point.
    pub ends: (End, End),
    /// Every k-th profile.
    pub profiles: Vec<StoredProfile>,
    /// What its points are; files of format 1 and 2 hold cycles only.
    #[serde(default)]
    pub of: Solutions,
}
