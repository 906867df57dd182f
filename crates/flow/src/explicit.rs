//! The explicit method: Dormand–Prince of order 8 with errors of order 5 and 3 and dense output of
//! order 7 (Hairer, Nørsett & Wanner 1993, Solving Ordinary Differential Equations I, II.5, II.6, II.10).
//!
//! `x(t + h) = x + h Sum_j b_j k_j`, twelve stages; four more give the dense output, a polynomial of
//! degree 7 in `theta` in [0, 1]. Stage slopes lie one after another, `k[j * n + i]`. The numbers of the
//! method are those of the crate `differential-equations`; its stepping is not used, because it
//! allocates at every stage and its dense output loses the order (its last four coefficients are nested
//! in the wrong sequence, see the order test below).

use differential_equations::tableau::ButcherTableau;

use crate::rates::Rates;

const STAGES: usize = 12;
const DENSE_STAGES: usize = 16;
/// Number of coefficients of the dense output.
const COEFFICIENTS: usize = 8;

/// Where a step begins and how long it is.
#[derive(Clone, Copy)]
pub(crate) struct StepFrom<'a> {
    pub(crate) time: f64,
    pub(crate) step: f64,
    pub(crate) state: &'a [f64],
    /// Rates at `time`, `state`.
    pub(crate) slope: &'a [f64],
}

/// Workspace of the explicit method.
#[derive(Clone)]
pub(crate) struct Explicit {
    c: [f64; DENSE_STAGES],
    a: [[f64; DENSE_STAGES]; DENSE_STAGES],
    b: [f64; STAGES],
    /// Difference to the solution of order 5, and to the one of order 3.
    error5: [f64; STAGES],
    error3: [f64; STAGES],
    dense: [[f64; DENSE_STAGES]; DENSE_STAGES],
    n: usize,
    k: Vec<f64>,
    stage: Vec<f64>,
    coefficients: Vec<f64>,
}

impl Explicit {
    pub(crate) fn new(n: usize) -> Self {
        let table = ButcherTableau::<f64, STAGES, DENSE_STAGES>::dop853();
        let lower = table.bh.expect("this method has an embedded solution of order 3");
        Self {
            c: table.c,
            a: table.a,
            b: table.b,
            error5: table.er.expect("this method has error coefficients of order 5"),
            error3: std::array::from_fn(|j| table.b[j] - lower[j]),
            dense: table.bi.expect("this method has dense output"),
            n,
            k: vec![0.0; DENSE_STAGES * n],
            stage: vec![0.0; n],
            coefficients: vec![0.0; COEFFICIENTS * n],
        }
    }

    /// Fills stage `j` from the stages before it.
    fn fill_stage(&mut self, rates: &mut Rates<'_>, from: StepFrom<'_>, j: usize) {
        let n = self.n;
        self.stage.copy_from_slice(from.state);
        for (l, &weight) in self.a[j][..j].iter().enumerate().filter(|(_, weight)| **weight != 0.0) {
            let scaled = from.step * weight;
            self.stage.iter_mut().zip(&self.k[l * n..]).for_each(|(x, k)| *x += scaled * k);
        }
        rates.at(from.time + self.c[j] * from.step, &self.stage, &mut self.k[j * n..(j + 1) * n]);
    }

    /// Computes the end of a step into `end`.
    pub(crate) fn advance(&mut self, rates: &mut Rates<'_>, from: StepFrom<'_>, end: &mut [f64]) {
        let n = self.n;
        self.k[..n].copy_from_slice(from.slope);
        for j in 1..STAGES {
            self.fill_stage(rates, from, j);
        }
        end.copy_from_slice(from.state);
        for (j, &weight) in self.b.iter().enumerate().filter(|(_, weight)| **weight != 0.0) {
            let scaled = from.step * weight;
            end.iter_mut().zip(&self.k[j * n..]).for_each(|(x, k)| *x += scaled * k);
        }
    }

