//! Equilibria as a followable problem: eigenvalues, events located, branches and cycles entered.

mod birth;
mod branching;
mod homotopy;
mod hopf;
mod local;
mod locate;
mod null;
mod point;
mod problem;
mod slope;
mod start;
mod systems;

pub use birth::birth_row;
pub use branching::{BranchingForm, Crossing};
pub use hopf::HopfForm;
pub use locate::{LocatedRest, RestEvent};
pub use point::{EquilibriumPoint, EquilibriumTangent};
pub use problem::{EquilibriumProblem, EquilibriumSpec, SIDE, WATCH_CROSSING, WATCH_TURN};
pub use slope::CriticalSlope;
pub use start::RestFault;
