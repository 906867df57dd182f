//! Cycles as followable problems: multipliers, events located, branches switched.
//!
//! [`CycleProblem`] puts the collocated cycle behind [`armilla_follow::Problem`]; [`Spectrum`] holds the Floquet
//! multipliers with their two audits; [`TestFunction`] is a fold or a period doubling as one bordered scalar with
//! its exact derivative; [`CycleProblem::locate`] finds it from a bracket and [`CycleProblem::double`] enters the
//! doubled branch. This crate knows no files and no figures.

mod locate;
mod measure;
mod normal_form;
mod point;
mod problem;
mod scale;
mod spectrum;
mod switch;
mod test_function;

pub use armilla_collocation::Fault;
pub use locate::{LocateFault, Located};
pub use measure::Measures;
pub use normal_form::DoublingForm;
pub use point::{CyclePoint, CycleTangent};
pub use problem::{CycleProblem, CycleSettings, CycleSpec, StartFault, WATCH_DOUBLING, WATCH_FOLD, WATCH_TORUS};
pub use spectrum::{Spectrum, SpectrumFault, SpectrumSolver};
pub use switch::{Doubled, SwitchFault};
pub use test_function::{CriticalKind, NullVectors, TestFunction};
