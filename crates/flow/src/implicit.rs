//! The implicit method: Radau IIA with five stages, order 9, stiffly accurate and L-stable
//! (Hairer & Wanner 1999, J. Comput. Appl. Math. 111:93; the same, Solving Ordinary Differential
//! Equations II, IV.8).
//!
//! Unknowns are the increments z_i = x(t + c_i h) - x of the s stages, stage after stage:
//! `z = h (A (x) I) F(x + z)`. They are found by Newton's method with the exact Jacobian at the beginning of
//! the step, the whole s n x s n matrix `I - h A (x) J` factored once a step. Inside the step the solution
//! is the collocation polynomial of degree s through x and the stages.
//! Cost: (s n)^3 a step, so this is meant for models of up to some dozens of states.

use crate::explicit::StepFrom;
use crate::lu::Lu;
use crate::radau::{RadauTable, STAGES};
use crate::rates::Rates;

/// Newton iterations allowed; a step that needs more is better shortened.
pub(crate) const NEWTON_LIMIT: usize = 10;
/// The iteration stops when the error that it leaves is this part of the error allowed in a step.
const NEWTON_PART: f64 = 0.01;

/// What became of the attempt at a step.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Attempt {
    /// The end of the step was computed, with this error in units of the weights.
    Done { error: f64, iterations: usize },
    /// Newton's iteration would not converge.
    NoConvergence,
}

/// Workspace of the implicit method.
#[derive(Clone)]
pub(crate) struct Implicit {
    table: RadauTable,
    /// Barycentric weights of 0, c_1 … c_s.
    barycentric: [f64; STAGES + 1],
    n: usize,
    z: Vec<f64>,
    slopes: Vec<f64>,
    correction: Vec<f64>,
    point: Vec<f64>,
    base: Vec<f64>,
    newton: Lu,
    filter: Lu,
    /// Length of the step whose polynomial stands in `base`, `z`; zero where none does.
    step: f64,
}

impl Implicit {
    pub(crate) fn new(n: usize) -> Self {
        let table = RadauTable::new();
        let all: Vec<f64> = std::iter::once(0.0).chain(table.c).collect();
        let weight = |j: usize| {
            let product: f64 = (0..=STAGES).filter(|&l| l != j).map(|l| all[j] - all[l]).product();
            1.0 / product
        };
        Self {
            table,
            barycentric: std::array::from_fn(weight),
            n,
            z: vec![0.0; STAGES * n],
            slopes: vec![0.0; STAGES * n],
            correction: vec![0.0; STAGES * n],
            point: vec![0.0; n],
            base: vec![0.0; n],
            newton: Lu::new(STAGES * n),
            filter: Lu::new(n),
            step: 0.0,
        }
    }

    /// Forgets the last polynomial, which no longer lies before the next step.
    pub(crate) fn forget(&mut self) {
        self.step = 0.0;
    }

    /// Attempts a step; the Jacobian in `rates` must be the one at its beginning.
    pub(crate) fn advance(
        &mut self,
        rates: &mut Rates<'_>,
        from: StepFrom<'_>,
        weights: &[f64],
        end: &mut [f64],
    ) -> Attempt {
        self.guess(from);
        self.base.copy_from_slice(from.state);
        self.step = 0.0;
        if !self.factor(rates, from.step) {
            return Attempt::NoConvergence;
        }
        let Some(iterations) = self.iterate(rates, from, weights) else {
            return Attempt::NoConvergence;
        };
        let last = (STAGES - 1) * self.n;
        for (i, value) in end.iter_mut().enumerate() {
            *value = from.state[i] + self.z[last + i];
        }
        self.step = from.step;
        Attempt::Done { error: self.error(rates, from, weights), iterations }
    }

    /// Starts the increments from the last polynomial, continued.
    fn guess(&mut self, from: StepFrom<'_>) {
        if self.step == 0.0 {
            self.z.fill(0.0);
            return;
        }
        let ratio = from.step / self.step;
        let mut values = std::mem::take(&mut self.correction);
        for (i, chunk) in values.chunks_exact_mut(self.n).enumerate() {
            self.dense(1.0 + self.table.c[i] * ratio, chunk);
            chunk.iter_mut().zip(from.state).for_each(|(value, x)| *value -= x);
        }
        std::mem::swap(&mut self.z, &mut values);
        self.correction = values;
    }

    fn factor(&mut self, rates: &Rates<'_>, h: f64) -> bool {
        let (n, size) = (self.n, STAGES * self.n);
        self.newton.entries.fill(0.0);
        self.filter.entries.fill(0.0);
        for (row, column, value) in rates.entries() {
            self.filter.entries[row * n + column] -= h * self.table.gamma * value;
            for i in 0..STAGES {
                for j in 0..STAGES {
                    self.newton.entries[(i * n + row) * size + j * n + column] -= h * self.table.a[i][j] * value;
                }
            }
        }
        (0..n).for_each(|i| self.filter.entries[i * n + i] += 1.0);
        (0..size).for_each(|i| self.newton.entries[i * size + i] += 1.0);
        self.newton.factor() && self.filter.factor()
    }

