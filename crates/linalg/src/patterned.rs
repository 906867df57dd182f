//! A square system of fixed sparsity: dense where it is small, sparse where it is large.
//!
//! Life cycle: the pattern is analysed once ([`Patterned::new`]); then values are filled in, in the order of the
//! entries given, factored, and solved with as often as asked. Entries at one place are summed. The dense way is [`Lu`];
//! the sparse way is faer's LU with partial pivoting on columns ordered for little fill (Davis, Gilbert, Larimore & Ng
//! 2004, ACM TOMS 30:353), its symbolic part reused. Rows are equilibrated in both: rates may have any units.

use faer::linalg::solvers::SolveCore;
use faer::sparse::linalg::solvers::{Lu as SparseLu, SymbolicLu};
use faer::sparse::{SparseColMatRef, SymbolicSparseColMat};
use faer::{Conj, Mat};

use crate::dense::Lu;

/// A square system with its factors.
pub struct Patterned {
    size: usize,
    /// Place of each entry in the storage of the factorisation.
    places: Vec<usize>,
    values: Vec<f64>,
    store: Store,
}

enum Store {
    Dense(Box<Lu>),
    Sparse(Box<Sparse>),
}

struct Sparse {
    pattern: SymbolicSparseColMat<usize>,
    symbolic: Option<SymbolicLu<usize>>,
    numeric: Option<SparseLu<usize, f64>>,
    stored: Vec<f64>,
    row_scale: Vec<f64>,
    work: Mat<f64>,
}

impl Patterned {
    /// A system of `size` rows with entries at these (row, column), sparse or dense.
    ///
    /// # Panics
    /// If an entry lies outside.
    pub fn new(size: usize, entries: &[(usize, usize)], sparse: bool) -> Self {
        assert!(entries.iter().all(|(r, c)| *r < size && *c < size), "entries of a system of {size} rows");
        let values = vec![0.0; entries.len()];
        if !sparse {
            let places = entries.iter().map(|(r, c)| r * size + c).collect();
            return Self { size, places, values, store: Store::Dense(Box::new(Lu::new(size))) };
        }
        let mut order: Vec<(usize, usize)> = entries.iter().map(|(r, c)| (*c, *r)).collect();
        order.sort_unstable();
        order.dedup();
        let mut offsets = vec![0; size + 1];
        order.iter().for_each(|(c, _)| offsets[c + 1] += 1);
        (0..size).for_each(|c| offsets[c + 1] += offsets[c]);
        let rows: Vec<usize> = order.iter().map(|(_, r)| *r).collect();
        let places = entries.iter().map(|(r, c)| order.partition_point(|at| *at < (*c, *r))).collect();
        let stored = vec![0.0; rows.len()];
        let pattern = SymbolicSparseColMat::new_checked(size, size, offsets, None, rows);
        let symbolic = SymbolicLu::try_new(pattern.as_ref()).ok();
        let row_scale = vec![1.0; size];
        let sparse = Sparse { pattern, symbolic, numeric: None, stored, row_scale, work: Mat::zeros(size, 1) };
        Self { size, places, values, store: Store::Sparse(Box::new(sparse)) }
    }

    /// Number of rows.
    pub fn size(&self) -> usize {
        self.size
    }

    /// Values of the entries, in the order given to [`Patterned::new`].
    pub fn values_mut(&mut self) -> &mut [f64] {
        &mut self.values
    }

    /// Factors the present values. False where the matrix is singular to working precision or not finite.
    pub fn factor(&mut self) -> bool {
        match &mut self.store {
            Store::Dense(lu) => {
                let matrix = lu.matrix_mut();
                matrix.fill(0.0);
                self.places.iter().zip(&self.values).for_each(|(place, value)| matrix[*place] += value);
                lu.factor()
            }
            Store::Sparse(sparse) => {
                sparse.stored.fill(0.0);
                self.places.iter().zip(&self.values).for_each(|(place, value)| sparse.stored[*place] += value);
                sparse.factor()
            }
        }
    }

    /// Solves `A x = b` in place; not finite where the last factorisation failed.
    pub fn solve(&mut self, b: &mut [f64]) {
        match &mut self.store {
            Store::Dense(lu) => lu.solve(b),
            Store::Sparse(sparse) => {
                b.iter_mut().zip(&sparse.row_scale).for_each(|(b, scale)| *b *= scale);
                sparse.apply(b, false);
            }
        }
    }

