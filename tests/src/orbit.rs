//! Motions by the classical method of Runge and Kutta (Kutta 1901, Z. Math. Phys. 46:435), sampled and spoilt by noise: what a
//! user would have measured. Shares nothing with the engine, rates included.

use crate::Random;

/// A table of samples in the making.
pub struct Motion<'a> {
    /// Writes the rates at a time and a state.
    pub rates: &'a dyn Fn(f64, &[f64], &mut [f64]),
    /// Steps per unit of time.
    pub steps: f64,
}

impl Motion<'_> {
    /// The state some time after `state` at time `from`.
    pub fn state_after(&self, state: &[f64], from: f64, span: f64) -> Vec<f64> {
        let count = (self.steps * span).ceil().max(1.0) as usize;
        let (n, h) = (state.len(), span / count as f64);
        let mut x = state.to_vec();
        let mut k = vec![vec![0.0; n]; 4];
        let mut at = vec![0.0; n];
        for step in 0..count {
            let t = from + step as f64 * h;
            for stage in 0..4 {
                let share = [0.0, 0.5, 0.5, 1.0][stage] * h;
                for i in 0..n {
                    at[i] = x[i] + if stage > 0 { share * k[stage - 1][i] } else { 0.0 };
                }
                (self.rates)(t + share, &at, &mut k[stage]);
            }
            for i in 0..n {
                x[i] += h / 6.0 * (k[0][i] + 2.0 * k[1][i] + 2.0 * k[2][i] + k[3][i]);
            }
        }
        x
    }

    /// `count` samples over `span` from `state` at time `from` on, with normal noise of `noise` of each state's range, as a table.
    pub fn table(&self, names: &[&str], state: &[f64], (from, span, count): (f64, f64, usize), noise: f64) -> String {
        let n = state.len();
        let mut rows = vec![state.to_vec()];
        let times: Vec<f64> = (0..count).map(|k| from + span * k as f64 / (count - 1) as f64).collect();
        for pair in times.windows(2) {
            rows.push(self.state_after(&rows[rows.len() - 1], pair[0], pair[1] - pair[0]));
        }
        let range = |i: usize| {
            let values = || rows.iter().map(|row| row[i]);
            values().fold(f64::NEG_INFINITY, f64::max) - values().fold(f64::INFINITY, f64::min)
        };
        let sizes: Vec<f64> = (0..n).map(|i| noise * range(i)).collect();
        let mut random = Random::new(11);
        let mut text = format!("t,{}\n", names.join(","));
        for (time, row) in times.iter().zip(&rows) {
            text.push_str(&format!("{time:.9}"));
            for (x, size) in row.iter().zip(&sizes) {
                // Twelve numbers between 0 and 1 have the variance 1 and are nearly normal.
                let normal = (0..12).map(|_| random.between(0.0, 1.0)).sum::<f64>() - 6.0;
                text.push_str(&format!(",{:.9e}", x + size * normal));
            }
            text.push('\n');
        }
        text
    }
}