    /// Newton's iteration; the number of iterations it took, or none where it fails.
    fn iterate(&mut self, rates: &mut Rates<'_>, from: StepFrom<'_>, weights: &[f64]) -> Option<usize> {
        let n = self.n;
        let mut last_size = f64::INFINITY;
        for iteration in 1..=NEWTON_LIMIT {
            for i in 0..STAGES {
                let range = i * n..(i + 1) * n;
                for (l, point) in self.point.iter_mut().enumerate() {
                    *point = from.state[l] + self.z[i * n + l];
                }
                rates.at(from.time + self.table.c[i] * from.step, &self.point, &mut self.slopes[range]);
            }
            self.residual(from.step);
            self.newton.solve_in_place(&mut self.correction);
            self.z.iter_mut().zip(&self.correction).for_each(|(z, correction)| *z += correction);
            let squares = self.correction.iter().enumerate().map(|(k, value)| (value / weights[k % n]).powi(2));
            let size = (squares.sum::<f64>() / (STAGES * n) as f64).sqrt();
            if !size.is_finite() {
                return None;
            }
            let rate = size / last_size;
            // A correction at the roundoff floor no longer shrinks; it is as good as converged.
            if size <= NEWTON_PART && (rate >= 1.0 || iteration == NEWTON_LIMIT) {
                return Some(iteration);
            }
            if iteration > 1 && rate >= 1.0 {
                return None;
            }
            // The first correction tells nothing of the rate; only a tiny one is believed.
            let left = if iteration > 1 { size * rate / (1.0 - rate) } else { size / NEWTON_PART };
            if left <= NEWTON_PART {
                return Some(iteration);
            }
            last_size = size;
        }
        None
    }

    /// `correction` becomes h (A (x) I) F - z.
    fn residual(&mut self, h: f64) {
        let n = self.n;
        for i in 0..STAGES {
            for l in 0..n {
                let sum: f64 = (0..STAGES).map(|j| self.table.a[i][j] * self.slopes[j * n + l]).sum();
                self.correction[i * n + l] = h * sum - self.z[i * n + l];
            }
        }
    }

    /// Difference to an embedded solution of order s, filtered by (I - h gamma J)^-1 so that stiff parts
    /// are not overestimated (Hairer & Wanner, IV.8, formulas 8.17 to 8.20); filtered twice where the first
    /// answer would reject the step.
    fn error(&mut self, rates: &mut Rates<'_>, from: StepFrom<'_>, weights: &[f64]) -> f64 {
        self.point.copy_from_slice(from.slope);
        let first = self.filtered_error(from.step, weights);
        if first < 1.0 {
            return first;
        }
        for (l, point) in self.point.iter_mut().enumerate() {
            *point = from.state[l] + self.correction[l];
        }
        let slope = &mut self.slopes[..self.n];
        rates.at(from.time, &self.point, slope);
        self.point.copy_from_slice(slope);
        self.filtered_error(from.step, weights)
    }

    /// The filtered estimate with the rates at the beginning as they stand in `point`.
    fn filtered_error(&mut self, h: f64, weights: &[f64]) -> f64 {
        let n = self.n;
        for (l, slope) in self.point.iter().enumerate() {
            let sum: f64 = (0..STAGES).map(|i| self.table.error_weights[i] * self.z[i * n + l]).sum();
            self.correction[l] = h * self.table.gamma * slope + sum;
        }
        self.filter.solve_in_place(&mut self.correction[..n]);
        let squares = self.correction[..n].iter().zip(weights).map(|(value, weight)| (value / weight).powi(2));
        (squares.sum::<f64>() / n as f64).sqrt()
    }

    /// State at the fraction `theta` of the last step; beyond 1 the polynomial continued.
    pub(crate) fn dense(&self, theta: f64, out: &mut [f64]) {
        let n = self.n;
        out.copy_from_slice(&self.base);
        if theta == 0.0 {
            return;
        }
        if let Some(i) = self.table.c.iter().position(|&c| c == theta) {
            out.iter_mut().zip(&self.z[i * n..]).for_each(|(value, z)| *value += z);
            return;
        }
        let mut weights = [0.0; STAGES + 1];
        weights[0] = self.barycentric[0] / theta;
        for i in 0..STAGES {
            weights[i + 1] = self.barycentric[i + 1] / (theta - self.table.c[i]);
        }
        let total: f64 = weights.iter().sum();
        for i in 0..STAGES {
            let weight = weights[i + 1] / total;
            out.iter_mut().zip(&self.z[i * n..]).for_each(|(value, z)| *value += weight * z);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::{Attempt, Implicit, StepFrom};
    use crate::rates::Rates;
    use crate::test_models::rotation;

    /// Exact solution cos, sin. Local orders: 10 at the end, 6 inside, 6 of the error estimate.
    #[test]
    fn orders_of_the_end_the_dense_output_and_the_estimate() {
        let field = rotation(1.0);
        let error = |h: f64| {
            let mut rates = Rates::new(&field, &[1.0]).expect("one parameter");
            let mut method = Implicit::new(2);
            rates.linearise(0.0, &[1.0, 0.0]);
            let from = StepFrom { time: 0.0, step: h, state: &[1.0, 0.0], slope: &[0.0, 1.0] };
            let mut end = [0.0; 2];
            let Attempt::Done { error, .. } = method.advance(&mut rates, from, &[1e-14; 2], &mut end) else {
                panic!("a linear system converges");
            };
            let mut inside = [0.0; 2];
            method.dense(0.41, &mut inside);
            let (s, c) = (0.41 * h).sin_cos();
            ((end[0] - h.cos()).hypot(end[1] - h.sin()), (inside[0] - c).hypot(inside[1] - s), error)
        };
        let (coarse, fine) = (error(1.6), error(0.8));
        let orders = [(coarse.0 / fine.0).log2(), (coarse.1 / fine.1).log2(), (coarse.2 / fine.2).log2()];
        for (order, wanted) in orders.iter().zip([10.0, 6.0, 6.0]) {
            assert!((order - wanted).abs() < 0.6, "orders {orders:?}");
        }
    }
}
