//! A fold or a period doubling as the zero of one bordered scalar.
//!
//! With M the linearised cycle problem (closed by +1 for a fold, with the column of the period and the phase row;
//! closed by -1 for a doubling, without them), w a column and v1 a row that make the bordered matrix regular,
//! ```text
//! [ M   w ] [v]   [0]          dG/dz = - psi^T (dM/dz) v,   M^T psi + v1 G = 0, w^T psi = 1
//! [ v1  0 ] [G] = [1]
//! ```
//! G vanishes exactly where M is singular, and its derivative costs one reverse sweep (Govaerts 2000, Numerical
//! Methods for Bifurcations of Dynamical Equilibria, SIAM, ch. 4; Doedel, Govaerts & Kuznetsov 2003, SIAM J. Numer.
//! Anal. 41:401). Under a forcing the phase row holds the period alone, and v has no part in it. As a [`Closing`] it completes the minimally augmented system.

use armilla_collocation::{Closing, Fault, Iterate, Row, System, Variation};
use armilla_linalg::{Bordered, Right};

/// Which multiplier is critical.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum CriticalKind {
    /// +1, with the parameter turning back.
    Fold,
    /// -1.
    Doubling,
}

impl CriticalKind {
    fn closing_factor(self) -> f64 {
        match self {
            Self::Fold => 1.0,
            Self::Doubling => -1.0,
        }
    }

    /// Scalars besides G that the variation carries: the period at a fold.
    fn scalars(self) -> usize {
        match self {
            Self::Fold => 1,
            Self::Doubling => 0,
        }
    }
}

/// Right and left null vectors, as the bordered solves give them.
#[derive(Clone, Debug, PartialEq)]
pub struct NullVectors {
    /// Variation of the nodes.
    pub nodes: Vec<f64>,
    /// Variation of the period (0 at a doubling).
    pub period: f64,
    /// Left vector over all interval rows.
    pub psi: Vec<f64>,
    /// Value of the test function.
    pub value: f64,
}

/// The test function with its borders.
pub struct TestFunction {
    kind: CriticalKind,
    bordered: Bordered,
    phase: Vec<f64>,
    border_row: Row,
    border_column: Vec<f64>,
    vectors: NullVectors,
}

/// Rounds of inverse iteration that turn generic borders into null vectors; the second is for insurance.
const REFRESHES: usize = 3;

impl TestFunction {
    /// Prepares borders at the system's last linearisation, which was at `at`.
    ///
    /// # Errors
    /// [`Fault`] where the bordered system is singular even with refreshed borders.
    pub fn new(kind: CriticalKind, system: &System, at: &Iterate) -> Result<Self, Fault> {
        let shape = system.shape();
        let mut phase = vec![0.0; shape.nodes_len()];
        system.phase_row(&at.nodes, &mut phase);
        let mut function = Self {
            kind,
            bordered: Bordered::new(shape, 1 + kind.scalars()),
            phase,
            border_row: Row::zero(shape.nodes_len()),
            border_column: vec![0.0; shape.core_len()],
            vectors: NullVectors {
                nodes: vec![0.0; shape.nodes_len()],
                period: 0.0,
                psi: vec![0.0; shape.core_len()],
                value: 0.0,
            },
        };
        function.generic_borders(system);
        for _ in 0..REFRESHES {
            function.solve(system)?;
            function.refresh(system);
        }
        Ok(function)
    }

    /// Null vectors of the last evaluation.
    pub fn vectors(&self) -> &NullVectors {
        &self.vectors
    }

    /// Size of the terms the value is summed from, in which it is as uncertain as their last places: `psi^T` times the
    /// rows of the variation, added as independent errors. The bordered solves themselves are backward stable: what they
    /// round is a change of the rows of this size.
    pub fn size(&self, system: &mut System) -> f64 {
        let mut sizes = vec![0.0; self.vectors.psi.len()];
        system.variation_sizes(&self.vectors.nodes, self.vectors.period, &mut sizes);
        sizes.iter().zip(&self.vectors.psi).map(|(size, psi)| (size * psi).powi(2)).sum::<f64>().sqrt()
    }

