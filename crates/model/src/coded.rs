//! Vector fields coded in Rust: one generic function gives every derivative by dual numbers.
//!
//! First derivatives come from one dual evaluation per state and column, second and third ones from
//! hyper-dual numbers whose parts carry the directions (Fike & Alonso 2011, AIAA paper 2011-886). All
//! are exact to rounding. A compiled model file is faster; this way is open to rates that no formula
//! can write.

use nalgebra_sparse::pattern::SparsityPattern;
use num_dual::{Dual2_64, Dual64, DualNum, HyperDual64, HyperHyperDual64};
use std::sync::Arc;

use crate::compiled::check_columns;
use crate::field::{Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, VectorField};

/// Rates coded as one function over any dual number.
pub trait DualRates: Send + Sync + 'static {
    /// Number of states.
    fn n_states(&self) -> usize;

    /// Number of parameters.
    fn n_parameters(&self) -> usize;

    /// Whether the rates use the time.
    fn is_forced(&self) -> bool {
        false
    }

    /// Period of the forcing of rates that use the time.
    fn forcing_period<D: DualNum<Primitive = f64> + Copy>(&self, _p: &[D]) -> Option<D> {
        None
    }

    /// Entries of the Jacobian that can differ from zero; none stands for all.
    fn pattern(&self) -> Option<SparsityPattern> {
        None
    }

    /// Writes the rates at time `t`, states `x` and parameters `p`.
    fn rates<D: DualNum<Primitive = f64> + Copy>(&self, t: D, x: &[D], p: &[D], out: &mut [D]);
}

/// The vector field of rates coded in Rust.
#[derive(Debug)]
pub struct CodedField<R> {
    rates: Arc<R>,
    pattern: SparsityPattern,
}

impl<R: DualRates> CodedField<R> {
    /// The field of these rates.
    ///
    /// # Panics
    /// If the stated pattern is not square with the number of states.
    pub fn new(rates: R) -> Self {
        let n = rates.n_states();
        let pattern = rates.pattern().unwrap_or_else(|| full_pattern(n));
        assert_eq!((pattern.major_dim(), pattern.minor_dim()), (n, n), "the pattern is n x n, n = {n}");
        Self { rates: Arc::new(rates), pattern }
    }
}

fn full_pattern(n: usize) -> SparsityPattern {
    let offsets = (0..=n).map(|row| row * n).collect();
    let columns = (0..n).flat_map(|_| 0..n).collect();
    SparsityPattern::try_from_offsets_and_indices(n, n, offsets, columns).expect("a full pattern is well formed")
}

impl<R: DualRates> VectorField for CodedField<R> {
    fn n_states(&self) -> usize {
        self.rates.n_states()
    }

    fn n_parameters(&self) -> usize {
        self.rates.n_parameters()
    }

    fn is_forced(&self) -> bool {
        self.rates.is_forced()
    }

    fn forcing_period(&self, parameters: &[f64], along: usize) -> Option<[f64; 3]> {
        let slope = |index: usize| if index == along { 1.0 } else { 0.0 };
        let numbers = parameters.iter().enumerate().map(|(index, value)| Dual2_64::new(*value, slope(index), 0.0));
        let period = self.rates.forcing_period(&numbers.collect::<Vec<_>>()).filter(|_| self.is_forced())?;
        Some([period.re, period.v1, period.v2])
    }

    fn pattern(&self) -> &SparsityPattern {
        &self.pattern
    }

    fn evaluator(&self, columns: &[Column]) -> Box<dyn Evaluator> {
        check_columns(columns, self.rates.n_parameters());
        Box::new(CodedEvaluator {
            first: Point::new(&*self.rates),
            second: Point::new(&*self.rates),
            third: Point::new(&*self.rates),
            plain: Point::new(&*self.rates),
            pattern: self.pattern.clone(),
            columns: columns.to_vec(),
            rates: Arc::clone(&self.rates),
        })
    }
}

/// Room for one point over one scalar.
struct Point<D> {
    time: D,
    states: Vec<D>,
    parameters: Vec<D>,
    rates: Vec<D>,
}

impl<D: DualNum<Primitive = f64> + Copy> Point<D> {
    fn new<R: DualRates>(rates: &R) -> Self {
        let zeros = |count| vec![D::from(0.0); count];
        Self {
            time: D::from(0.0),
            states: zeros(rates.n_states()),
            parameters: zeros(rates.n_parameters()),
            rates: zeros(rates.n_states()),
        }
    }

    /// Takes point k of the batch, without derivative parts.
    fn load(&mut self, at: Batch<'_>, k: usize) {
        let common = at.parameters.len() == self.parameters.len();
        self.time = D::from(at.time.get(k).copied().unwrap_or(0.0));
        for (i, state) in self.states.iter_mut().enumerate() {
            *state = D::from(at.states[i * at.len + k]);
        }
        for (i, parameter) in self.parameters.iter_mut().enumerate() {
            let place = if common { i } else { i * at.len + k };
            *parameter = D::from(at.parameters[place]);
        }
    }

    fn column(&mut self, column: Column) -> &mut D {
        match column {
            Column::Time => &mut self.time,
            Column::Parameter(index) => &mut self.parameters[index],
        }
    }

