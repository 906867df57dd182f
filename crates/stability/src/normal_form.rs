//! Normal-form coefficients at folds and doublings, on the collocation.
//!
//! Real time, integrals over one period T, `phi* ' + A^T phi* = 0` the adjoint of the flow direction.
//! - Fold, `xi' = alpha (p - p*) + b xi^2`, alpha > 0: `b = 1/2 Int <phi*, B(v,v) + 2 S A v>` with `v' - A v - S f = 0`, `Int <v,f> = 0`,
//!   `Int <v,v> = 1`, `Int <phi*,v> = 1`.
//! - Doubling, `xi' = c xi^3`: `a = 1/2 Int <phi*, B(v,v)>`, `h' - A h = B(v,v) - 2 a f` periodic with
//!   `Int <phi*,h> = 0`, `c = 1/6 Int <v*, C(v,v,v) + 3 B(v,h) - 6 a A v>`, v and v* antiperiodic, `Int <v,v> = 1`,
//!   `Int <v*,v> = 1`. c < 0: the doubled cycle is born stable (supercritical).
//!
//! Under a forcing there is no shift in time to split off: phi* = 0, a = 0, S = 0, and the flow direction is no null vector,
//! so that h is what it is (the normal form of the period map; Kuznetsov 2004, Elements of Applied Bifurcation Theory,
//! sec. 5.4). The linear systems give this by themselves, bordered by the column of the period and the row that holds it.
//!
//! Source: Kuznetsov, Govaerts, Doedel & Dhooge 2005 (SIAM J. Numer. Anal. 43:1407); Iooss 1988 (J. Differential
//! Equations 76:47). Left vectors of the collocation rows are adjoint values times Gauss weights, so every integral
//! with an adjoint is a plain sum over rows.

use armilla_collocation::{Row, System, Variation};
use armilla_linalg::{Bordered, Right};

use crate::locate::Located;
use crate::measure::Measures;
use crate::problem::CycleProblem;
use crate::test_function::CriticalKind;

/// Coefficients at a doubling.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DoublingForm {
    /// Change of the turn's duration with the square of the amplitude.
    pub a: f64,
    /// Cubic coefficient; negative where the doubled cycle is born stable.
    pub c: f64,
    /// Derivative of the critical exponent sigma in the parameter along the branch: `xi' = sigma xi + c xi^3`.
    pub slope: f64,
    /// Whether c differs from 0 by more than roundoff.
    pub certain: bool,
}

/// Pairing of the left and the right critical vector, over their lengths, that is rounding.
const ORTHOGONAL: f64 = 1e-12;
/// Change of a log multiplier, by the cubic term at an amplitude as large as the cycle, below which the coefficient is
/// roundoff: that of sums over a cycle, with room.
const NEGLIGIBLE: f64 = 1e-9;

impl DoublingForm {
    /// Amplitude xi at which the multiplier that is 1 at the birth of the doubled cycle has this logarithm, to leading
    /// order: the exponent along xi is 2 c xi^2, over two turns of length `period` each.
    pub fn amplitude_at(&self, log_multiplier: f64, period: f64) -> f64 {
        (log_multiplier / (4.0 * period * self.c)).abs().sqrt()
    }

    /// Distance of the parameter from the threshold at amplitude xi, to leading order.
    pub fn offset(&self, xi: f64) -> f64 {
        -self.c * xi * xi / self.slope
    }
}

impl CycleProblem {
    /// The coefficient b of a located fold; none where the linear systems fail.
    pub fn fold_form(&mut self, located: &Located) -> Option<f64> {
        debug_assert_eq!(located.kind, CriticalKind::Fold);
        let period = self.linearise_at(located)?;
        let system = &mut self.system;
        let len = system.residual().len();
        let (mut f, mut v, mut av, mut bvv) = (vec![0.0; len], vec![0.0; len], vec![0.0; len], vec![0.0; len]);
        system.rates(&mut f);
        // Node data of the flow direction, to shift v along the orbit until it is orthogonal to f.
        let raw = &located.vectors.nodes;
        let nodes = if system.forced().is_some() { raw.clone() } else { orthogonal_to_flow(system, raw, period)? };
        system.values(&nodes, &mut v);
        let size = period * system.integral(&v, &v);
        let psi = &located.vectors.psi;
        let pairing = period * system.pair(psi, &v);
        // Where a third multiplier is 1, as at every fold of a conservative model, the form is another one.
        let length = |x: &[f64]| x.iter().map(|x| x * x).sum::<f64>().sqrt();
        if !(pairing.abs() > ORTHOGONAL * period * length(psi) * length(&v)) {
            return None;
        }
        system.linear(&nodes, &mut av);
        system.quadratic(&nodes, &nodes, &mut bvv);
        let quadratic = period * system.pair(psi, &bvv);
        let mixed = 2.0 * located.vectors.period / period * period * system.pair(psi, &av);
        // v is scaled to unit size, psi so that its pairing with the scaled v is 1. The sign of v is free: it is taken so
        // that a rising parameter pushes along v, and b > 0 then says that the two cycles exist below the threshold.
        let mut push = vec![0.0; len];
        system.parameter_rates(&mut push);
        let sign = (system.pair(psi, &push) * pairing).signum();
        Some(sign * 0.5 * (quadratic + mixed) / (pairing * size.sqrt()))
    }

