//! The rates and their derivatives at one point, as plain vectors.

use std::sync::Arc;

use armilla_collocation::Fault;
use armilla_model::{Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, VectorField};

use super::point::EquilibriumPoint;

/// A direction in states and parameter.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Along<'a> {
    /// State part, n numbers.
    pub states: &'a [f64],
    /// Parameter part.
    pub parameter: f64,
}

impl<'a> Along<'a> {
    /// A direction in the states alone.
    pub(crate) fn states(states: &'a [f64]) -> Self {
        Self { states, parameter: 0.0 }
    }
}

/// One field at one point.
pub(crate) struct Local {
    evaluator: Box<dyn Evaluator>,
    /// Values of all parameters; the followed one is set anew at each point.
    parameters: Vec<f64>,
    free: usize,
    /// Place (row, column) of each entry of the Jacobian.
    pub entries: Vec<(usize, usize)>,
    /// Rates at the last point linearised.
    pub rates: Vec<f64>,
    /// Entries of the Jacobian there.
    pub jacobian: Vec<f64>,
    /// Derivative in the parameter there.
    pub column: Vec<f64>,
}

impl Local {
    pub(crate) fn new(field: &Arc<dyn VectorField>, parameters: &[f64], free: usize) -> Self {
        let n = field.n_states();
        let entries: Vec<(usize, usize)> = field.pattern().entries().collect();
        Self {
            evaluator: field.evaluator(&[Column::Parameter(free)]),
            parameters: parameters.to_vec(),
            free,
            rates: vec![0.0; n],
            jacobian: vec![0.0; entries.len()],
            column: vec![0.0; n],
            entries,
        }
    }

    fn batch<'a>(parameters: &'a mut [f64], free: usize, point: &'a EquilibriumPoint) -> Batch<'a> {
        parameters[free] = point.parameter;
        Batch { len: 1, time: &[], states: &point.state, parameters }
    }

    /// Rates, Jacobian and parameter column at a point.
    ///
    /// # Errors
    /// [`Fault::NotFinite`].
    pub(crate) fn linearise(&mut self, point: &EquilibriumPoint) -> Result<(), Fault> {
        let at = Self::batch(&mut self.parameters, self.free, point);
        let out = Linearisation { rates: &mut self.rates, jacobian: &mut self.jacobian, columns: &mut self.column };
        self.evaluator.linearise(at, out);
        let bad_entry = || {
            let bad = self.entries.iter().zip(&self.jacobian).find(|(_, value)| !value.is_finite());
            bad.map(|((row, _), _)| *row)
        };
        let bad_row = || self.rates.iter().zip(&self.column).position(|(a, b)| !(a.is_finite() && b.is_finite()));
        match bad_row().or_else(bad_entry) {
            None => Ok(()),
            Some(state) => Err(Fault::NotFinite { time: 0.0, state, states: point.state.clone() }),
        }
    }

    /// Second derivative of the rates along two directions.
    pub(crate) fn second(&mut self, point: &EquilibriumPoint, u: Along<'_>, v: Along<'_>) -> Vec<f64> {
        let mut out = vec![0.0; point.state.len()];
        let at = Self::batch(&mut self.parameters, self.free, point);
        let (up, vp) = ([u.parameter], [v.parameter]);
        let u = Direction { states: u.states, columns: &up };
        self.evaluator.second(at, u, Direction { states: v.states, columns: &vp }, &mut out);
        out
    }

    /// Third derivative along three directions in the states.
    ///
    /// # Errors
    /// [`NotProvided`] by a field without third derivatives.
    pub(crate) fn third(&mut self, point: &EquilibriumPoint, along: [&[f64]; 3]) -> Result<Vec<f64>, NotProvided> {
        let mut out = vec![0.0; point.state.len()];
        let at = Self::batch(&mut self.parameters, self.free, point);
        let directions = along.map(|states| Direction { states, columns: &[] });
        self.evaluator.third(at, directions, &mut out)?;
        Ok(out)
    }

    /// Gradient of `psi^T Df[v]` in the states and in the parameter.
    pub(crate) fn gradient(&mut self, point: &EquilibriumPoint, psi: &[f64], v: Along<'_>) -> (Vec<f64>, f64) {
        let mut states = vec![0.0; point.state.len()];
        let mut parameter = [0.0];
        let at = Self::batch(&mut self.parameters, self.free, point);
        let vp = [v.parameter];
        let v = Direction { states: v.states, columns: &vp };
        self.evaluator.second_gradient(at, psi, v, Gradient { states: &mut states, columns: &mut parameter });
        (states, parameter[0])
    }
}

/// Sizes of the terms that rates and their derivatives are summed from, as far as the numbers they are made of tell:
/// each is as uncertain as the last places of states and parameters.
pub(crate) struct TermSizes {
    evaluator: Box<dyn Evaluator>,
    parameters: Vec<f64>,
    free: usize,
}

impl TermSizes {
    pub(crate) fn new(field: &Arc<dyn VectorField>, parameters: &[f64], free: usize) -> Self {
        let columns: Vec<Column> = (0..parameters.len()).map(Column::Parameter).collect();
        Self { evaluator: field.evaluator(&columns), parameters: parameters.to_vec(), free }
    }

    /// `Sum_j |A_ij x_j| + Sum_k |df_i/dp_k p_k| + |f_i|` of each rate.
    pub(crate) fn of_rates(&mut self, local: &Local, point: &EquilibriumPoint) -> Vec<f64> {
        let (n, k) = (point.state.len(), self.parameters.len());
        self.parameters[self.free] = point.parameter;
        let at = Batch { len: 1, time: &[], states: &point.state, parameters: &self.parameters };
        let (mut rates, mut jacobian, mut columns) = (vec![0.0; n], vec![0.0; local.entries.len()], vec![0.0; n * k]);
        let out = Linearisation { rates: &mut rates, jacobian: &mut jacobian, columns: &mut columns };
        self.evaluator.linearise(at, out);
        let mut sizes: Vec<f64> = rates.iter().map(|rate| rate.abs()).collect();
        for ((row, column), value) in local.entries.iter().zip(&jacobian) {
            sizes[*row] += (value * point.state[*column]).abs();
        }
        for (column, parameter) in columns.chunks_exact(n).zip(&self.parameters) {
            sizes.iter_mut().zip(column).for_each(|(size, slope)| *size += (slope * parameter).abs());
        }
        sizes
    }

    /// `Sum |psi_i A_ij v_j|` and what the gradient of `psi^T A v` makes of the last places of states and parameters.
    pub(crate) fn of_product(&mut self, local: &Local, point: &EquilibriumPoint, psi: &[f64], v: &[f64]) -> f64 {
        let n = point.state.len();
        self.parameters[self.free] = point.parameter;
        let at = Batch { len: 1, time: &[], states: &point.state, parameters: &self.parameters };
        let (mut states, mut columns) = (vec![0.0; n], vec![0.0; self.parameters.len()]);
        let out = Gradient { states: &mut states, columns: &mut columns };
        self.evaluator.second_gradient(at, psi, Direction { states: v, columns: &[] }, out);
        let terms = local.entries.iter().zip(&local.jacobian).map(|((r, c), a)| (psi[*r] * a * v[*c]).abs());
        let by_states = states.iter().zip(&point.state).map(|(slope, x)| (slope * x).abs());
        let by_parameters = columns.iter().zip(&self.parameters).map(|(slope, p)| (slope * p).abs());
        terms.sum::<f64>() + by_states.sum::<f64>() + by_parameters.sum::<f64>()
    }
}
