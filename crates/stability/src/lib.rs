//! Cycles as followable problems: multipliers, events located, branches switched.
//!
//! [`CycleProblem`] puts the collocated cycle behind [`armilla_follow::Problem`]; [`Spectrum`] holds the Floquet
//! multipliers with their two audits; [`TestFunction`] is a fold or a period doubling as one bordered scalar with
//! its exact derivative; [`CycleProblem::locate`] finds it from a bracket and [`CycleProblem::double`] enters the
//! doubled branch. This crate knows no files and no figures.
//!
//! ```
//! use armilla_model::Model;
//! use armilla_record::Profile;
//! use armilla_stability::{CycleProblem, CycleSettings, CycleSpec};
//!
//! // A circle of radius sqrt(mu), period 2 pi, multiplier exp(-4 pi mu).
//! let text = r#"(
//!     states: { "x": (begin: 0.5), "y": (begin: 0) },
//!     parameters: { "mu": (value: 0.25) },
//!     expressions: { "gap": "mu - x^2 - y^2" },
//!     rates: { "x": "x*gap - y", "y": "y*gap + x" },
//! )"#;
//! let model = Model::parse(text, "circle.model.ron").expect("a model");
//! let mesh: Vec<f64> = (0..=12).map(|i| i as f64 / 12.0).collect();
//! let settings = CycleSettings::new(1e-9);
//! let mut start = Profile { n_states: 2, degree: settings.degree, period: 6.0, mesh, values: Vec::new() };
//! for time in start.node_times() {
//!     let (sine, cosine) = (std::f64::consts::TAU * time).sin_cos();
//!     start.values.extend([0.45 * cosine, 0.45 * sine]);
//! }
//! let spec = CycleSpec {
//!     field: model.field(),
//!     parameters: model.values(),
//!     free: 0,
//!     typical: vec![0.0; 2],
//!     parameter_scale: 1.0,
//! };
//! let (mut problem, cycle) = CycleProblem::start(spec, settings, &start, 0.25).expect("a cycle near the guess");
//! let point = problem.describe(&cycle, 1, 0.0).expect("multipliers");
//! assert!((point.period - std::f64::consts::TAU).abs() < 1e-11);
//! assert!((point.multipliers[0].log_modulus + std::f64::consts::PI).abs() < 1e-9);
//! ```

mod agreement;
mod align;
mod copies;
mod cross;
mod crossing;
mod crossing_system;
mod degenerate;
mod dip;
mod equilibrium;
mod forced;
mod locate;
mod measure;
mod meeting;
mod normal_form;
mod point;
mod problem;
mod resolution;
mod rough;
mod scale;
mod spectrum;
mod switch;
mod symmetry;
mod test_function;
mod torus;
mod torus_function;

pub use armilla_collocation::{Fault, MapsFault, TooStiff};
pub use cross::{Crossed, CrossedWay};
pub use crossing::{CycleCrossing, Estimated, Meeting};
pub use degenerate::{Degeneracy, Term, degeneracy, keeps_volume};
pub use dip::Dip;
pub use equilibrium::{
    BranchingForm, CriticalSlope, Crossing, EquilibriumPoint, EquilibriumProblem, EquilibriumSpec, EquilibriumTangent,
    HopfForm, LocatedRest, RestEvent, RestFault, SIDE, WATCH_CROSSING, WATCH_TURN, birth_row,
};
pub use locate::{LocateFault, Located};
pub use measure::Measures;
pub use normal_form::DoublingForm;
pub use point::{CyclePoint, CycleTangent};
pub use problem::{
    CycleProblem, CycleSettings, CycleSpec, StartFault, WATCH_BRANCHING, WATCH_DOUBLING, WATCH_FOLD, WATCH_TORUS,
};
pub use spectrum::{Spectrum, SpectrumFault, SpectrumSolver};
pub use switch::{Born, SplitChange, SwitchFault};
pub use symmetry::{Parity, Symmetry};
pub use test_function::{CriticalKind, NullVectors, TestFunction};
pub use torus::{LocatedTorus, TorusForm};
pub use torus_function::ComplexVectors;
