//! The linear systems at an equilibrium, each analysed once.
//!
//! ```text
//! single   [A - sigma, c; r, d]            n + 1   tangents, corrections, a real eigenvalue with its vectors
//! double   [A, c, b; two rows]             n + 2   defining systems of Hopf points and branchings
//! twin     [A - i omega, b; c^H, d]        2 n + 2 in real form: a complex eigenvalue with its vectors
//! ```
//! Borders stay inside the factored matrix, which keeps them accurate where A itself is singular (Govaerts & Pryce 1993,
//! IMA J. Numer. Anal. 13:161).

use armilla_linalg::Patterned;

/// Number of states up to which the systems are dense. Their cost grows with n^3, that of the sparse ones with the fill;
/// they meet somewhere around here for the rings and lines of cells that large models are.
pub(crate) const DENSE_UP_TO: usize = 200;

/// Complex vector as two real ones.
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) struct Complex {
    pub re: Vec<f64>,
    pub im: Vec<f64>,
}

/// Borders of a bordered matrix with one row and column: `c` beside, `r` below, `d` in the corner.
pub(crate) struct Border<'a> {
    pub column: &'a [f64],
    pub row: &'a [f64],
    pub corner: f64,
}

pub(crate) struct Systems {
    n: usize,
    entries: Vec<(usize, usize)>,
    single: Patterned,
    double: Option<Patterned>,
    twin: Option<Patterned>,
}

impl Systems {
    pub(crate) fn new(n: usize, entries: &[(usize, usize)]) -> Self {
        let mut places = entries.to_vec();
        places.extend((0..n).map(|i| (i, i)));
        places.extend((0..n).map(|i| (i, n)));
        places.extend((0..=n).map(|i| (n, i)));
        let single = Patterned::new(n + 1, &places, n > DENSE_UP_TO);
        Self { n, entries: entries.to_vec(), single, double: None, twin: None }
    }

    /// Factors `[A - shift, column; row, corner]`.
    pub(crate) fn single(&mut self, jacobian: &[f64], shift: f64, border: &Border<'_>) -> Option<&mut Patterned> {
        let (n, nnz) = (self.n, jacobian.len());
        let values = self.single.values_mut();
        values[..nnz].copy_from_slice(jacobian);
        values[nnz..nnz + n].fill(-shift);
        values[nnz + n..nnz + 2 * n].copy_from_slice(border.column);
        values[nnz + 2 * n..nnz + 3 * n].copy_from_slice(border.row);
        values[nnz + 3 * n] = border.corner;
        self.single.factor().then_some(&mut self.single)
    }

    /// Factors `[A, c0, c1; row0; row1]`, the rows over n + 2 unknowns.
    pub(crate) fn double(
        &mut self,
        jacobian: &[f64],
        columns: [&[f64]; 2],
        rows: [&[f64]; 2],
    ) -> Option<&mut Patterned> {
        let (n, nnz) = (self.n, jacobian.len());
        let entries = &self.entries;
        let double = self.double.get_or_insert_with(|| {
            let mut places = entries.clone();
            places.extend((0..2).flat_map(|k| (0..n).map(move |i| (i, n + k))));
            places.extend((0..2).flat_map(|k| (0..n + 2).map(move |j| (n + k, j))));
            Patterned::new(n + 2, &places, n > DENSE_UP_TO)
        });
        let values = double.values_mut();
        values[..nnz].copy_from_slice(jacobian);
        let mut at = nnz;
        for part in [columns[0], columns[1], rows[0], rows[1]] {
            values[at..at + part.len()].copy_from_slice(part);
            at += part.len();
        }
        double.factor().then_some(double)
    }

    /// Factors `[A - (sigma + i omega), b; c^H, corner]` in real form: real parts of the unknowns first, then the
    /// imaginary ones, then those of the scalar.
    pub(crate) fn twin(
        &mut self,
        jacobian: &[f64],
        (sigma, omega): (f64, f64),
        (column, row): (&Complex, &Complex),
        corner: f64,
    ) -> Option<&mut Patterned> {
        let n = self.n;
        let entries = &self.entries;
        let twin = self.twin.get_or_insert_with(|| {
            let mut places = entries.clone();
            places.extend(entries.iter().map(|(r, c)| (n + r, n + c)));
            places.extend((0..2 * n).map(|i| (i, i)));
            places.extend((0..n).flat_map(|i| [(i, n + i), (n + i, i)]));
            places.extend((0..2).flat_map(|k| (0..2 * n).map(move |i| (i, 2 * n + k))));
            places.extend((0..2).flat_map(|k| (0..2 * n).map(move |j| (2 * n + k, j))));
            places.extend([(2 * n, 2 * n), (2 * n + 1, 2 * n + 1)]);
            Patterned::new(2 * n + 2, &places, n > DENSE_UP_TO)
        });
        let mut values = jacobian.to_vec();
        values.extend_from_slice(jacobian);
        values.extend(std::iter::repeat_n(-sigma, 2 * n));
        // (A - i omega)(x + i y) = A x + omega y + i (A y - omega x).
        values.extend((0..n).flat_map(|_| [omega, -omega]));
        values.extend(column.re.iter().chain(&column.im));
        values.extend(column.im.iter().map(|value| -value).chain(column.re.iter().copied()));
        values.extend(row.re.iter().chain(&row.im));
        values.extend(row.im.iter().map(|value| -value).chain(row.re.iter().copied()));
        values.extend([corner, corner]);
        twin.values_mut().copy_from_slice(&values);
        twin.factor().then_some(twin)
    }
}

impl Complex {
    pub(crate) fn zero(n: usize) -> Self {
        Self { re: vec![0.0; n], im: vec![0.0; n] }
    }

    /// From the first 2 n numbers of a vector in real form.
    pub(crate) fn of_twin(n: usize, numbers: &[f64]) -> Self {
        Self { re: numbers[..n].to_vec(), im: numbers[n..2 * n].to_vec() }
    }

    /// `self^H other`.
    pub(crate) fn product(&self, other: &Self) -> (f64, f64) {
        let sum = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
        (sum(&self.re, &other.re) + sum(&self.im, &other.im), sum(&self.re, &other.im) - sum(&self.im, &other.re))
    }

    /// Times a complex number.
    pub(crate) fn times(&self, (re, im): (f64, f64)) -> Self {
        let parts = || self.re.iter().zip(&self.im);
        Self {
            re: parts().map(|(a, b)| a * re - b * im).collect(),
            im: parts().map(|(a, b)| a * im + b * re).collect(),
        }
    }

    pub(crate) fn conjugate(&self) -> Self {
        Self { re: self.re.clone(), im: self.im.iter().map(|value| -value).collect() }
    }

    pub(crate) fn moduli(&self) -> Vec<f64> {
        self.re.iter().zip(&self.im).map(|(a, b)| a.hypot(*b)).collect()
    }
}
