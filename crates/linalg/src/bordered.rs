//! The cyclic system closed and bordered.
//!
//! ```text
//! [ M   C ] [x]   [r]      M: the core of [`Cyclic`], C: k columns
//! [ K   Z ] [s] = [q]      K: u_N - sigma u_0, Z: k closing columns (n rows)
//! [ B   D ]       [d]      B: k border rows over all unknowns, D: k x k
//! ```
//! The core is reduced to `A u_0 + E u_N + C' s = r'`; the borders stay in the final dense block of
//! 2n + k rows, which keeps them accurate where the core is nearly singular (Govaerts & Pryce 1993, IMA J.
//! Numer. Anal. 13:161, on why block elimination needs care there). Vectors come and go in the caller's units; the sizes of
//! [`Cyclic`] are applied here.

use crate::cyclic::{Cyclic, Shape, Singular};
use crate::dense::Lu;

/// A right side of the bordered system.
#[derive(Clone, Copy, Debug)]
pub struct Right<'a> {
    /// Rows of all intervals, N R numbers; empty for zero.
    pub core: &'a [f64],
    /// Closing rows, n numbers; empty for zero.
    pub closing: &'a [f64],
    /// Border rows, k numbers.
    pub border: &'a [f64],
}

/// Sign of the determinant of the final block over that of E: independent of mesh and pivoting.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DeterminantSign(
    /// +1 or -1; 0 where E is singular to working precision.
    pub f64,
);

/// Borders of a cyclic system and the factored final block.
#[derive(Clone, Debug)]
pub struct Bordered {
    shape: Shape,
    k: usize,
    /// The k columns, and one more for a right side.
    columns: Vec<f64>,
    closing_columns: Vec<f64>,
    rows: Vec<f64>,
    corner: Vec<f64>,
    last: Lu,
    work_row: Vec<f64>,
    work_last: Vec<f64>,
    e_block: Lu,
}

impl Bordered {
    /// Allocates for `k` borders, all zero.
    pub fn new(shape: Shape, k: usize) -> Self {
        let size = 2 * shape.n + k;
        Self {
            shape,
            k,
            columns: vec![0.0; (k + 1) * shape.core_len()],
            closing_columns: vec![0.0; k * shape.n],
            rows: vec![0.0; k * shape.nodes_len()],
            corner: vec![0.0; k * k],
            last: Lu::new(size),
            work_row: vec![0.0; shape.nodes_len()],
            work_last: vec![0.0; size],
            e_block: Lu::new(shape.n),
        }
    }

    /// Number of borders.
    pub fn k(&self) -> usize {
        self.k
    }

    /// Column `j` over all interval rows (N R numbers). Overwritten by [`Bordered::prepare`].
    pub fn column_mut(&mut self, j: usize) -> &mut [f64] {
        let len = self.shape.core_len();
        &mut self.columns[j * len..(j + 1) * len]
    }

    /// Column `j` over the closing rows (n numbers). Overwritten by [`Bordered::prepare`].
    pub fn closing_column_mut(&mut self, j: usize) -> &mut [f64] {
        let n = self.shape.n;
        &mut self.closing_columns[j * n..(j + 1) * n]
    }

    /// Border row `j` over all unknowns (N R + n numbers). Overwritten by [`Bordered::prepare`].
    pub fn row_mut(&mut self, j: usize) -> &mut [f64] {
        let len = self.shape.nodes_len();
        &mut self.rows[j * len..(j + 1) * len]
    }

    /// The k x k corner D, row-major.
    pub fn corner_mut(&mut self) -> &mut [f64] {
        &mut self.corner
    }

    /// Reduces the borders through the factors of `cyclic` and factors the final block with closing factor `sigma`.
    /// Columns and rows must be filled anew before the next call.
    ///
    /// # Errors
    /// [`Singular`] (interval = N) where the bordered system is singular or not finite.
    pub fn prepare(&mut self, cyclic: &Cyclic, sigma: f64) -> Result<(), Singular> {
        self.reduce(cyclic, self.k);
        self.close(cyclic, sigma)
    }

