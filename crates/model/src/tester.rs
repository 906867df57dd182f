//! Everything an evaluator gives at one point, in three independent ways, for the self-test.

use num_dual::HyperHyperDual64;

use crate::evaluate::evaluate;
use crate::field::{Column, Evaluator, Gradient, Linearisation};
use crate::graph::Variable;
use crate::model::Model;
use crate::richardson::{Estimate, slope_at_zero};
use crate::sample::{Part, Place, Sample, batch, direction, scale, units};

/// Everything an evaluator gives at one point; derivatives in single states and columns are scaled by
/// their sizes.
pub(crate) struct Everything {
    pub rates: Vec<f64>,
    /// In the order of the quantities of the self-test; Jacobian and columns by column.
    pub parts: [Vec<f64>; 6],
}

impl Everything {
    pub(crate) fn is_finite(&self) -> bool {
        self.rates.iter().chain(self.parts.iter().flatten()).all(|value| value.is_finite())
    }

    /// The largest entry that belongs to rate i, of all quantities.
    pub(crate) fn rows(&self) -> Vec<f64> {
        let n = self.rates.len();
        let mut rows: Vec<f64> = self.rates.iter().map(|rate| rate.abs()).collect();
        for part in &self.parts[..4] {
            for (at, value) in part.iter().enumerate() {
                rows[at % n] = rows[at % n].max(value.abs());
            }
        }
        rows
    }
}

pub(crate) struct Tester<'a> {
    pub model: &'a Model,
    pub evaluator: Box<dyn Evaluator>,
    pub columns: Vec<Column>,
}