    /// Error of the step just computed in units of `weights`: at most 1 is good enough.
    ///
    /// The two estimates are combined as e5^2 / sqrt(e5^2 + 0.01 e3^2), of order 8 in the step
    /// (the book above, II.10, formula 10.17).
    pub(crate) fn error(&self, step: f64, weights: &[f64]) -> f64 {
        let n = self.n;
        let (mut five, mut three) = (0.0, 0.0);
        for (i, weight) in weights.iter().enumerate() {
            let sum = |by: &[f64; STAGES]| (0..STAGES).map(|j| by[j] * self.k[j * n + i]).sum::<f64>() / weight;
            five += sum(&self.error5).powi(2);
            three += sum(&self.error3).powi(2);
        }
        let below = five + 0.01 * three;
        if below == 0.0 { 0.0 } else { step.abs() * five / (below * n as f64).sqrt() }
    }

    /// Prepares the dense output of the step just computed; `slope_end` are the rates at its end.
    pub(crate) fn prepare_dense(&mut self, rates: &mut Rates<'_>, from: StepFrom<'_>, end: &[f64], slope_end: &[f64]) {
        let n = self.n;
        self.k[STAGES * n..(STAGES + 1) * n].copy_from_slice(slope_end);
        for j in STAGES + 1..DENSE_STAGES {
            self.fill_stage(rates, from, j);
        }
        for i in 0..n {
            let difference = end[i] - from.state[i];
            let first = from.step * from.slope[i] - difference;
            self.coefficients[i] = from.state[i];
            self.coefficients[n + i] = difference;
            self.coefficients[2 * n + i] = first;
            self.coefficients[3 * n + i] = difference - from.step * slope_end[i] - first;
            for l in 4..COEFFICIENTS {
                let sum: f64 = (0..DENSE_STAGES).map(|j| self.dense[l][j] * self.k[j * n + i]).sum();
                self.coefficients[l * n + i] = from.step * sum;
            }
        }
    }

    /// State at the fraction `theta` of the last step prepared.
    pub(crate) fn dense(&self, theta: f64, out: &mut [f64]) {
        let n = self.n;
        let rest = 1.0 - theta;
        for (i, value) in out.iter_mut().enumerate() {
            let c = |l: usize| self.coefficients[l * n + i];
            let high = c(4) + theta * (c(5) + rest * (c(6) + theta * c(7)));
            *value = c(0) + theta * (c(1) + rest * (c(2) + theta * (c(3) + rest * high)));
        }
    }
}

#[cfg(test)]
mod tests {
    use super::{Explicit, StepFrom};
    use crate::rates::Rates;
    use crate::test_models::rotation;

    /// Errors of one step of length h on x' = -y, y' = x against cos, sin (exact): local orders are one
    /// more than those of the method, 9 at the end and 8 inside.
    #[test]
    fn orders_of_the_end_and_of_the_dense_output() {
        let field = rotation(1.0);
        let error = |h: f64| {
            let mut rates = Rates::new(&field, &[1.0]).expect("one parameter");
            let mut method = Explicit::new(2);
            let from = StepFrom { time: 0.0, step: h, state: &[1.0, 0.0], slope: &[0.0, 1.0] };
            let (mut end, mut slope, mut inside) = ([0.0; 2], [0.0; 2], [0.0; 2]);
            method.advance(&mut rates, from, &mut end);
            rates.at(h, &end, &mut slope);
            method.prepare_dense(&mut rates, from, &end, &slope);
            let mut worst: f64 = 0.0;
            for theta in [0.13, 0.37, 0.5, 0.71, 0.9] {
                method.dense(theta, &mut inside);
                let (s, c) = (theta * h).sin_cos();
                worst = worst.max((inside[0] - c).abs()).max((inside[1] - s).abs());
            }
            ((end[0] - h.cos()).hypot(end[1] - h.sin()), worst)
        };
        let (coarse, fine) = (error(1.2), error(0.6));
        let (end, inside) = ((coarse.0 / fine.0).log2(), (coarse.1 / fine.1).log2());
        assert!((end - 9.0).abs() < 0.4, "order at the end {end}");
        assert!((inside - 8.0).abs() < 0.5, "order inside {inside}");
    }
}
