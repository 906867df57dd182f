//! One field at fixed parameters, point by point: what the one-step methods see.

use armilla_model::{Batch, Evaluator, Linearisation, VectorField};

use crate::error::FlowError;

/// Evaluates rates and Jacobian at single points and counts.
pub(crate) struct Rates<'a> {
    evaluator: Box<dyn Evaluator>,
    parameters: &'a [f64],
    n: usize,
    /// (row, column) of each Jacobian value, in the order of the pattern.
    entries: Vec<(usize, usize)>,
    values: Vec<f64>,
    scratch: Vec<f64>,
    pub(crate) evaluations: usize,
    pub(crate) jacobians: usize,
}

impl<'a> Rates<'a> {
    pub(crate) fn new(field: &dyn VectorField, parameters: &'a [f64]) -> Result<Self, FlowError> {
        let (found, wanted) = (parameters.len(), field.n_parameters());
        if found != wanted {
            return Err(FlowError::Length { what: "parameter values", found, wanted });
        }
        let n = field.n_states();
        let offsets = field.pattern().major_offsets();
        let columns = field.pattern().minor_indices();
        let mut entries = Vec::with_capacity(columns.len());
        for row in 0..n {
            entries.extend(columns[offsets[row]..offsets[row + 1]].iter().map(|&column| (row, column)));
        }
        Ok(Self {
            evaluator: field.evaluator(&[]),
            parameters,
            n,
            values: vec![0.0; entries.len()],
            scratch: vec![0.0; n],
            entries,
            evaluations: 0,
            jacobians: 0,
        })
    }

    pub(crate) fn n(&self) -> usize {
        self.n
    }

    /// Rates at one point.
    pub(crate) fn at(&mut self, time: f64, state: &[f64], out: &mut [f64]) {
        self.evaluations += 1;
        self.evaluator.rates(Batch { len: 1, time: &[time], states: state, parameters: self.parameters }, out);
    }

    /// Evaluates the Jacobian at one point; read it by [`Rates::entries`] or [`Rates::product`].
    pub(crate) fn linearise(&mut self, time: f64, state: &[f64]) {
        self.jacobians += 1;
        let at = Batch { len: 1, time: &[time], states: state, parameters: self.parameters };
        let out = Linearisation { rates: &mut self.scratch, jacobian: &mut self.values, columns: &mut [] };
        self.evaluator.linearise(at, out);
    }

    /// (row, column, value) of the last Jacobian evaluated.
    pub(crate) fn entries(&self) -> impl Iterator<Item = (usize, usize, f64)> + '_ {
        self.entries.iter().zip(&self.values).map(|(&(row, column), &value)| (row, column, value))
    }

    /// Product of the last Jacobian evaluated with `v`.
    pub(crate) fn product(&self, v: &[f64], out: &mut [f64]) {
        out.fill(0.0);
        for (row, column, value) in self.entries() {
            out[row] += value * v[column];
        }
    }
}

/// Index of the first number that is not finite.
pub(crate) fn first_not_finite(numbers: &[f64]) -> Option<usize> {
    numbers.iter().position(|number| !number.is_finite())
}
