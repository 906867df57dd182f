//! Model files, the formula graph, and compiled vector fields with derivatives.
//!
//! This crate does not know what a cycle is.

mod field;

pub use field::{Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, VectorField};
pub use nalgebra_sparse::pattern::SparsityPattern;
