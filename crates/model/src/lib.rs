//! Model files, the formula graph, and compiled vector fields with derivatives.
//!
//! A *model* is a system of ordinary differential equations `x' = f(t, x, p)` with names, units and
//! values. It is written as a text file ([`Model::read`]) or coded in Rust ([`DualRates`]); either way
//! the rest of the house sees a [`VectorField`]: rates, Jacobian, columns of chosen parameters and of
//! the time, and directional derivatives up to third order, for a batch of points at once.
//!
//! From a file to a field, one module a step: `file` (the shape of the file, with the place of
//! everything in it), `syntax` (the grammar), `resolve` (names, to the [`Graph`]), `ratio` (safe
//! quotients), `derivative` (formulas of derivatives), `lower` (to machine instructions), `program`
//! (their execution), `compiled` (the seam). An error in a file is one [`Diagnostic`] with its place,
//! which other readers of files use too.
//!
//! This crate does not know what a cycle, a solver or a result is; it computes `f` and its derivatives
//! and nothing else. It never prints.
//!
//! ```
//! use armilla_model::{Batch, Column, Linearisation, Model};
//!
//! let text = r#"(
//!     title: "Pendulum with drag",
//!     states: { "angle": (begin: 0.5, unit: "rad"), "speed": (begin: 0.0, unit: "rad/s") },
//!     parameters: { "drag": (value: 0.2, unit: "1/s") },
//!     rates: { "angle": "speed", "speed": "-sin(angle) - drag*speed" },
//! )"#;
//! let model = Model::parse(text, "pendulum.model.ron")?;
//! let field = model.field();
//!
//! // Two points at once: entry i of point k sits at [i * len + k].
//! let mut evaluator = field.evaluator(&[Column::Parameter(0)]);
//! let at = Batch { len: 2, time: &[], states: &[0.0, 0.0, 1.0, -2.0], parameters: &model.values() };
//! let (mut rates, mut jacobian, mut columns) = ([0.0; 4], [0.0; 6], [0.0; 4]);
//! evaluator.linearise(
//!     at,
//!     Linearisation { rates: &mut rates, jacobian: &mut jacobian, columns: &mut columns },
//! );
//! assert_eq!(rates, [1.0, -2.0, -0.2, 0.4]);
//! // The pattern has three entries: (angle, speed), (speed, angle), (speed, speed).
//! assert_eq!(jacobian, [1.0, 1.0, -1.0, -1.0, -0.2, -0.2]);
//! assert_eq!(columns, [0.0, 0.0, -1.0, 2.0]);
//! # Ok::<(), armilla_model::ModelError>(())
//! ```
//!
//! The same field coded in Rust, one function over any dual number:
//!
//! ```
//! use armilla_model::{CodedField, DualRates, VectorField};
//! use num_dual::DualNum;
//!
//! struct Pendulum;
//!
//! impl DualRates for Pendulum {
//!     fn n_states(&self) -> usize {
//!         2
//!     }
//!     fn n_parameters(&self) -> usize {
//!         1
//!     }
//!     fn rates<D: DualNum<Primitive = f64> + Copy>(&self, _t: D, x: &[D], p: &[D], out: &mut [D]) {
//!         out[0] = x[1];
//!         out[1] = -x[0].sin() - p[0] * x[1];
//!     }
//! }
//!
//! let field = CodedField::new(Pendulum);
//! assert_eq!(field.pattern().nnz(), 4);
//! ```

mod bernoulli;
mod coded;
mod compiled;
mod decimal;
mod derivative;
mod diagnostic;
mod evaluate;
mod field;
mod file;
mod forcing;
mod function;
mod graph;
mod inspect;
mod lower;
mod model;
mod polynomial;
mod print;
mod program;
mod ratio;
mod read;
mod resolve;
mod richardson;
mod ron_text;
mod sample;
mod scalar;
mod self_test;
mod syntax;
mod tester;

pub use coded::{CodedField, DualRates};
pub use compiled::CompiledField;
pub use decimal::Decimal;
pub use derivative::{SparseGradient, directional, gradients, reverse_gradient};
pub use diagnostic::{Diagnostic, Source, nearest_name};
pub use evaluate::evaluate;
pub use field::{Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, VectorField};
pub use forcing::ForcingFault;
pub use function::{Binary, Callable, FUNCTIONS, Unary, function_named};
pub use graph::{Graph, Node, NodeId, NumberId, Variable};
pub use inspect::{Equation, NotFinite, Sizes, StateAtStart};
pub use model::{Declaration, Forcing, Formula, Kink, Model, ModelError, Parameter, State};
pub use nalgebra_sparse::pattern::SparsityPattern;
pub use scalar::Scalar;
pub use self_test::{DerivativeTest, test_derivatives};
