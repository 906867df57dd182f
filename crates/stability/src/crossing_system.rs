//! The equations of a point where two branches of cycles cross.
//!
//! With H(z) = 0 the cycle's equations (collocation, closure, phase; one fewer than the unknowns z = (u, T, p)), b a column
//! and C two rows that make the bordered matrix regular,
//! ```text
//! [ H_z  b ] [phi_j]   [ 0  ]       (psi, g)^T [ H_z  b ] = [0  1],   dg_j/dz = - psi^T H_zz phi_j
//! [ C    0 ] [ g_j ] = [ e_j]                  [ C    0 ]
//! ```
//! g_1 = g_2 = 0 where H_z loses rank: two directions solve the linearised equations. That is one condition more than z
//! can meet, so an unfolding beta is added: `H(z) + beta b = 0, g_1 = 0, g_2 = 0`, regular at a simple crossing where its
//! two tangents differ (Moore 1980, Numer. Funct. Anal. Optim. 2:441; Govaerts 2000, SIAM, ch. 8). beta is 0 at a true
//! crossing; where two branches pass each other at a distance it is not.

use armilla_collocation::{Fault, Iterate, Metric, Row, System, Variation};
use armilla_linalg::{Bordered, Right};

/// Null vectors and gradients of the crossing equations, with their borders.
pub(crate) struct CrossingSystem {
    bordered: Bordered,
    newton: Bordered,
    phase: Vec<f64>,
    border_rows: [Row; 2],
    border_column: Vec<f64>,
    /// phi_1, phi_2.
    directions: [Row; 2],
    psi: Vec<f64>,
    /// Left multiplier of the row that fixes the phase.
    psi_phase: f64,
    /// g_1, g_2.
    values: [f64; 2],
    gradients: [Row; 2],
}

/// Border index of the unfolding column, behind period and parameter.
const UNFOLDING: usize = 2;
/// Rounds of inverse iteration that turn generic borders into null vectors.
const REFRESHES: usize = 3;

/// A Newton correction.
pub(crate) struct Correction {
    pub step: Row,
    pub unfolding: f64,
}

impl CrossingSystem {
    /// Borders at the system's last linearisation; `reference` are the nodes of the phase condition.
    ///
    /// # Errors
    /// [`Fault`] where the bordered system stays singular.
    pub(crate) fn new(system: &System, reference: &[f64]) -> Result<Self, Fault> {
        let shape = system.shape();
        let row = || Row::zero(shape.nodes_len());
        let mut phase = vec![0.0; shape.nodes_len()];
        system.phase_row(reference, &mut phase);
        let mut crossing = Self {
            bordered: Bordered::new(shape, 3),
            newton: Bordered::new(shape, 3),
            phase,
            border_rows: [row(), row()],
            border_column: vec![0.0; shape.core_len()],
            directions: [row(), row()],
            psi: vec![0.0; shape.core_len()],
            psi_phase: 0.0,
            values: [0.0; 2],
            gradients: [row(), row()],
        };
        crossing.generic_borders(system);
        for _ in 0..REFRESHES {
            crossing.solve(system)?;
            crossing.refresh(system);
        }
        Ok(crossing)
    }

    /// An orthonormal basis of the directions that solve the linearised equations.
    pub(crate) fn basis(&self, system: &System) -> [Row; 2] {
        orthonormal(&system.spec().metric, system, self.directions.clone())
    }

    /// Unit of the unfolding: the column has length 1 over all rows, while rows are increments, one over their number each.
    pub(crate) fn unit(&self) -> f64 {
        (self.border_column.len() as f64).sqrt()
    }

    /// Inner product of the unfolding column with that of another mesh, in sums over each of `intervals` parts that both
    /// meshes have: its sign tells whether they point the same way.
    pub(crate) fn likeness(&self, other: &Self, intervals: usize) -> f64 {
        let sums = |system: &Self| -> Vec<f64> {
            let n = system.bordered_states();
            let rows = system.border_column.len() / intervals;
            let of_part = |part: &[f64]| (0..n).map(|a| part.iter().skip(a).step_by(n).sum()).collect::<Vec<f64>>();
            system.border_column.chunks_exact(rows).flat_map(of_part).collect()
        };
        sums(self).iter().zip(sums(other)).map(|(a, b)| a * b).sum()
    }