    /// Solves `A^T x = b` in place; not finite where the last factorisation failed.
    pub fn solve_transposed(&mut self, b: &mut [f64]) {
        match &mut self.store {
            Store::Dense(lu) => lu.solve_transposed(b),
            Store::Sparse(sparse) => {
                sparse.apply(b, true);
                b.iter_mut().zip(&sparse.row_scale).for_each(|(b, scale)| *b *= scale);
            }
        }
    }
}

impl Sparse {
    fn factor(&mut self) -> bool {
        self.numeric = None;
        self.row_scale.fill(0.0);
        let rows = self.pattern.row_idx();
        for (row, value) in rows.iter().zip(&self.stored) {
            self.row_scale[*row] = self.row_scale[*row].max(value.abs());
        }
        let finite = self.stored.iter().all(|value| value.is_finite());
        if !(finite && self.row_scale.iter().all(|largest| *largest > 0.0)) {
            return false;
        }
        self.row_scale.iter_mut().for_each(|scale| *scale = 1.0 / *scale);
        rows.iter().zip(&mut self.stored).for_each(|(row, value)| *value *= self.row_scale[*row]);
        let Some(symbolic) = &self.symbolic else { return false };
        let matrix = SparseColMatRef::new(self.pattern.as_ref(), &self.stored);
        self.numeric = SparseLu::try_new_with_symbolic(symbolic.clone(), matrix).ok();
        self.numeric.is_some()
    }

    fn apply(&mut self, b: &mut [f64], transposed: bool) {
        let Some(numeric) = &self.numeric else {
            b.fill(f64::NAN);
            return;
        };
        b.iter().enumerate().for_each(|(r, value)| self.work[(r, 0)] = *value);
        if transposed {
            numeric.solve_transpose_in_place_with_conj(Conj::No, self.work.as_mut());
        } else {
            numeric.solve_in_place_with_conj(Conj::No, self.work.as_mut());
        }
        b.iter_mut().enumerate().for_each(|(r, value)| *value = self.work[(r, 0)]);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A ring with a dense last row and column, rows in units far apart; every second entry is given in two halves.
    fn ring(size: usize) -> (Vec<(usize, usize)>, Vec<f64>) {
        let mut entries = Vec::new();
        let mut values = Vec::new();
        for r in 0..size {
            let unit = 10f64.powi((r % 7) as i32 - 3);
            let mut put = |c: usize, value: f64| {
                entries.push((r, c));
                values.push(value * unit);
            };
            put((r + 1) % size, 2.0);
            put(r, 0.25);
            put(r, 0.25);
            put(size - 1, 0.1 + (r as f64).sin());
            if r == size - 1 {
                (0..size - 1).for_each(|c| put(c, (c as f64).cos()));
            }
        }
        (entries, values)
    }

    /// Exact: planted solutions, and both ways agree.
    #[test]
    fn planted_solutions_return_dense_and_sparse() {
        for size in [7, 60, 300] {
            let (entries, values) = ring(size);
            let planted: Vec<f64> = (0..size).map(|k| 1.0 + (k as f64 * 0.7).cos()).collect();
            for sparse in [false, true] {
                let mut system = Patterned::new(size, &entries, sparse);
                system.values_mut().copy_from_slice(&values);
                assert!(system.factor());
                let (mut b, mut c) = (vec![0.0; size], vec![0.0; size]);
                for ((r, q), value) in entries.iter().zip(&values) {
                    b[*r] += value * planted[*q];
                    c[*q] += value * planted[*r];
                }
                system.solve(&mut b);
                system.solve_transposed(&mut c);
                for ((b, c), x) in b.iter().zip(&c).zip(&planted) {
                    assert!((b - x).abs() < 1e-9 && (c - x).abs() < 1e-9, "{size} {sparse}: {b} {c} {x}");
                }
            }
        }
    }

    #[test]
    fn singular_systems_are_refused_or_not_finite() {
        for sparse in [false, true] {
            let mut system = Patterned::new(2, &[(0, 0), (1, 0), (0, 1), (1, 1)], sparse);
            system.values_mut().copy_from_slice(&[1.0, 2.0, 2.0, 4.0]);
            let mut b = [1.0, 0.0];
            let regular = system.factor();
            if regular {
                system.solve(&mut b);
            }
            assert!(!regular || b.iter().any(|value| !value.is_finite()), "{sparse} {b:?}");
            system.values_mut()[0] = f64::NAN;
            assert!(!system.factor());
        }
    }
}