    /// The coefficients of a located doubling; none where the field has no third derivatives or the systems fail.
    pub fn doubling_form(&mut self, located: &Located) -> Option<DoublingForm> {
        debug_assert_eq!(located.kind, CriticalKind::Doubling);
        let period = self.linearise_at(located)?;
        let mut phase = vec![0.0; located.point.unknowns.nodes.len()];
        self.system.phase_row(&located.point.unknowns.nodes, &mut phase);
        let system = &mut self.system;
        let len = system.residual().len();
        let column = || vec![0.0; len];
        let (mut f, mut v, mut av, mut bvv, mut bvh, mut cvvv) =
            (column(), column(), column(), column(), column(), column());
        let raw = &located.vectors;
        system.values(&raw.nodes, &mut v);
        let scale = 1.0 / (period * system.integral(&v, &v)).sqrt();
        let nodes: Vec<f64> = raw.nodes.iter().map(|value| scale * value).collect();
        system.values(&nodes, &mut v);
        let pairing = period * system.pair(&raw.psi, &v);
        system.rates(&mut f);
        system.linear(&nodes, &mut av);
        system.quadratic(&nodes, &nodes, &mut bvv);
        system.cubic(&nodes, &mut cvvv).ok()?;
        let periodic = Periodic::new(system, &phase)?;
        let (h, a, phi) = periodic.second_order(system, &bvv, period);
        let h = without_flow(system, &h, (&phi, &located.point.unknowns.nodes), period);
        system.quadratic(&nodes, &h, &mut bvh);
        let integrand: Vec<f64> = (0..len).map(|k| cvvv[k] + 3.0 * bvh[k] - 6.0 * a * av[k]).collect();
        let c = period * system.pair(&raw.psi, &integrand) / (6.0 * pairing);
        let slope = exponent_slope(system, located, &phase)?;
        let spreads = Measures::of(&located.point.profile()).spreads;
        // A motion that does not move, as under a parametric forcing, has its natural sizes.
        let sizes = spreads.iter().zip(&self.metric.scales).map(|(spread, scale)| spread.max(*scale));
        let square = period * sizes.map(|size| size * size).sum::<f64>();
        let certain = (c * square * period).abs() > NEGLIGIBLE;
        (a.is_finite() && c.is_finite()).then_some(DoublingForm { a, c, slope, certain })
    }

    fn linearise_at(&mut self, located: &Located) -> Option<f64> {
        self.system.set_mesh(located.point.degree, &located.point.mesh);
        self.system.linearise(&located.point.unknowns).ok()?;
        Some(located.point.unknowns.period)
    }
}

/// `dsigma/dp` of the critical exponent along the branch. With `L v + T sigma v` for L v in the test function's M,
/// G(sigma, z) = 0 defines sigma, and its derivatives are those of a bordered function: `G_sigma = -T psi^T v`, the total
/// derivative in p from the gradient row and the tangent (Wilkins, Tidor, White & Barton 2009, SIAM J. Sci. Comput.
/// 31:2706, for exponent sensitivities).
fn exponent_slope(system: &mut System, located: &Located, phase: &[f64]) -> Option<f64> {
    let raw = &located.vectors;
    let mut v = vec![0.0; system.residual().len()];
    system.values(&raw.nodes, &mut v);
    let by_exponent = located.point.unknowns.period * system.pair(&raw.psi, &v);
    let mut row = Row::zero(phase.len());
    let variation = Variation { psi: &raw.psi, nodes: &raw.nodes, period: 0.0, parameter: 0.0 };
    system.variation_gradient(variation, &mut row);
    let mut bordered = Bordered::new(system.shape(), 2);
    system.period_column(bordered.column_mut(0));
    system.parameter_column(bordered.column_mut(1));
    bordered.row_mut(0).copy_from_slice(phase);
    let [by_period, by_parameter] = system.phase_corner();
    bordered.corner_mut().copy_from_slice(&[by_period, by_parameter, 0.0, 1.0]);
    bordered.prepare(system.cyclic(), 1.0).ok()?;
    let (mut nodes, mut scalars) = (vec![0.0; phase.len()], [0.0; 2]);
    let right = Right { core: &[], closing: &[], border: &[0.0, 1.0] };
    bordered.solve(system.cyclic(), right, &mut nodes, &mut scalars);
    let products: f64 = row.nodes.iter().zip(&nodes).map(|(r, x)| r * x).sum();
    let total = products + row.period * scalars[0] + row.parameter * scalars[1];
    Some(total / by_exponent)
}