    /// Starting borders without special direction: an equidistributed sequence (Weyl 1916, Math. Ann. 77:313), which
    /// no null vector of a model is orthogonal to.
    fn generic_borders(&mut self, system: &System) {
        const IRRATIONAL: f64 = 0.618_033_988_749_894_8;
        let sequence = |k: usize| (k as f64 * IRRATIONAL).fract() - 0.5;
        let n = system.n();
        for (k, value) in self.vectors.nodes.iter_mut().enumerate() {
            *value = sequence(k + 1) * system.spec().metric.scales[k % n];
        }
        for (k, value) in self.vectors.psi.iter_mut().enumerate() {
            *value = sequence(2 * k + 3) / system.spec().metric.scales[k % n];
        }
        self.vectors.period = 0.5 * system.spec().metric.period_scale;
        self.refresh(system);
    }

    /// Borders from the last vectors, of unit length.
    fn refresh(&mut self, system: &System) {
        let metric = &system.spec().metric;
        let row = Row { nodes: self.vectors.nodes.clone(), period: self.vectors.period, parameter: 0.0 };
        let length = metric.inner(system.tables(), system.mesh(), &row, &row).sqrt();
        metric.functional(system.tables(), system.mesh(), &row, &mut self.border_row);
        self.border_row.nodes.iter_mut().for_each(|value| *value /= length);
        self.border_row.period /= length;
        // The column lives where the equations live: rows are increments of states.
        let n = system.n();
        let scale = |k: usize| metric.scales[k % n].powi(2);
        let size: f64 = self.vectors.psi.iter().enumerate().map(|(k, psi)| psi * psi * scale(k)).sum();
        for (k, (column, psi)) in self.border_column.iter_mut().zip(&self.vectors.psi).enumerate() {
            *column = psi * scale(k) / size.sqrt();
        }
    }

    /// Both bordered solves at the system's last linearisation.
    fn solve(&mut self, system: &System) -> Result<(), Fault> {
        let scalars = self.kind.scalars();
        let k = scalars + 1;
        if self.kind == CriticalKind::Fold {
            system.period_column(self.bordered.column_mut(0));
            self.bordered.row_mut(0).copy_from_slice(&self.phase);
        }
        self.bordered.column_mut(scalars).copy_from_slice(&self.border_column);
        self.bordered.row_mut(scalars).copy_from_slice(&self.border_row.nodes);
        let corner = self.bordered.corner_mut();
        corner.fill(0.0);
        if self.kind == CriticalKind::Fold {
            corner[0] = system.phase_corner()[0];
            corner[k] = self.border_row.period;
        }
        self.bordered.prepare(system.cyclic(), self.kind.closing_factor())?;
        let mut unit = [0.0; 2];
        unit[scalars] = 1.0;
        let mut solved = [0.0; 2];
        let right = Right { core: &[], closing: &[], border: &unit[..k] };
        self.bordered.solve(system.cyclic(), right, &mut self.vectors.nodes, &mut solved[..k]);
        self.vectors.value = solved[scalars];
        self.vectors.period = if scalars == 1 { solved[0] } else { 0.0 };
        let mut chi = [0.0; 2];
        self.bordered.solve_transposed(system.cyclic(), &[], &unit[..k], &mut self.vectors.psi, &mut chi[..k]);
        Ok(())
    }
}

impl Closing for TestFunction {
    fn fill(&mut self, system: &mut System, _at: &Iterate, row: &mut Row) -> Result<f64, Fault> {
        self.solve(system)?;
        let NullVectors { nodes, period, psi, .. } = &self.vectors;
        let variation = Variation { psi, nodes, period: *period, parameter: 0.0 };
        system.variation_gradient(variation, row);
        Ok(self.vectors.value)
    }
}