    /// [`Bordered::prepare`] and [`Bordered::solve`] with one pass over the factors fewer.
    ///
    /// # Errors
    /// [`Singular`] (interval = N) where the bordered system is singular or not finite.
    pub fn prepare_and_solve(
        &mut self,
        cyclic: &Cyclic,
        sigma: f64,
        right: Right<'_>,
        (nodes, scalars): (&mut [f64], &mut [f64]),
    ) -> Result<(), Singular> {
        self.take_right(right);
        self.reduce(cyclic, self.k + 1);
        self.close(cyclic, sigma)?;
        self.finish(cyclic, right, nodes, scalars);
        Ok(())
    }

    /// Reduces the first `count` columns and all rows.
    fn reduce(&mut self, cyclic: &Cyclic, count: usize) {
        let columns = &mut self.columns[..count * self.shape.core_len()];
        divide(columns, cyclic.sizes());
        multiply(&mut self.rows, cyclic.sizes());
        cyclic.reduce(columns, &mut self.rows);
    }

    fn close(&mut self, cyclic: &Cyclic, sigma: f64) -> Result<(), Singular> {
        divide(&mut self.closing_columns, cyclic.sizes());
        self.fill_last(cyclic, sigma);
        if self.last.factor() { Ok(()) } else { Err(Singular { interval: self.shape.intervals }) }
    }

    /// The right side's rows of the intervals to their place behind the columns.
    fn take_right(&mut self, right: Right<'_>) {
        let column = &mut self.columns[self.k * self.shape.core_len()..];
        if right.core.is_empty() {
            column.fill(0.0);
        } else {
            column.copy_from_slice(right.core);
        }
    }

    fn fill_last(&mut self, cyclic: &Cyclic, sigma: f64) {
        let (n, k, size) = (self.shape.n, self.k, 2 * self.shape.n + self.k);
        let (core_len, nodes_len) = (self.shape.core_len(), self.shape.nodes_len());
        let (a, e) = cyclic.link();
        let last = self.last.matrix_mut();
        last.fill(0.0);
        for r in 0..n {
            let row = &mut last[r * size..(r + 1) * size];
            row[..n].copy_from_slice(&a[r * n..(r + 1) * n]);
            row[n..2 * n].copy_from_slice(&e[r * n..(r + 1) * n]);
            for j in 0..k {
                row[2 * n + j] = cyclic.reduced_right(&self.columns[j * core_len..(j + 1) * core_len])[r];
            }
            let closing = &mut last[(n + r) * size..(n + r + 1) * size];
            closing[r] = -sigma;
            closing[n + r] = 1.0;
            for j in 0..k {
                closing[2 * n + j] = self.closing_columns[j * n + r];
            }
        }
        for b in 0..k {
            let border = &self.rows[b * nodes_len..(b + 1) * nodes_len];
            let row = &mut last[(2 * n + b) * size..(2 * n + b + 1) * size];
            row[..n].copy_from_slice(&border[..n]);
            row[n..2 * n].copy_from_slice(&border[nodes_len - n..]);
            for j in 0..k {
                let column = &self.columns[j * core_len..(j + 1) * core_len];
                row[2 * n + j] = self.corner[b * k + j] - cyclic.pivot_product(border, column);
            }
        }
    }

    /// Solves for the unknowns (N R + n numbers) and the k scalars.
    pub fn solve(&mut self, cyclic: &Cyclic, right: Right<'_>, nodes: &mut [f64], scalars: &mut [f64]) {
        self.take_right(right);
        if !right.core.is_empty() {
            let column = &mut self.columns[self.k * self.shape.core_len()..];
            divide(column, cyclic.sizes());
            cyclic.reduce(column, &mut []);
        }
        self.finish(cyclic, right, nodes, scalars);
    }

    /// The solution from the reduced right side.
    fn finish(&mut self, cyclic: &Cyclic, right: Right<'_>, nodes: &mut [f64], scalars: &mut [f64]) {
        let (n, k) = (self.shape.n, self.k);
        let (core_len, nodes_len) = (self.shape.core_len(), self.shape.nodes_len());
        let (columns, column) = self.columns.split_at_mut(k * core_len);
        let last = &mut self.work_last;
        last[..n].copy_from_slice(cyclic.reduced_right(column));
        if right.closing.is_empty() {
            last[n..2 * n].fill(0.0);
        } else {
            last[n..2 * n].copy_from_slice(right.closing);
            divide(&mut last[n..2 * n], cyclic.sizes());
        }
        for b in 0..k {
            let border = &self.rows[b * nodes_len..(b + 1) * nodes_len];
            last[2 * n + b] = right.border[b] - cyclic.pivot_product(border, column);
        }
        self.last.solve(last);
        scalars.copy_from_slice(&last[2 * n..]);
        for (&scalar, border) in scalars.iter().zip(columns.chunks_exact(core_len)) {
            crate::dense::axpy(column, -scalar, border);
        }
        nodes[..n].copy_from_slice(&last[..n]);
        nodes[nodes_len - n..].copy_from_slice(&last[n..2 * n]);
        cyclic.back_substitute(column, nodes);
        multiply(nodes, cyclic.sizes());
    }