    fn bordered_states(&self) -> usize {
        self.phase.len() - self.border_column.len()
    }

    fn generic_borders(&mut self, system: &System) {
        // Equidistributed (Weyl 1916, Math. Ann. 77:313), orthogonal to no null vector of a model.
        const IRRATIONAL: f64 = 0.618_033_988_749_894_8;
        let sequence = |k: usize| (k as f64 * IRRATIONAL).fract() - 0.5;
        let n = system.n();
        let metric = &system.spec().metric;
        for (j, direction) in self.directions.iter_mut().enumerate() {
            for (k, value) in direction.nodes.iter_mut().enumerate() {
                *value = sequence((2 * j + 1) * (k + 1)) * metric.scales[k % n];
            }
            direction.period = sequence(5 + j) * metric.period_scale;
            direction.parameter = sequence(9 + 2 * j) * metric.parameter_scale;
        }
        for (k, value) in self.psi.iter_mut().enumerate() {
            *value = sequence(2 * k + 3) / metric.scales[k % n];
        }
        self.refresh(system);
    }

    /// Borders from the last vectors, of unit length.
    fn refresh(&mut self, system: &System) {
        let metric = &system.spec().metric;
        let basis = self.basis(system);
        for (row, direction) in self.border_rows.iter_mut().zip(&basis) {
            metric.functional(system.tables(), system.mesh(), direction, row);
        }
        let n = system.n();
        let scale = |k: usize| metric.scales[k % n].powi(2);
        let size = self.psi.iter().enumerate().map(|(k, psi)| psi * psi * scale(k)).sum::<f64>().sqrt();
        for (k, (column, psi)) in self.border_column.iter_mut().zip(&self.psi).enumerate() {
            *column = psi * scale(k) / size;
        }
    }

    /// Directions, left vector and values at the system's last linearisation.
    pub(crate) fn solve(&mut self, system: &System) -> Result<(), Fault> {
        let borders = (&self.phase[..], &self.border_column[..], &self.border_rows);
        prepare(&mut self.bordered, borders, system)?;
        for (j, direction) in self.directions.iter_mut().enumerate() {
            let mut unit = [0.0; 3];
            unit[1 + j] = 1.0;
            let mut scalars = [0.0; 3];
            let right = Right { core: &[], closing: &[], border: &unit };
            self.bordered.solve(system.cyclic(), right, &mut direction.nodes, &mut scalars);
            (direction.period, direction.parameter, self.values[j]) = (scalars[0], scalars[1], scalars[UNFOLDING]);
        }
        let mut chi = [0.0; 3];
        self.bordered.solve_transposed(system.cyclic(), &[], &[0.0, 0.0, 1.0], &mut self.psi, &mut chi);
        self.psi_phase = chi[0];
        Ok(())
    }

    /// `-psi^T H_zz phi` of a direction as a row.
    pub(crate) fn gradient_along(&self, system: &mut System, direction: &Row, out: &mut Row) {
        gradient_along(system, (&self.psi, self.psi_phase), direction, out);
    }

    /// The Newton correction of (z, beta) at the system's last linearisation, which was at `at`.
    pub(crate) fn correction(
        &mut self,
        system: &mut System,
        (at, unfolding): (&Iterate, f64),
        reference: &[f64],
    ) -> Result<Correction, Fault> {
        self.solve(system)?;
        for (direction, gradient) in self.directions.iter().zip(&mut self.gradients) {
            gradient_along(system, (&self.psi, self.psi_phase), direction, gradient);
        }
        prepare(&mut self.newton, (&self.phase, &self.border_column, &self.gradients), system)?;
        let core: Vec<f64> =
            system.residual().iter().zip(&self.border_column).map(|(r, b)| -(r + unfolding * b)).collect();
        let (n, len) = (system.n(), at.nodes.len());
        let gap: Vec<f64> = (0..n).map(|a| at.nodes[a] - at.nodes[len - n + a]).collect();
        let phase = system.phase_gap(at, (&self.phase, reference));
        let border = [phase, -self.values[0], -self.values[1]];
        let mut step = Row::zero(len);
        let mut scalars = [0.0; 3];
        let right = Right { core: &core, closing: &gap, border: &border };
        self.newton.solve(system.cyclic(), right, &mut step.nodes, &mut scalars);
        (step.period, step.parameter) = (scalars[0], scalars[1]);
        Ok(Correction { step, unfolding: scalars[UNFOLDING] })
    }