impl Tester<'_> {
    /// By the evaluator.
    pub(crate) fn everything(&mut self, sample: &Sample) -> Everything {
        let place = (sample.time, sample.states.clone(), sample.parameters.clone());
        let [u, v, w] = &sample.directions;
        let (rates, mut jacobian, mut columns) = self.linearise(&place);
        let n = rates.len();
        for (at, value) in jacobian.iter_mut().enumerate() {
            *value *= sample.state_sizes[at / n];
        }
        for (at, value) in columns.iter_mut().enumerate() {
            *value *= sample.column_sizes[at / n];
        }
        let second = self.second(&place, u, v);
        let mut third = vec![0.0; n];
        // A field without third derivatives leaves zeros, which differences would contradict.
        let directions = [u, v, w].map(direction);
        if self.evaluator.third(batch(&place), directions, &mut third).is_err() {
            third.clear();
        }
        let (mut in_states, mut in_columns) = (vec![0.0; n], vec![0.0; self.columns.len()]);
        let out = Gradient { states: &mut in_states, columns: &mut in_columns };
        self.evaluator.second_gradient(batch(&place), &sample.psi, direction(v), out);
        scale(&mut in_states, &sample.state_sizes);
        scale(&mut in_columns, &sample.column_sizes);
        Everything { rates, parts: [jacobian, columns, second, third, in_states, in_columns] }
    }

    /// Rates, full Jacobian by column, columns.
    fn linearise(&mut self, place: &Place) -> (Vec<f64>, Vec<f64>, Vec<f64>) {
        let field = self.model.field();
        let (n, pattern) = (field.n_states(), field.pattern());
        let (mut rates, mut values, mut columns) =
            (vec![0.0; n], vec![0.0; pattern.nnz()], vec![0.0; n * self.columns.len()]);
        let out = Linearisation { rates: &mut rates, jacobian: &mut values, columns: &mut columns };
        self.evaluator.linearise(batch(place), out);
        let mut jacobian = vec![0.0; n * n];
        for (value, (row, column)) in values.iter().zip(pattern.entries()) {
            jacobian[column * n + row] = *value;
        }
        (rates, jacobian, columns)
    }

    fn second(&mut self, place: &Place, u: &Part, v: &Part) -> Vec<f64> {
        let mut second = vec![0.0; self.model.states().len()];
        self.evaluator.second(batch(place), direction(u), direction(v), &mut second);
        second
    }

    /// `Df[u]`.
    fn first(&mut self, place: &Place, u: &Part) -> Vec<f64> {
        let (rates, jacobian, columns) = self.linearise(place);
        let n = rates.len();
        let mut sum = vec![0.0; n];
        for (values, factors) in [(&jacobian, &u.0), (&columns, &u.1)] {
            for (at, value) in values.iter().enumerate() {
                sum[at % n] += value * factors[at / n];
            }
        }
        sum
    }

    /// The quantities by dual numbers over the graph; none for a Rust-coded model.
    pub(crate) fn by_duals(&self, sample: &Sample) -> Option<[Vec<f64>; 6]> {
        let [u, v, w] = &sample.directions;
        let n = sample.states.len();
        let zero = (vec![0.0; n], vec![0.0; self.columns.len()]);
        let mut parts: [Vec<f64>; 6] = Default::default();
        for (basis, first, weighted) in [(self.state_basis(sample), 0, 4), (self.column_basis(sample), 1, 5)] {
            for unit in &basis {
                let rates = self.dual_rates(sample, [unit, v, &zero])?;
                parts[first].extend(rates.iter().map(|rate| rate.eps1));
                let sum = rates.iter().zip(&sample.psi).map(|(rate, psi)| psi * rate.eps1eps2).sum();
                parts[weighted].push(sum);
            }
        }
        let rates = self.dual_rates(sample, [u, v, w])?;
        parts[2] = rates.iter().map(|rate| rate.eps1eps2).collect();
        parts[3] = rates.iter().map(|rate| rate.eps1eps2eps3).collect();
        Some(parts)
    }

    fn state_basis(&self, sample: &Sample) -> Vec<Part> {
        let columns = vec![0.0; self.columns.len()];
        units(&sample.state_sizes).map(|unit| (unit, columns.clone())).collect()
    }

    fn column_basis(&self, sample: &Sample) -> Vec<Part> {
        let states = vec![0.0; sample.states.len()];
        units(&sample.column_sizes).map(|unit| (states.clone(), unit)).collect()
    }

    fn dual_rates(&self, sample: &Sample, along: [&Part; 3]) -> Option<Vec<HyperHyperDual64>> {
        let compiled = self.model.compiled()?;
        let number = |value: f64, slope: &dyn Fn(&Part) -> f64| {
            let [a, b, c] = along.map(slope);
            HyperHyperDual64::new(value, a, b, c, 0.0, 0.0, 0.0, 0.0)
        };
        let column = |wanted: Column| self.columns.iter().position(|column| *column == wanted);
        let value = |variable| match variable {
            Variable::State(index) => number(sample.states[index as usize], &|part| part.0[index as usize]),
            Variable::Parameter(index) => {
                let at = column(Column::Parameter(index as usize));
                number(sample.parameters[index as usize], &|part| at.map_or(0.0, |at| part.1[at]))
            }
            Variable::Time => {
                let at = column(Column::Time);
                number(sample.time, &|part| at.map_or(0.0, |at| part.1[at]))
            }
            Variable::Extra { .. } => HyperHyperDual64::from(f64::NAN),
        };
        Some(evaluate(compiled.graph(), compiled.rates(), value))
    }

    /// The quantities by differences of the next lower derivative.
    pub(crate) fn by_differences(&mut self, sample: &Sample) -> [Vec<Estimate>; 6] {
        let [u, v, w] = &sample.directions;
        let mut parts: [Vec<Estimate>; 6] = Default::default();
        for (basis, first, weighted) in [(self.state_basis(sample), 0, 4), (self.column_basis(sample), 1, 5)] {
            for unit in &basis {
                parts[first].extend(slope_at_zero(|step| {
                    let place = sample.moved(&self.columns, unit, step);
                    self.linearise(&place).0
                }));
                parts[weighted].extend(slope_at_zero(|step| {
                    let place = sample.moved(&self.columns, unit, step);
                    let first = self.first(&place, v);
                    vec![first.iter().zip(&sample.psi).map(|(slope, psi)| psi * slope).sum()]
                }));
            }
        }
        parts[2] = slope_at_zero(|step| {
            let place = sample.moved(&self.columns, v, step);
            self.first(&place, u)
        });
        parts[3] = slope_at_zero(|step| {
            let place = sample.moved(&self.columns, w, step);
            self.second(&place, u, v)
        });
        parts
    }
}
