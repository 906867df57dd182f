//! One point of a branch: a cycle reduced to the numbers a table shows.

use serde::{Deserialize, Serialize};

/// A Floquet multiplier as log-modulus and angle, so that 1e-200 and 1e+40 both survive.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Multiplier {
    /// Natural logarithm of the modulus; minus infinity is written for an exact zero.
    pub log_modulus: f64,
    /// Angle in radians in (-pi, pi]; exactly pi for a negative real multiplier.
    pub angle: f64,
}

/// An eigenvalue of the rates' Jacobian at an equilibrium, in the inverse of the model's time unit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Eigenvalue {
    /// Real part: the rate at which a disturbance grows.
    pub re: f64,
    /// Imaginary part; exactly 0 for a real one.
    pub im: f64,
}

/// One cycle, or one equilibrium, of a branch.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Point {
    /// Value of the followed parameter, in its unit.
    pub value: f64,
    /// Period in the model's time unit; 0 for an equilibrium.
    pub period: f64,
    /// Turns the cycle makes before it closes; 0 for an equilibrium.
    pub turns: usize,
    /// Signed distance along the branch from its start, in the branch's own metric.
    pub distance: f64,
    /// Number of multipliers outside the unit circle, or of eigenvalues to the right of the imaginary axis; the branch is
    /// stable where it is 0.
    pub unstable_count: usize,
    /// |trivial multiplier - 1| as the product of the interval maps gives it.
    pub trivial_defect: f64,
    /// |sum of log-moduli - integral of the divergence|; of an equilibrium |sum of eigenvalues - divergence|.
    pub liouville_defect: f64,
    /// Estimated error of the profile, relative to the range of each state; of an equilibrium relative to its size.
    pub profile_error: f64,
    /// Largest value of each state.
    pub maxima: Vec<f64>,
    /// Smallest value of each state.
    pub minima: Vec<f64>,
    /// Mean of each state.
    pub means: Vec<f64>,
    /// Root mean square of each state about its mean.
    pub spreads: Vec<f64>,
    /// The n-1 multipliers besides the trivial one and those that are not resolved, largest modulus first.
    pub multipliers: Vec<Multiplier>,
    /// Mesh intervals of the computation.
    pub intervals: usize,
    /// Degree of the pieces.
    pub degree: usize,
    /// Why the degree and the number of intervals are what they are.
    #[serde(default)]
    pub choice: MeshReason,
    /// Whether the profile has the asked accuracy, and what keeps it from it where it has not.
    #[serde(default)]
    pub reached: Reached,
    /// Multipliers too small to be resolved, where there are some; they are missing from `multipliers`.
    #[serde(default)]
    pub unresolved: Option<Unresolved>,
    /// The n eigenvalues of an equilibrium, by descending real part; empty for a cycle.
    #[serde(default)]
    pub eigenvalues: Vec<Eigenvalue>,
}

/// Why a point has the degree and the number of intervals it has.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum MeshReason {
    /// A file of format 1 does not tell.
    #[default]
    Unstated,
    /// Chosen for the first cycle of the branch.
    Start,
    /// Those of the point before suit this one too.
    Kept,
    /// Fixed by the study.
    Given,
    /// More intervals, or moved ones: the error of the profile had grown beyond the accuracy.
    ProfileError,
    /// Fewer intervals: the profile needs no more.
    Ease,
    /// Another degree: it reaches the accuracy with less work.
    Work,
    /// More intervals: the multipliers missed Liouville's formula.
    LiouvilleDefect,
}

impl MeshReason {
    /// The word in files.
    pub fn word(self) -> &'static str {
        match self {
            Self::Unstated => "unstated",
            Self::Start => "start",
            Self::Kept => "kept",
            Self::Given => "given",
            Self::ProfileError => "profile-error",
            Self::Ease => "ease",
            Self::Work => "work",
            Self::LiouvilleDefect => "liouville-defect",
        }
    }
}

/// Whether a profile has the asked accuracy.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Reached {
    /// A file of format 1 does not tell.
    #[default]
    Unstated,
    /// It has.
    Accuracy,
    /// No: the rounding of 64-bit numbers stands in the way.
    RoundoffFloor,
    /// No: finer meshes do not help, as with rates that have kinks or jumps, or near a loop through a state of rest, where Newton's
    /// method may find no cycle on them.
    Rough,
    /// No: the largest mesh allowed is too coarse.
    MeshLimit,
    /// No: the mesh fixed by the study is too coarse.
    GivenMesh,
}

impl Reached {
    /// The word in files.
    pub fn word(self) -> &'static str {
        match self {
            Self::Unstated => "unstated",
            Self::Accuracy => "accuracy",
            Self::RoundoffFloor => "roundoff-floor",
            Self::Rough => "rough",
            Self::MeshLimit => "mesh-limit",
            Self::GivenMesh => "given-mesh",
        }
    }
}

/// Multipliers that are too small to be told from each other and from zero; all lie inside the unit circle.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Unresolved {
    /// How many.
    pub count: usize,
    /// Natural logarithm of the modulus that all of them are below.
    pub below: f64,
    /// Sum of the logarithms of their moduli, from Liouville's formula.
    pub log_sum: f64,
}

impl Point {
    /// Whether no multiplier lies outside the unit circle.
    pub fn is_stable(&self) -> bool {
        self.unstable_count == 0
    }
}
