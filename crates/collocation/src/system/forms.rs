//! Derivatives of the rates along a cycle, and integrals: what normal forms are made of.

use armilla_model::{Batch, Direction, NotProvided};

use super::{System, dot, to_points};

impl System {
    /// `D^2 f[u, v]` at all Gauss points of the last linearisation for variations given at the nodes; `out` has N m n
    /// numbers, point by point.
    pub fn quadratic(&mut self, u: &[f64], v: &[f64], out: &mut [f64]) {
        let (n, len) = (self.n(), self.points());
        to_points(self.tables, n, u, &mut self.psi_points);
        to_points(self.tables, n, v, &mut self.variation_points);
        let at = Batch { len, time: &self.times, states: &self.states, parameters: &self.spec.parameters };
        let u = Direction { states: &self.psi_points, columns: &[] };
        let v = Direction { states: &self.variation_points, columns: &[] };
        self.evaluator.second(at, u, v, &mut self.gradient_states);
        by_point(n, &self.gradient_states, out);
    }

    /// `D^3 f[v, v, v]` at all Gauss points, as [`System::quadratic`].
    ///
    /// # Errors
    /// [`NotProvided`] by a field without third derivatives.
    pub fn cubic(&mut self, v: &[f64], out: &mut [f64]) -> Result<(), NotProvided> {
        let (n, len) = (self.n(), self.points());
        to_points(self.tables, n, v, &mut self.variation_points);
        let at = Batch { len, time: &self.times, states: &self.states, parameters: &self.spec.parameters };
        let v = Direction { states: &self.variation_points, columns: &[] };
        self.evaluator.third(at, [v, v, v], &mut self.gradient_states)?;
        by_point(n, &self.gradient_states, out);
        Ok(())
    }

    /// `D^3 f[u, v, w]` at all Gauss points, as [`System::quadratic`].
    ///
    /// # Errors
    /// [`NotProvided`] by a field without third derivatives.
    pub fn trilinear(&mut self, [u, v, w]: [&[f64]; 3], out: &mut [f64]) -> Result<(), NotProvided> {
        let (n, len) = (self.n(), self.points());
        to_points(self.tables, n, u, &mut self.psi_points);
        to_points(self.tables, n, v, &mut self.variation_points);
        // Asked at located events only, so the third direction may have storage of its own.
        let mut third = vec![0.0; n * len];
        to_points(self.tables, n, w, &mut third);
        let at = Batch { len, time: &self.times, states: &self.states, parameters: &self.spec.parameters };
        let along = |states| Direction { states, columns: &[] };
        let directions = [along(&self.psi_points[..]), along(&self.variation_points[..]), along(&third[..])];
        self.evaluator.third(at, directions, &mut self.gradient_states)?;
        by_point(n, &self.gradient_states, out);
        Ok(())
    }

    /// `A v` at all Gauss points, as [`System::quadratic`].
    pub fn linear(&mut self, v: &[f64], out: &mut [f64]) {
        let (n, len) = (self.n(), self.points());
        to_points(self.tables, n, v, &mut self.variation_points);
        out.fill(0.0);
        for (entry, &(a, b)) in self.entries.iter().enumerate() {
            for point in 0..len {
                out[point * n + a] += self.jacobian[entry * len + point] * self.variation_points[b * len + point];
            }
        }
    }

    /// Values of node data at all Gauss points, as [`System::quadratic`].
    pub fn values(&mut self, v: &[f64], out: &mut [f64]) {
        let n = self.n();
        to_points(self.tables, n, v, &mut self.variation_points);
        by_point(n, &self.variation_points, out);
    }

    /// Rates at all Gauss points, as [`System::quadratic`].
    pub fn rates(&self, out: &mut [f64]) {
        by_point(self.n(), &self.rates, out);
    }

    /// Derivatives of the rates in the free parameter at all Gauss points, as [`System::quadratic`]; under a forcing with
    /// what the change of its period does, `f_p + (f + t f_t) T_p / T`.
    pub fn parameter_rates(&self, out: &mut [f64]) {
        by_point(self.n(), &self.free_column[..self.rates.len()], out);
        let Some([_, slope, _]) = self.forced_period(self.spec.parameters[self.spec.free]) else { return };
        let (n, points) = (self.n(), self.points());
        for point in 0..points {
            for a in 0..n {
                out[point * n + a] += slope / self.period * self.period_rates[a * points + point];
            }
        }
    }

    /// `Sum_i h_i Sum_k x_ik . y_ik`: with x a left vector of the rows (adjoint values times Gauss weights) it is the
    /// integral of the adjoint with y over scaled time.
    pub fn pair(&self, x: &[f64], y: &[f64]) -> f64 {
        let rows = self.n() * self.tables.degree;
        x.chunks_exact(rows).zip(y.chunks_exact(rows)).enumerate().map(|(i, (x, y))| self.h(i) * dot(x, y)).sum()
    }

    /// `Int <x, y> dt` over scaled time by Gauss quadrature.
    pub fn integral(&self, x: &[f64], y: &[f64]) -> f64 {
        let (n, m) = (self.n(), self.tables.degree);
        x.chunks_exact(n)
            .zip(y.chunks_exact(n))
            .enumerate()
            .map(|(point, (x, y))| self.h(point / m) * self.tables.weights[point % m] * dot(x, y))
            .sum()
    }

    /// Multiplies values at Gauss points by `factor` and the length of their interval: a right side of the interval rows.
    pub fn weigh_rows(&self, factor: f64, values: &mut [f64]) {
        let rows = self.n() * self.tables.degree;
        for (i, values) in values.chunks_exact_mut(rows).enumerate() {
            let weight = factor * self.h(i);
            values.iter_mut().for_each(|value| *value *= weight);
        }
    }
}

fn by_point(n: usize, from: &[f64], out: &mut [f64]) {
    let points = from.len() / n;
    for point in 0..points {
        for a in 0..n {
            out[point * n + a] = from[a * points + point];
        }
    }
}
