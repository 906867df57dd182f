//! A small disturbance carried along an orbit: `v' = J(t, x(t)) v`.
//!
//! Inside each step of the orbit, x(t) is its dense output, and the linear equation is solved by one step of
//! Radau IIA with five stages: the increments z_i of the stages solve
//! `z_i - h Sum_j a_ij J_j z_j = h Sum_j a_ij J_j v`, found by substitution where the step is not stiff, else
//! by one linear system of size s n. L-stable, so damped
//! disturbances die whatever the step; order 9 where they matter.
//!
//! The part of v along the flow neither grows nor shrinks in the long run. It is taken out where the motion
//! is autonomous, so that the growth that is left tells a cycle (negative) from a torus (zero) from an
//! irregular motion (positive).

use crate::integrator::Integrator;
use crate::lu::Lu;
use crate::radau::{RadauTable, STAGES};

/// A disturbance of an orbit, in units of `scale` per state.
pub(crate) struct Tangent {
    table: RadauTable,
    vector: Vec<f64>,
    scale: Vec<f64>,
    /// Whether the part along the flow is taken out.
    across: bool,
    /// (row, column, value) of the Jacobians, stage after stage.
    jacobians: Vec<(usize, usize, f64)>,
    stages: Vec<f64>,
    slopes: Vec<f64>,
    point: Vec<f64>,
    /// Made when the first stiff step needs it.
    system: Option<Lu>,
}

/// Substitutions allowed: explicit steps contract by about one half each.
const ITERATIONS: usize = 60;
/// Relative change at which the stages have converged, far below what an exponent needs.
const CONVERGED: f64 = 1e-9;
/// Stages this large (the disturbance has size 1) are diverging.
const HOPELESS: f64 = 1e12;

impl Tangent {
    /// A disturbance with all directions in it.
    pub(crate) fn new(scale: &[f64], across: bool) -> Self {
        let n = scale.len();
        let vector = scale.iter().enumerate().map(|(i, s)| s / (1.0 + i as f64).sqrt()).collect();
        Self {
            table: RadauTable::new(),
            vector,
            scale: scale.to_vec(),
            across,
            jacobians: Vec::new(),
            stages: vec![0.0; STAGES * n],
            slopes: vec![0.0; STAGES * n],
            point: vec![0.0; n],
            system: None,
        }
    }

    /// Carries the disturbance over the last step of `integrator` and scales it back to size 1; the logarithm
    /// of its growth, or none where the step is too long for its Jacobian.
    pub(crate) fn carry(&mut self, integrator: &mut Integrator<'_>) -> Option<f64> {
        let h = integrator.time() - integrator.previous_time();
        self.jacobians.clear();
        for c in self.table.c {
            integrator.dense(c, &mut self.point);
            integrator.rates.linearise(integrator.previous_time() + c * h, &self.point);
            self.jacobians.extend(integrator.rates.entries());
        }
        if !self.iterate(h) && !self.solve(h) {
            return None;
        }
        let n = self.vector.len();
        let last = &self.stages[(STAGES - 1) * n..];
        self.vector.iter_mut().zip(last).for_each(|(v, z)| *v += z);
        if self.across {
            self.take_out(integrator.slope());
        }
        Some(self.rescale())
    }

    /// Solves the stages by substituting them into themselves; false where that does not converge. It does
    /// where the steps are not stiff, at the cost of sparse products alone.
    fn iterate(&mut self, h: f64) -> bool {
        let n = self.vector.len();
        self.stages.fill(0.0);
        for _ in 0..ITERATIONS {
            self.slopes.fill(0.0);
            let per_stage = self.jacobians.len() / STAGES;
            for (k, &(row, column, value)) in self.jacobians.iter().enumerate() {
                let at = k / per_stage * n;
                self.slopes[at + row] += value * (self.vector[column] + self.stages[at + column]);
            }
            let (mut change, mut size) = (0.0f64, 0.0f64);
            for (k, stage) in self.stages.iter_mut().enumerate() {
                let (i, l) = (k / n, k % n);
                let sum: f64 = (0..STAGES).map(|j| self.table.a[i][j] * self.slopes[j * n + l]).sum();
                change = change.max(((h * sum - *stage) / self.scale[l]).abs());
                size = size.max((h * sum / self.scale[l]).abs());
                *stage = h * sum;
            }
            if change <= CONVERGED * (1.0 + size) {
                return true;
            }
            if size.is_nan() || size > HOPELESS {
                return false;
            }
        }
        false
    }