    /// Estimated roundoff of period, parameter and unfolding after a correction: sensitivities to the rows times their
    /// rounding, added as independent errors.
    pub(crate) fn roundoff(&mut self, system: &mut System) -> [f64; 3] {
        let mut sizes = vec![0.0; self.psi.len()];
        let mut terms = [0.0; 2];
        for (direction, term) in self.directions.iter().zip(&mut terms) {
            system.variation_sizes(&direction.nodes, direction.period, &mut sizes);
            *term = weighted(&self.psi, &sizes);
        }
        system.row_sizes(&mut sizes);
        let mut left = vec![0.0; self.psi.len()];
        [0, 1, 2].map(|scalar| {
            let (mut unit, mut chi) = ([0.0; 3], [0.0; 3]);
            unit[scalar] = 1.0;
            self.newton.solve_transposed(system.cyclic(), &[], &unit, &mut left, &mut chi);
            let by_values = (chi[1] * terms[0]).hypot(chi[2] * terms[1]);
            f64::EPSILON * weighted(&left, &sizes).hypot(by_values)
        })
    }
}

fn gradient_along(system: &mut System, (psi, phase): (&[f64], f64), direction: &Row, out: &mut Row) {
    let Row { nodes, period, parameter } = direction;
    system.variation_gradient(Variation { psi, nodes, period: *period, parameter: *parameter }, out);
    // The row that fixes the phase bends where the period of a forcing does.
    out.parameter += phase * system.phase_bend() * parameter;
}

/// Factors the cycle's equations bordered by the unfolding column, the phase row and two more rows.
fn prepare(
    bordered: &mut Bordered,
    (phase, column, rows): (&[f64], &[f64], &[Row; 2]),
    system: &System,
) -> Result<(), Fault> {
    system.period_column(bordered.column_mut(0));
    system.parameter_column(bordered.column_mut(1));
    bordered.column_mut(UNFOLDING).copy_from_slice(column);
    bordered.row_mut(0).copy_from_slice(phase);
    bordered.corner_mut().fill(0.0);
    bordered.corner_mut()[..2].copy_from_slice(&system.phase_corner());
    for (j, row) in rows.iter().enumerate() {
        bordered.row_mut(1 + j).copy_from_slice(&row.nodes);
        bordered.corner_mut()[3 * (1 + j)..3 * (1 + j) + 2].copy_from_slice(&[row.period, row.parameter]);
    }
    Ok(bordered.prepare(system.cyclic(), 1.0)?)
}

fn weighted(left: &[f64], sizes: &[f64]) -> f64 {
    left.iter().zip(sizes).map(|(left, size)| (left * size).powi(2)).sum::<f64>().sqrt()
}

/// The functional applied to a direction.
pub(crate) fn apply(row: &Row, direction: &Row) -> f64 {
    let nodes: f64 = row.nodes.iter().zip(&direction.nodes).map(|(a, b)| a * b).sum();
    nodes + row.period * direction.period + row.parameter * direction.parameter
}

/// `a x + b y`.
pub(crate) fn mixed((a, x): (f64, &Row), (b, y): (f64, &Row)) -> Row {
    Row {
        nodes: x.nodes.iter().zip(&y.nodes).map(|(x, y)| a * x + b * y).collect(),
        period: a * x.period + b * y.period,
        parameter: a * x.parameter + b * y.parameter,
    }
}

fn orthonormal(metric: &Metric, system: &System, [first, second]: [Row; 2]) -> [Row; 2] {
    let inner = |a: &Row, b: &Row| metric.inner(system.tables(), system.mesh(), a, b);
    let unit = |row: &Row| mixed((1.0 / inner(row, row).sqrt(), row), (0.0, row));
    let first = unit(&first);
    // Twice is enough (Kahan, in Parlett 1980, The Symmetric Eigenvalue Problem, sec. 6-9).
    let mut second = unit(&second);
    for _ in 0..2 {
        second = unit(&mixed((1.0, &second), (-inner(&first, &second), &first)));
    }
    [first, second]
}
