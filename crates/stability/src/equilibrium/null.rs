//! Eigenvectors by bordered solves, real and complex.
//!
//! With borders b and c, `[A - lambda, b; c^H, 0] (v, g) = (0, 1)` and its adjoint give a vector v, a vector psi and one
//! scalar g that vanishes exactly where lambda is an eigenvalue; v and psi are its eigenvectors then (Govaerts 2000,
//! Numerical Methods for Bifurcations of Dynamical Equilibria, SIAM, ch. 3). Taking the vectors as the next borders keeps
//! the matrix well conditioned and is an inverse iteration. `dg = -psi^H d(A - lambda) v`.

use super::systems::{Border, Complex, Systems};

/// Real null vectors with their scalar.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct RealNull {
    pub v: Vec<f64>,
    pub psi: Vec<f64>,
    pub g: f64,
    column: Vec<f64>,
    row: Vec<f64>,
}

/// Complex null vectors with their scalar.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct ComplexNull {
    pub q: Complex,
    pub psi: Complex,
    pub g: (f64, f64),
    column: Complex,
    row: Complex,
}

/// Sizes that borders are measured by: of the states, and of the rates.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct BorderSizes {
    states: Vec<f64>,
    rates: Vec<f64>,
}

/// Solves with borders of no special direction before the vectors are used: one leaves what the borders miss of the
/// eigenvector by the distance to the next eigenvalue.
pub(crate) const ROUNDS: usize = 3;

/// An equidistributed sequence (Weyl 1916, Math. Ann. 77:313), which no null vector of a model is orthogonal to.
fn sequence(k: usize) -> f64 {
    const IRRATIONAL: f64 = 0.618_033_988_749_894_8;
    (k as f64 * IRRATIONAL).fract() - 0.5
}

impl BorderSizes {
    /// Rates are measured by the sizes of their own states times the norm of the Jacobian in these sizes: a row of its own
    /// vanishes just where an eigenvalue does.
    pub(crate) fn new(scales: &[f64], norm: f64) -> Self {
        let norm = if norm > 0.0 { norm } else { 1.0 };
        Self { states: scales.to_vec(), rates: scales.iter().map(|scale| scale * norm).collect() }
    }

    /// A right vector as the next border row, of such length that its product with the vector is 1.
    fn row(&self, v: &[f64], square: f64) -> Vec<f64> {
        v.iter().zip(&self.states).map(|(v, s)| v / (s * s * square)).collect()
    }

    fn square_of_states(&self, v: &[f64]) -> f64 {
        v.iter().zip(&self.states).map(|(v, s)| (v / s).powi(2)).sum()
    }

    fn column(&self, psi: &[f64], square: f64) -> Vec<f64> {
        psi.iter().zip(&self.rates).map(|(p, r)| p * r * r / square).collect()
    }

    fn square_of_rates(&self, psi: &[f64]) -> f64 {
        psi.iter().zip(&self.rates).map(|(p, r)| (p * r).powi(2)).sum()
    }

    fn generic_row(&self, shift: usize) -> Vec<f64> {
        self.states.iter().enumerate().map(|(k, s)| sequence(2 * k + shift) / s).collect()
    }

    fn generic_column(&self, shift: usize) -> Vec<f64> {
        self.rates.iter().enumerate().map(|(k, r)| sequence(2 * k + shift) * r).collect()
    }
}

impl RealNull {
    /// Vectors of the eigenvalue nearest to `lambda`.
    pub(crate) fn find(systems: &mut Systems, jacobian: &[f64], lambda: f64, sizes: &BorderSizes) -> Option<Self> {
        let mut null =
            Self { v: Vec::new(), psi: Vec::new(), g: 0.0, column: sizes.generic_column(3), row: sizes.generic_row(2) };
        for round in 0..ROUNDS {
            if round > 0 {
                null.refresh(sizes);
            }
            null.solve(systems, jacobian, lambda)?;
        }
        Some(null)
    }

    /// Takes the vectors as borders.
    pub(crate) fn refresh(&mut self, sizes: &BorderSizes) {
        self.row = sizes.row(&self.v, sizes.square_of_states(&self.v));
        self.column = sizes.column(&self.psi, sizes.square_of_rates(&self.psi));
    }

    /// Solves anew with the same borders.
    pub(crate) fn solve(&mut self, systems: &mut Systems, jacobian: &[f64], lambda: f64) -> Option<()> {
        let n = self.row.len();
        let border = Border { column: &self.column, row: &self.row, corner: 0.0 };
        let system = systems.single(jacobian, lambda, &border)?;
        let mut right = vec![0.0; n + 1];
        right[n] = 1.0;
        let mut left = right.clone();
        system.solve(&mut right);
        system.solve_transposed(&mut left);
        self.g = right[n];
        right.truncate(n);
        left.truncate(n);
        (self.v, self.psi) = (right, left);
        self.v.iter().chain(&self.psi).all(|value| value.is_finite()).then_some(())
    }

    /// The border column, which unfolds a branching.
    pub(crate) fn column(&self) -> &[f64] {
        &self.column
    }

    /// The border row.
    pub(crate) fn row(&self) -> &[f64] {
        &self.row
    }
}

impl ComplexNull {
    /// Vectors of the eigenvalue nearest to `sigma + i omega`.
    pub(crate) fn find(
        systems: &mut Systems,
        jacobian: &[f64],
        lambda: (f64, f64),
        sizes: &BorderSizes,
    ) -> Option<Self> {
        let mut null = Self {
            q: Complex::default(),
            psi: Complex::default(),
            g: (0.0, 0.0),
            column: Complex { re: sizes.generic_column(3), im: sizes.generic_column(8) },
            row: Complex { re: sizes.generic_row(2), im: sizes.generic_row(7) },
        };
        for round in 0..ROUNDS {
            if round > 0 {
                null.refresh(sizes);
            }
            null.solve(systems, jacobian, lambda)?;
        }
        Some(null)
    }

    /// Takes the vectors as borders.
    pub(crate) fn refresh(&mut self, sizes: &BorderSizes) {
        let square = sizes.square_of_states(&self.q.re) + sizes.square_of_states(&self.q.im);
        self.row = Complex { re: sizes.row(&self.q.re, square), im: sizes.row(&self.q.im, square) };
        let square = sizes.square_of_rates(&self.psi.re) + sizes.square_of_rates(&self.psi.im);
        self.column = Complex { re: sizes.column(&self.psi.re, square), im: sizes.column(&self.psi.im, square) };
    }

    /// Solves anew with the same borders.
    pub(crate) fn solve(&mut self, systems: &mut Systems, jacobian: &[f64], lambda: (f64, f64)) -> Option<()> {
        let n = self.row.re.len();
        let system = systems.twin(jacobian, lambda, (&self.column, &self.row), 0.0)?;
        let mut right = vec![0.0; 2 * n + 2];
        right[2 * n] = 1.0;
        let mut left = right.clone();
        system.solve(&mut right);
        system.solve_transposed(&mut left);
        self.g = (right[2 * n], right[2 * n + 1]);
        self.q = Complex::of_twin(n, &right);
        self.psi = Complex::of_twin(n, &left);
        right.iter().chain(&left).all(|value| value.is_finite()).then_some(())
    }
}
