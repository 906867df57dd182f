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

/// One cycle of a branch.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Point {
    /// Value of the followed parameter, in its unit.
    pub value: f64,
    /// Period in the model's time unit.
    pub period: f64,
    /// Turns the cycle makes before it closes.
    pub turns: usize,
    /// Signed distance along the branch from its start, in the branch's own metric.
    pub distance: f64,
    /// Number of multipliers outside the unit circle; the branch is stable where it is 0.
    pub unstable_count: usize,
    /// |trivial multiplier - 1| as the product of the interval maps gives it.
    pub trivial_defect: f64,
    /// |sum of log-moduli - integral of the divergence|.
    pub liouville_defect: f64,
    /// Estimated error of the profile, relative to the range of each state.
    pub profile_error: f64,
    /// Largest value of each state.
    pub maxima: Vec<f64>,
    /// Smallest value of each state.
    pub minima: Vec<f64>,
    /// Mean of each state.
    pub means: Vec<f64>,
    /// Root mean square of each state about its mean.
    pub spreads: Vec<f64>,
    /// The n-1 multipliers besides the trivial one, largest modulus first.
    pub multipliers: Vec<Multiplier>,
    /// Mesh intervals of the computation.
    pub intervals: usize,
    /// Degree of the pieces.
    pub degree: usize,
}

impl Point {
    /// Whether no multiplier lies outside the unit circle.
    pub fn is_stable(&self) -> bool {
        self.unstable_count == 0
    }
}
