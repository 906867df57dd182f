//! The first seam: a vector field with its derivatives, for a batch of points at once.
//!
//! Shapes. A batch holds `len` points as structure of arrays: entry `i` of point `k` of any vector
//! sits at `[i * len + k]`. States come as n x len, rates go out as n x len, Jacobian values as
//! nnz x len in the order of the published [`VectorField::pattern`] (compressed rows), columns as
//! (columns * n) x len, column by column.
//!
//! Life cycle: a [`VectorField`] is built once and shared; an [`Evaluator`] is made from it for a
//! chosen set of columns, owns every workspace, and does not allocate once it has seen its largest
//! batch. No evaluation fails: an input outside the domain of a formula gives a number that is not
//! finite, and the caller looks.

use nalgebra_sparse::pattern::SparsityPattern;

/// A coordinate besides the states in which a rate can be differentiated.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Column {
    /// The parameter with this index.
    Parameter(usize),
    /// The time of a forced model.
    Time,
}

/// Points at which a field is evaluated.
#[derive(Clone, Copy, Debug)]
pub struct Batch<'a> {
    /// Number of points.
    pub len: usize,
    /// Times, `len` numbers; may be empty for a model that does not use the time.
    pub time: &'a [f64],
    /// States, n x len.
    pub states: &'a [f64],
    /// Parameters: n_parameters numbers shared by all points, or n_parameters x len.
    pub parameters: &'a [f64],
}

/// A direction in the space of the states and of the evaluator's columns.
#[derive(Clone, Copy, Debug)]
pub struct Direction<'a> {
    /// State part, n x len; empty stands for zero.
    pub states: &'a [f64],
    /// Part along the evaluator's columns, columns x len; empty stands for zero.
    pub columns: &'a [f64],
}

/// Where [`Evaluator::linearise`] writes.
#[derive(Debug)]
pub struct Linearisation<'a> {
    /// Rates, n x len.
    pub rates: &'a mut [f64],
    /// Jacobian values in the order of the pattern, nnz x len.
    pub jacobian: &'a mut [f64],
    /// Derivatives in the evaluator's columns, (columns * n) x len.
    pub columns: &'a mut [f64],
}

/// Where [`Evaluator::second_gradient`] writes.
#[derive(Debug)]
pub struct Gradient<'a> {
    /// Derivative in the states, n x len.
    pub states: &'a mut [f64],
    /// Derivative in the evaluator's columns, columns x len.
    pub columns: &'a mut [f64],
}

/// A field that cannot give a derivative that was asked of it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct NotProvided;

impl std::fmt::Display for NotProvided {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "this model does not provide third derivatives")
    }
}

impl std::error::Error for NotProvided {}

/// Rates `f(t, x, p)` of n states with everything the engine needs of their derivatives.
pub trait VectorField: Send + Sync {
    /// Number of states n.
    fn n_states(&self) -> usize;
    /// Number of parameters.
    fn n_parameters(&self) -> usize;
    /// Whether the rates use the time.
    fn is_forced(&self) -> bool;
    /// Period P of the forcing for these parameters, and its first two derivatives in the parameter with index `along`;
    /// none where the rates do not use the time.
    fn forcing_period(&self, _parameters: &[f64], _along: usize) -> Option<[f64; 3]> {
        None
    }
    /// Sparsity of the Jacobian in the states: n rows, n columns, compressed rows.
    fn pattern(&self) -> &SparsityPattern;
    /// A workspace-owning evaluator whose columns are `columns`, in that order.
    ///
    /// # Panics
    /// If a column is no parameter of the field, or is given twice.
    fn evaluator(&self, columns: &[Column]) -> Box<dyn Evaluator>;
}

/// Evaluates one field on batches; see the module text for shapes.
pub trait Evaluator: Send {
    /// Rates, n x len.
    fn rates(&mut self, at: Batch<'_>, rates: &mut [f64]);
    /// Rates, Jacobian values and columns together.
    fn linearise(&mut self, at: Batch<'_>, out: Linearisation<'_>);
    /// Second directional derivative D²f[u, v] in states and columns, n x len. With u purely in the
    /// states and v purely in a column it is the mixed derivative of that column.
    fn second(&mut self, at: Batch<'_>, u: Direction<'_>, v: Direction<'_>, out: &mut [f64]);
    /// Third directional derivative D³f[u, v, w], n x len.
    ///
    /// # Errors
    /// [`NotProvided`] by a field without third derivatives.
    fn third(&mut self, at: Batch<'_>, directions: [Direction<'_>; 3], out: &mut [f64]) -> Result<(), NotProvided>;
    /// Gradient of the scalar `psi^T Df[v]`, in the states and in the columns, by one reverse sweep.
    /// `psi` is n x len.
    fn second_gradient(&mut self, at: Batch<'_>, psi: &[f64], v: Direction<'_>, out: Gradient<'_>);
}