    /// Solves the transposed system `(psi, chi_closing, chi)^T [..] = (nodes, scalars)^T`: `psi` gets N R numbers,
    /// one per interval row; the k border multipliers go to `chi`.
    pub fn solve_transposed(
        &mut self,
        cyclic: &Cyclic,
        nodes: &[f64],
        scalars: &[f64],
        psi: &mut [f64],
        chi: &mut [f64],
    ) {
        let (n, k) = (self.shape.n, self.k);
        let (core_len, nodes_len) = (self.shape.core_len(), self.shape.nodes_len());
        let row = &mut self.work_row;
        if nodes.is_empty() {
            row.fill(0.0);
        } else {
            row.copy_from_slice(nodes);
            multiply(row, cyclic.sizes());
            cyclic.reduce(&mut [], row);
        }
        let last = &mut self.work_last;
        last[..n].copy_from_slice(&row[..n]);
        last[n..2 * n].copy_from_slice(&row[nodes_len - n..]);
        for j in 0..k {
            let column = &self.columns[j * core_len..(j + 1) * core_len];
            last[2 * n + j] = scalars[j] - cyclic.pivot_product(row, column);
        }
        self.last.solve_transposed(last);
        chi.copy_from_slice(&last[2 * n..]);
        for (b, &multiplier) in chi.iter().enumerate() {
            crate::dense::axpy(row, -multiplier, &self.rows[b * nodes_len..(b + 1) * nodes_len]);
        }
        cyclic.expand_row(row, &last[..n], psi);
        divide(psi, cyclic.sizes());
    }

    /// Sign of det(final block) / det(E) after [`Bordered::prepare`].
    pub fn determinant_sign(&mut self, cyclic: &Cyclic) -> DeterminantSign {
        self.e_block.matrix_mut().copy_from_slice(cyclic.link().1);
        if !self.e_block.factor() {
            return DeterminantSign(0.0);
        }
        DeterminantSign(self.last.determinant_sign() * self.e_block.determinant_sign())
    }
}

/// Node by node, or row group by row group.
fn multiply(values: &mut [f64], sizes: &[f64]) {
    values.chunks_exact_mut(sizes.len()).for_each(|group| group.iter_mut().zip(sizes).for_each(|(v, s)| *v *= s));
}

