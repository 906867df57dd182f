//! The metric in which strides, corrections and tangents are measured.
//!
//! `<(u, T, p), (v, S, q)> = Int Sum_a u_a v_a / scale_a^2 dt / n + T S / T0^2 + p q / p0^2`, the integral by the
//! Clenshaw-Curtis weights of the nodes: positive definite on the node values, which Gauss points would not be.

use crate::system::Row;
use crate::tables::Tables;

/// Weights of the blocks; fixed along a branch.
#[derive(Clone, Debug, PartialEq)]
pub struct Metric {
    /// Size of each state, in its unit.
    pub scales: Vec<f64>,
    /// Period of reference T0.
    pub period_scale: f64,
    /// Size of the parameter p0.
    pub parameter_scale: f64,
}

impl Metric {
    /// Inner product of two vectors on `mesh`.
    pub fn inner(&self, tables: &Tables, mesh: &[f64], a: &Row, b: &Row) -> f64 {
        self.nodes_inner(tables, mesh, &a.nodes, &b.nodes)
            + a.period * b.period / self.period_scale.powi(2)
            + a.parameter * b.parameter / self.parameter_scale.powi(2)
    }

    /// Largest modulus of any node value over the scale of its state.
    pub fn largest(&self, nodes: &[f64]) -> f64 {
        let sizes = nodes.chunks_exact(self.scales.len()).flat_map(|node| node.iter().zip(&self.scales));
        sizes.fold(0.0, |largest: f64, (value, scale)| largest.max((value / scale).abs()))
    }

    /// The part of the inner product over the nodes.
    pub fn nodes_inner(&self, tables: &Tables, mesh: &[f64], a: &[f64], b: &[f64]) -> f64 {
        let (n, m) = (self.scales.len(), tables.degree);
        let mut sum = 0.0;
        for (i, pair) in mesh.windows(2).enumerate() {
            let h = (pair[1] - pair[0]) / n as f64;
            for (j, weight) in tables.node_weights.iter().enumerate() {
                let of = (i * m + j) * n;
                let mut local = 0.0;
                for (s, scale) in self.scales.iter().enumerate() {
                    local += (a[of + s] / scale) * (b[of + s] / scale);
                }
                sum += h * weight * local;
            }
        }
        sum
    }

    /// The functional `x -> <a, x>` as a row.
    pub fn functional(&self, tables: &Tables, mesh: &[f64], a: &Row, out: &mut Row) {
        let (n, m) = (self.scales.len(), tables.degree);
        out.nodes.clear();
        out.nodes.resize(a.nodes.len(), 0.0);
        for (i, pair) in mesh.windows(2).enumerate() {
            let h = (pair[1] - pair[0]) / n as f64;
            for (j, weight) in tables.node_weights.iter().enumerate() {
                let of = (i * m + j) * n;
                for (s, scale) in self.scales.iter().enumerate() {
                    out.nodes[of + s] += h * weight * a.nodes[of + s] / (scale * scale);
                }
            }
        }
        out.period = a.period / self.period_scale.powi(2);
        out.parameter = a.parameter / self.parameter_scale.powi(2);
    }
}