    /// Solves the stages as one linear system; false where it is singular or not finite.
    fn solve(&mut self, h: f64) -> bool {
        let n = self.vector.len();
        let size = STAGES * n;
        let system = self.system.get_or_insert_with(|| Lu::new(size));
        system.entries.fill(0.0);
        self.stages.fill(0.0);
        let per_stage = self.jacobians.len() / STAGES;
        for (k, &(row, column, value)) in self.jacobians.iter().enumerate() {
            let j = k / per_stage;
            for (i, weights) in self.table.a.iter().enumerate() {
                let part = h * weights[j] * value;
                system.entries[(i * n + row) * size + j * n + column] -= part;
                self.stages[i * n + row] += part * self.vector[column];
            }
        }
        (0..size).for_each(|k| system.entries[k * size + k] += 1.0);
        let regular = system.factor();
        if regular {
            system.solve_in_place(&mut self.stages);
        }
        regular
    }

    /// Takes out the part along the flow.
    fn take_out(&mut self, flow: &[f64]) {
        let (mut along, mut square) = (0.0, 0.0);
        for (i, s) in self.scale.iter().enumerate() {
            along += self.vector[i] / s * (flow[i] / s);
            square += (flow[i] / s).powi(2);
        }
        // Only at a state of rest there is no flow to take out.
        if square > 0.0 {
            let factor = along / square;
            self.vector.iter_mut().zip(flow).for_each(|(v, f)| *v -= factor * f);
        }
    }

    fn rescale(&mut self) -> f64 {
        let square: f64 = self.vector.iter().zip(&self.scale).map(|(v, s)| (v / s).powi(2)).sum();
        // A disturbance that has died entirely (possible in one state) starts again, as small as numbers go.
        let size = square.sqrt().max(f64::MIN_POSITIVE);
        self.vector.iter_mut().for_each(|v| *v /= size);
        size.ln()
    }
}

#[cfg(test)]
mod tests {
    use std::sync::atomic::AtomicBool;

    use super::Tangent;
    use crate::integrator::{Integrator, Limits, Tolerance};
    use crate::test_models::{hopf_with_shear, van_der_pol};

    /// Exact (Hopf with shear): the multiplier is exp(-4 pi mu/(1 + k mu)) a turn, so the growth across the
    /// flow is -2 mu per unit of time. And van der Pol at mu = 5, log multiplier -85.4520185448835 a period of
    /// 11.6122306677195700 (independent computation with 113 bits). Both up to the change of the projected size
    /// within one turn, which 100 time units divide.
    #[test]
    fn growth_across_a_cycle_is_its_exponent() {
        let abort = AtomicBool::new(false);
        for (field, parameters, start, exact, time) in [
            (hopf_with_shear(), vec![0.25, 0.5], [0.5, 0.0], -0.5, 558.505_360_638_185_5),
            (van_der_pol(), vec![5.0], [2.0, 0.0], -85.452_018_544_883_5 / 11.612_230_667_719_57, 1161.223),
        ] {
            let limits = Limits { steps: 1_000_000, abort: &abort, bound: 1e12 };
            let tolerance = Tolerance::uniform(2, 1e-10, 1e-10);
            let mut integrator =
                Integrator::new(&field, &parameters, (0.0, &start), tolerance, limits).expect("a good start");
            let mut tangent = Tangent::new(&[1.0, 1.0], true);
            while integrator.time() < 100.0 {
                integrator.advance().expect("it is stable");
            }
            let (begin, mut growth) = (integrator.time(), 0.0);
            while integrator.time() < begin + time {
                integrator.advance().expect("it is stable");
                growth += tangent.carry(&mut integrator).expect("steps are short");
            }
            let found = growth / (integrator.time() - begin);
            assert!((found / exact - 1.0).abs() < 5e-3, "{found} for {exact}");
        }
    }
}