fn divide(values: &mut [f64], sizes: &[f64]) {
    values.chunks_exact_mut(sizes.len()).for_each(|group| group.iter_mut().zip(sizes).for_each(|(v, s)| *v /= s));
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::dense::tests::Random;

    struct Planted {
        cyclic: Cyclic,
        bordered: Bordered,
        dense: Vec<f64>,
        size: usize,
    }

    /// A random bordered system and the same matrix written out densely.
    fn planted(shape: Shape, k: usize, sigma: f64, seed: u64, spread: f64) -> Planted {
        let mut random = Random::new(seed);
        let (n, inner, rows, core, nodes) = (shape.n, shape.inner, shape.rows(), shape.core_len(), shape.nodes_len());
        let size = nodes + k;
        let mut dense = vec![0.0; size * size];
        let mut cyclic = Cyclic::new(shape);
        // State a has the size spread^a: well balanced in these units, eight decades apart in those of the dense matrix.
        let sizes: Vec<f64> = (0..n).map(|a| spread.powi(a as i32)).collect();
        cyclic.set_sizes(&sizes);
        let mut bordered = Bordered::new(shape, k);
        for i in 0..shape.intervals {
            for r in 0..rows {
                for c in 0..shape.width() {
                    let value = random.next();
                    cyclic.block_mut(i)[r * shape.width() + c] = value;
                    let place = if c < inner {
                        n + c
                    } else if c < inner + n {
                        c - inner
                    } else {
                        rows + c - inner - n
                    };
                    dense[(i * rows + r) * size + i * rows + place] = value * sizes[r % n] / sizes[c % n];
                }
            }
        }
        for j in 0..k {
            for r in 0..core {
                let value = random.next() * sizes[r % n];
                bordered.column_mut(j)[r] = value;
                dense[r * size + nodes + j] = value;
            }
            for r in 0..n {
                let value = random.next() * sizes[r];
                bordered.closing_column_mut(j)[r] = value;
                dense[(core + r) * size + nodes + j] = value;
            }
            for c in 0..nodes {
                let value = random.next() / sizes[c % n];
                bordered.row_mut(j)[c] = value;
                dense[(nodes + j) * size + c] = value;
            }
            for c in 0..k {
                let value = random.next();
                bordered.corner_mut()[j * k + c] = value;
                dense[(nodes + j) * size + nodes + c] = value;
            }
        }
        for r in 0..n {
            dense[(core + r) * size + r] = -sigma;
            dense[(core + r) * size + core + r] = 1.0;
        }
        cyclic.factor().expect("random blocks are regular");
        bordered.prepare(&cyclic, sigma).expect("random borders are regular");
        Planted { cyclic, bordered, dense, size }
    }

    /// Independent: the matrix written out and multiplied with a planted solution, both ways; also with states that differ
    /// in size by two decades each, where the solution must be as good relative to the sizes.
    #[test]
    fn planted_solutions_return_straight_and_transposed() {
        let cases = [
            (1, 0, 1, 1, 1.0, 1.0),
            (2, 4, 3, 2, 1.0, 1.0),
            (3, 6, 40, 2, -1.0, 1.0),
            (4, 12, 33, 3, 1.0, 1.0),
            (2, 2, 64, 0, 0.3, 1.0),
            (4, 12, 33, 3, 1.0, 128.0),
            (5, 5, 40, 2, -1.0, 1.0 / 128.0),
        ];
        for (seed, (n, inner, intervals, k, sigma, spread)) in cases.into_iter().enumerate() {
            let shape = Shape { n, inner, intervals };
            let Planted { cyclic, mut bordered, dense, size } = planted(shape, k, sigma, seed as u64 + 1, spread);
            let mut random = Random::new(77);
            let (core, nodes) = (shape.core_len(), shape.nodes_len());
            let scale = |at: usize| if at < nodes { cyclic.sizes()[at % n] } else { 1.0 };
            let x: Vec<f64> = (0..size).map(|at| scale(at) * random.next()).collect();
            let b: Vec<f64> = (0..size).map(|r| (0..size).map(|c| dense[r * size + c] * x[c]).sum()).collect();
            let (mut found, mut scalars) = (vec![0.0; nodes], vec![0.0; k]);
            let right = Right { core: &b[..core], closing: &b[core..nodes], border: &b[nodes..] };
            bordered.solve(&cyclic, right, &mut found, &mut scalars);
            let pairs = found.iter().chain(&scalars).zip(&x).enumerate();
            let worst = pairs.fold(0.0f64, |w, (at, (a, b))| w.max(((a - b) / scale(at)).abs()));
            assert!(worst < 1e-8, "straight {n} {inner} {intervals} {k} {spread}: {worst}");

            let x: Vec<f64> = x.iter().enumerate().map(|(at, x)| x / scale(at).powi(2)).collect();
            let c: Vec<f64> = (0..size).map(|c| (0..size).map(|r| dense[r * size + c] * x[r]).sum()).collect();
            let (mut psi, mut chi) = (vec![0.0; core], vec![0.0; k]);
            bordered.solve_transposed(&cyclic, &c[..nodes], &c[nodes..], &mut psi, &mut chi);
            let pairs = psi.iter().zip(&x[..core]).chain(chi.iter().zip(&x[nodes..]));
            let places = (0..core).chain(nodes..size);
            let worst = pairs.zip(places).fold(0.0f64, |w, ((a, b), at)| w.max(((a - b) * scale(at)).abs()));
            assert!(worst < 1e-8, "transposed {n} {inner} {intervals} {k} {spread}: {worst}");
        }
    }
}