    /// Lets `set` put entry k of the direction into the derivative parts.
    fn direct(&mut self, at: (usize, usize), u: Direction<'_>, columns: &[Column], set: impl Fn(&mut D, f64)) {
        let (len, k) = at;
        if !u.states.is_empty() {
            for (i, state) in self.states.iter_mut().enumerate() {
                set(state, u.states[i * len + k]);
            }
        }
        if !u.columns.is_empty() {
            for (c, &column) in columns.iter().enumerate() {
                set(self.column(column), u.columns[c * len + k]);
            }
        }
    }

    fn evaluate<R: DualRates>(&mut self, rates: &R) {
        rates.rates(self.time, &self.states, &self.parameters, &mut self.rates);
    }
}

struct CodedEvaluator<R> {
    rates: Arc<R>,
    pattern: SparsityPattern,
    columns: Vec<Column>,
    plain: Point<f64>,
    first: Point<Dual64>,
    second: Point<HyperDual64>,
    third: Point<HyperHyperDual64>,
}

impl<R: DualRates> CodedEvaluator<R> {
    /// Derivatives in state `j` at point k, into the entries of the pattern.
    fn jacobian_column(&mut self, at: Batch<'_>, k: usize, j: usize, jacobian: &mut [f64]) {
        self.first.states[j].eps = 1.0;
        self.first.evaluate(&*self.rates);
        self.first.states[j].eps = 0.0;
        let offsets = self.pattern.major_offsets();
        for (row, rate) in self.first.rates.iter().enumerate() {
            if let Ok(place) = self.pattern.lane(row).binary_search(&j) {
                jacobian[(offsets[row] + place) * at.len + k] = rate.eps;
            }
        }
    }

    /// psi^T D²f[v, e] for the one entry whose second part is already set; v is set too.
    fn weighted_second(&mut self, at: Batch<'_>, k: usize, psi: &[f64]) -> f64 {
        self.second.evaluate(&*self.rates);
        let weighted = self.second.rates.iter().enumerate();
        weighted.map(|(i, rate)| psi[i * at.len + k] * rate.eps1eps2).sum()
    }
}

impl<R: DualRates> Evaluator for CodedEvaluator<R> {
    fn rates(&mut self, at: Batch<'_>, rates: &mut [f64]) {
        for k in 0..at.len {
            self.plain.load(at, k);
            self.plain.evaluate(&*self.rates);
            for (i, rate) in self.plain.rates.iter().enumerate() {
                rates[i * at.len + k] = *rate;
            }
        }
    }

    fn linearise(&mut self, at: Batch<'_>, out: Linearisation<'_>) {
        self.rates(at, out.rates);
        let n = self.rates.n_states();
        for k in 0..at.len {
            self.first.load(at, k);
            for j in 0..n {
                self.jacobian_column(at, k, j, out.jacobian);
            }
            for c in 0..self.columns.len() {
                let column = self.columns[c];
                self.first.column(column).eps = 1.0;
                self.first.evaluate(&*self.rates);
                self.first.column(column).eps = 0.0;
                for (i, rate) in self.first.rates.iter().enumerate() {
                    out.columns[(c * n + i) * at.len + k] = rate.eps;
                }
            }
        }
    }

    fn second(&mut self, at: Batch<'_>, u: Direction<'_>, v: Direction<'_>, out: &mut [f64]) {
        for k in 0..at.len {
            let point = &mut self.second;
            point.load(at, k);
            point.direct((at.len, k), u, &self.columns, |number, value| number.eps1 = value);
            point.direct((at.len, k), v, &self.columns, |number, value| number.eps2 = value);
            point.evaluate(&*self.rates);
            for (i, rate) in point.rates.iter().enumerate() {
                out[i * at.len + k] = rate.eps1eps2;
            }
        }
    }

    fn third(&mut self, at: Batch<'_>, directions: [Direction<'_>; 3], out: &mut [f64]) -> Result<(), NotProvided> {
        let [u, v, w] = directions;
        for k in 0..at.len {
            let point = &mut self.third;
            point.load(at, k);
            point.direct((at.len, k), u, &self.columns, |number, value| number.eps1 = value);
            point.direct((at.len, k), v, &self.columns, |number, value| number.eps2 = value);
            point.direct((at.len, k), w, &self.columns, |number, value| number.eps3 = value);
            point.evaluate(&*self.rates);
            for (i, rate) in point.rates.iter().enumerate() {
                out[i * at.len + k] = rate.eps1eps2eps3;
            }
        }
        Ok(())
    }

    /// Dual numbers have no reverse sweep: one evaluation per entry of the gradient.
    fn second_gradient(&mut self, at: Batch<'_>, psi: &[f64], v: Direction<'_>, out: Gradient<'_>) {
        for k in 0..at.len {
            self.second.load(at, k);
            self.second.direct((at.len, k), v, &self.columns, |number, value| number.eps1 = value);
            for j in 0..self.rates.n_states() {
                self.second.states[j].eps2 = 1.0;
                out.states[j * at.len + k] = self.weighted_second(at, k, psi);
                self.second.states[j].eps2 = 0.0;
            }
            for c in 0..self.columns.len() {
                let column = self.columns[c];
                self.second.column(column).eps2 = 1.0;
                out.columns[c * at.len + k] = self.weighted_second(at, k, psi);
                self.second.column(column).eps2 = 0.0;
            }
        }
    }
}
