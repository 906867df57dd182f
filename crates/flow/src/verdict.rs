//! What a simulation settled on, with the numbers that say so.

use crate::cycle::Cycle;
use crate::equilibrium::Equilibrium;
use crate::integrator::Stats;
use crate::judge::Exponent;
use crate::returns::NearReturn;
use crate::section::Section;

/// What a simulation settled on.
#[derive(Clone, Debug)]
#[non_exhaustive]
pub enum Verdict {
    /// A state of rest that attracts.
    Equilibrium(Equilibrium),
    /// A cycle.
    Cycle(Box<Cycle>),
    /// A motion with two or more frequencies that no whole number relates: it comes back near, never closes,
    /// and neither forgets nor amplifies disturbances.
    QuasiPeriodic(Evidence),
    /// A motion that never closes and amplifies disturbances: its largest Lyapunov exponent is positive beyond
    /// its spread.
    Irregular(Evidence),
    /// None of these, within the limits.
    NotSettled(Evidence),
}

/// Which limit ended a run that settled neither at rest nor on a cycle.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub enum Limit {
    /// The longest time.
    Time,
    /// The steps.
    Steps,
    /// The returns.
    Returns,
}

/// What was seen of a motion that settled neither at rest nor on a cycle.
#[derive(Clone, Debug, PartialEq)]
pub struct Evidence {
    /// The limit that was reached.
    pub limit: Limit,
    /// Time simulated.
    pub time: f64,
    /// Length of the last window, to which `ranges` belong.
    pub window: f64,
    /// Smallest and largest value of each state over the last window.
    pub ranges: Vec<(f64, f64)>,
    /// The section, where one was found.
    pub section: Option<Section>,
    /// Returns watched in all.
    pub returns: usize,
    /// Mean time between the returns watched last.
    pub return_time: Option<f64>,
    /// The nearest return among the last ones.
    pub nearest: Option<NearReturn>,
    /// Growth of disturbances across the flow, the largest Lyapunov exponent but the trivial one, where it was
    /// measured.
    pub exponent: Option<Exponent>,
}

/// An unstable state of rest that the motion sat on until it was pushed.
#[derive(Clone, Debug, PartialEq)]
pub struct Push {
    /// When.
    pub time: f64,
    /// The state of rest.
    pub equilibrium: Equilibrium,
    /// Largest change made to a state.
    pub size: f64,
}

/// The outcome of [`settle()`](crate::settle()).
#[derive(Clone, Debug)]
pub struct Settled {
    /// What it settled on.
    pub verdict: Verdict,
    /// Pushes that were needed to leave unstable states of rest; a caller should say so.
    pub pushes: Vec<Push>,
    /// Time simulated.
    pub time: f64,
    /// What it cost.
    pub stats: Stats,
}
