//! Model files, the formula graph, and compiled vector fields with derivatives.
//!
//! This crate does not know what a cycle is.

mod bernoulli;
mod compiled;
mod decimal;
mod derivative;
mod diagnostic;
mod evaluate;
mod field;
mod file;
mod function;
mod graph;
mod lower;
mod model;
mod program;
mod ratio;
mod read;
mod resolve;
mod ron_text;
mod scalar;
mod syntax;

pub use compiled::CompiledField;
pub use decimal::Decimal;
pub use derivative::{SparseGradient, directional, gradients, reverse_gradient};
pub use diagnostic::{Diagnostic, Source, nearest_name};
pub use evaluate::evaluate;
pub use field::{Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, VectorField};
pub use function::{Binary, Callable, FUNCTIONS, Unary, function_named};
pub use graph::{Graph, Node, NodeId, NumberId, Variable};
pub use model::{Declaration, Forcing, Formula, Kink, Model, ModelError, Parameter, State};
pub use nalgebra_sparse::pattern::SparsityPattern;
pub use scalar::Scalar;