/// h without its part along the flow, fixed by `Int <phi*, h> = 0`; `orbit` are the nodes of the cycle.
pub(crate) fn without_flow(system: &mut System, h: &[f64], (phi, orbit): (&[f64], &[f64]), period: f64) -> Vec<f64> {
    let mut values = vec![0.0; system.residual().len()];
    system.values(h, &mut values);
    let along = period * system.pair(phi, &values);
    let flow = flow_nodes(system, orbit, period);
    h.iter().zip(&flow).map(|(h, f)| h - along * f).collect()
}

/// The periodic problem bordered by the flow column and the phase row: regular away from folds.
pub(crate) struct Periodic {
    bordered: Bordered,
    /// Adjoint of the flow times Gauss weights, scaled to `Int <phi*, f> dt = 1` up to the period.
    psi: Vec<f64>,
}

impl Periodic {
    pub(crate) fn new(system: &System, phase: &[f64]) -> Option<Self> {
        let shape = system.shape();
        let mut bordered = Bordered::new(shape, 1);
        system.period_column(bordered.column_mut(0));
        bordered.row_mut(0).copy_from_slice(phase);
        bordered.corner_mut()[0] = system.phase_corner()[0];
        bordered.prepare(system.cyclic(), 1.0).ok()?;
        let mut psi = vec![0.0; shape.core_len()];
        bordered.solve_transposed(system.cyclic(), &[], &[1.0], &mut psi, &mut [0.0]);
        Some(Self { bordered, psi })
    }

    /// Solves `h' - A h + 2 a f = B`, returns h at the nodes, a, and the scaled adjoint of the flow.
    pub(crate) fn second_order(mut self, system: &System, b: &[f64], period: f64) -> (Vec<f64>, f64, Vec<f64>) {
        let mut right = b.to_vec();
        system.weigh_rows(period, &mut right);
        let mut h = vec![0.0; system.shape().nodes_len()];
        let mut scalar = [0.0];
        let right = Right { core: &right, closing: &[], border: &[0.0] };
        self.bordered.solve(system.cyclic(), right, &mut h, &mut scalar);
        // The scalar multiplies the column -h f: S = -2 a T.
        let a = -0.5 * scalar[0] / period;
        // Column times psi is 1: -Sum h psi f = 1.
        self.psi.iter_mut().for_each(|psi| *psi /= -period);
        (h, a, self.psi)
    }
}

/// The flow direction f = u'/T at the nodes, from the slopes of the pieces; means of both pieces at shared nodes.
fn flow_nodes(system: &System, nodes: &[f64], period: f64) -> Vec<f64> {
    let (n, tables, mesh) = (system.n(), system.tables(), system.mesh());
    let m = tables.degree;
    let mut out = vec![0.0; nodes.len()];
    let mut counts = vec![0.0; nodes.len() / n];
    for (i, pair) in mesh.windows(2).enumerate() {
        let scale = 1.0 / ((pair[1] - pair[0]) * period);
        for row in 0..=m {
            let target = i * m + row;
            counts[target] += 1.0;
            for j in 0..=m {
                let weight = scale * tables.node_slope[row * (m + 1) + j];
                for a in 0..n {
                    out[target * n + a] += weight * nodes[(i * m + j) * n + a];
                }
            }
        }
    }
    for (point, count) in counts.iter().enumerate() {
        out[point * n..(point + 1) * n].iter_mut().for_each(|value| *value /= count);
    }
    out
}

/// v shifted along the orbit until `Int <v, f> = 0`.
fn orthogonal_to_flow(system: &mut System, v: &[f64], period: f64) -> Option<Vec<f64>> {
    let len = system.residual().len();
    let (mut values, mut f) = (vec![0.0; len], vec![0.0; len]);
    system.values(v, &mut values);
    system.rates(&mut f);
    let along = system.integral(&values, &f) / system.integral(&f, &f);
    let orbit = system.last_nodes().to_vec();
    let flow = flow_nodes(system, &orbit, period);
    along.is_finite().then(|| v.iter().zip(&flow).map(|(v, f)| v - along * f).collect())
}
