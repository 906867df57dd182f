//! The cyclic system closed by a complex factor, with complex borders.
//!
//! ```text
//! [ M  C ] [x]   [r]      M: the real core of [`Cyclic`], C: k complex columns over its rows
//! [ K  0 ] [s] = [0]      K: x_N - sigma x_0, sigma complex
//! [ B  0 ]       [d]      B: k complex border rows over all unknowns
//! ```
//! The core is real, so real and imaginary parts of columns and rows go through its factors side by side; they meet only in
//! the final block of 2n + k complex rows, factored as a real one of twice the size. Products are bilinear, without
//! conjugation, and the transposed solve is that of the plain transpose. Vectors come and go in the caller's units.
//! Cost: two real reductions for each border, O(n^3) for each new sigma.

use nalgebra::Complex;

use crate::cyclic::{Cyclic, Shape, Singular};
use crate::dense::{Lu, axpy};

/// A complex vector as its two parts.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct ComplexVector {
    /// Real parts.
    pub re: Vec<f64>,
    /// Imaginary parts.
    pub im: Vec<f64>,
}

impl ComplexVector {
    /// Zeros.
    pub fn zeros(len: usize) -> Self {
        Self { re: vec![0.0; len], im: vec![0.0; len] }
    }

    /// Entry `k`.
    pub fn at(&self, k: usize) -> Complex<f64> {
        Complex::new(self.re[k], self.im[k])
    }

    /// Multiplies every entry.
    pub fn scale(&mut self, factor: Complex<f64>) {
        for (re, im) in self.re.iter_mut().zip(&mut self.im) {
            (*re, *im) = (factor.re * *re - factor.im * *im, factor.re * *im + factor.im * *re);
        }
    }

    fn divide_sizes(&mut self, sizes: &[f64], multiply: bool) {
        for part in [&mut self.re, &mut self.im] {
            for group in part.chunks_exact_mut(sizes.len()) {
                for (value, size) in group.iter_mut().zip(sizes) {
                    *value *= if multiply { *size } else { 1.0 / size };
                }
            }
        }
    }
}

/// Complex borders of a cyclic system. Life cycle: fill columns and rows, [`ComplexBordered::reduce`] once, then
/// [`ComplexBordered::close`] for each sigma, then solves.
#[derive(Clone, Debug)]
pub struct ComplexBordered {
    shape: Shape,
    columns: Vec<ComplexVector>,
    rows: Vec<ComplexVector>,
    last: Lu,
    work: Vec<f64>,
}

impl ComplexBordered {
    /// Allocates for `k` borders, all zero.
    pub fn new(shape: Shape, k: usize) -> Self {
        let size = 2 * (2 * shape.n + k);
        Self {
            shape,
            columns: vec![ComplexVector::zeros(shape.core_len()); k],
            rows: vec![ComplexVector::zeros(shape.nodes_len()); k],
            last: Lu::new(size),
            work: vec![0.0; size],
        }
    }

    /// Column `j` over all interval rows; overwritten by [`ComplexBordered::reduce`].
    pub fn column_mut(&mut self, j: usize) -> &mut ComplexVector {
        &mut self.columns[j]
    }

    /// Border row `j` over all unknowns; overwritten by [`ComplexBordered::reduce`].
    pub fn row_mut(&mut self, j: usize) -> &mut ComplexVector {
        &mut self.rows[j]
    }

    /// Takes the borders through the factors of `cyclic`.
    pub fn reduce(&mut self, cyclic: &Cyclic) {
        for column in &mut self.columns {
            column.divide_sizes(cyclic.sizes(), false);
            cyclic.reduce(&mut column.re, &mut []);
            cyclic.reduce(&mut column.im, &mut []);
        }
        for row in &mut self.rows {
            row.divide_sizes(cyclic.sizes(), true);
            cyclic.reduce(&mut [], &mut row.re);
            cyclic.reduce(&mut [], &mut row.im);
        }
    }

    /// Complex rows of the final block.
    fn size(&self) -> usize {
        2 * self.shape.n + self.rows.len()
    }

    /// Closes the reduced system with `sigma` and factors the final block.
    ///
    /// # Errors
    /// [`Singular`] (interval = N) where it is singular or not finite.
    pub fn close(&mut self, cyclic: &Cyclic, sigma: Complex<f64>) -> Result<(), Singular> {
        let (n, k, size) = (self.shape.n, self.rows.len(), self.size());
        let nodes_len = self.shape.nodes_len();
        let (a, e) = cyclic.link();
        let last = self.last.matrix_mut();
        last.fill(0.0);
        let mut put = |row: usize, column: usize, value: Complex<f64>| {
            last[row * 2 * size + column] = value.re;
            last[row * 2 * size + size + column] = -value.im;
            last[(size + row) * 2 * size + column] = value.im;
            last[(size + row) * 2 * size + size + column] = value.re;
        };
        for r in 0..n {
            for c in 0..n {
                put(r, c, a[r * n + c].into());
                put(r, n + c, e[r * n + c].into());
            }
            for (j, column) in self.columns.iter().enumerate() {
                let part = |values: &[f64]| cyclic.reduced_right(values)[r];
                put(r, 2 * n + j, Complex::new(part(&column.re), part(&column.im)));
            }
            put(n + r, r, -sigma);
            put(n + r, n + r, 1.0.into());
        }
        for (b, row) in self.rows.iter().enumerate() {
            for c in 0..n {
                put(2 * n + b, c, row.at(c));
                put(2 * n + b, n + c, row.at(nodes_len - n + c));
            }
            for (j, column) in self.columns.iter().enumerate().take(k) {
                put(2 * n + b, 2 * n + j, -product(cyclic, row, column));
            }
        }
        if self.last.factor() { Ok(()) } else { Err(Singular { interval: self.shape.intervals }) }
    }

    /// Solves for the unknowns and the border scalars; `core` is zero where absent.
    pub fn solve(
        &mut self,
        cyclic: &Cyclic,
        (core, border): (Option<&ComplexVector>, &[Complex<f64>]),
        nodes: &mut ComplexVector,
        scalars: &mut [Complex<f64>],
    ) {
        let (n, size, nodes_len) = (self.shape.n, self.size(), self.shape.nodes_len());
        let mut right = core.cloned().unwrap_or_else(|| ComplexVector::zeros(self.shape.core_len()));
        right.divide_sizes(cyclic.sizes(), false);
        cyclic.reduce(&mut right.re, &mut []);
        cyclic.reduce(&mut right.im, &mut []);
        let last = &mut self.work;
        last.fill(0.0);
        last[..n].copy_from_slice(cyclic.reduced_right(&right.re));
        last[size..size + n].copy_from_slice(cyclic.reduced_right(&right.im));
        for (b, row) in self.rows.iter().enumerate() {
            let value = border[b] - product(cyclic, row, &right);
            (last[2 * n + b], last[size + 2 * n + b]) = (value.re, value.im);
        }
        self.last.solve(last);
        for (j, (scalar, column)) in scalars.iter_mut().zip(&self.columns).enumerate() {
            *scalar = Complex::new(last[2 * n + j], last[size + 2 * n + j]);
            subtract(&mut right, *scalar, column);
        }
        for (part, (values, right)) in [(&mut nodes.re, &right.re), (&mut nodes.im, &right.im)].into_iter().enumerate()
        {
            values[..n].copy_from_slice(&last[part * size..part * size + n]);
            values[nodes_len - n..].copy_from_slice(&last[part * size + n..part * size + 2 * n]);
            cyclic.back_substitute(right, values);
        }
        nodes.divide_sizes(cyclic.sizes(), true);
    }

    /// Solves the transposed system `(psi, closing, chi)^T [..] = (0, scalars)^T`: `psi` over the interval rows, `closing`
    /// over the n closing rows, `chi` over the border rows.
    pub fn solve_transposed(
        &mut self,
        cyclic: &Cyclic,
        scalars: &[Complex<f64>],
        (psi, closing): (&mut ComplexVector, &mut [Complex<f64>]),
        chi: &mut [Complex<f64>],
    ) {
        let (n, size) = (self.shape.n, self.size());
        let last = &mut self.work;
        last.fill(0.0);
        // The transpose of the real form is that of the conjugate transpose: conjugates go in and come out.
        for (j, scalar) in scalars.iter().enumerate() {
            (last[2 * n + j], last[size + 2 * n + j]) = (scalar.re, -scalar.im);
        }
        self.last.solve_transposed(last);
        let at = |k: usize| Complex::new(last[k], -last[size + k]);
        closing.iter_mut().enumerate().for_each(|(r, value)| *value = at(n + r) / cyclic.sizes()[r]);
        let mut row = ComplexVector::zeros(self.shape.nodes_len());
        for (b, (chi, border)) in chi.iter_mut().zip(&self.rows).enumerate() {
            *chi = at(2 * n + b);
            subtract(&mut row, *chi, border);
        }
        let head: (Vec<f64>, Vec<f64>) = (0..n).map(|r| (at(r).re, at(r).im)).unzip();
        cyclic.expand_row(&row.re, &head.0, &mut psi.re);
        cyclic.expand_row(&row.im, &head.1, &mut psi.im);
        psi.divide_sizes(cyclic.sizes(), false);
    }
}

/// What a border loses to the elimination, bilinear.
fn product(cyclic: &Cyclic, row: &ComplexVector, column: &ComplexVector) -> Complex<f64> {
    let real = |a: &[f64], b: &[f64]| cyclic.pivot_product(a, b);
    Complex::new(
        real(&row.re, &column.re) - real(&row.im, &column.im),
        real(&row.re, &column.im) + real(&row.im, &column.re),
    )
}

/// `from -= factor * what`.
fn subtract(from: &mut ComplexVector, factor: Complex<f64>, what: &ComplexVector) {
    axpy(&mut from.re, -factor.re, &what.re);
    axpy(&mut from.re, factor.im, &what.im);
    axpy(&mut from.im, -factor.re, &what.im);
    axpy(&mut from.im, -factor.im, &what.re);
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::dense::tests::Random;

    type Number = Complex<f64>;

    /// A random system with its complex matrix written out.
    fn planted(shape: Shape, k: usize, sigma: Number, seed: u64) -> (Cyclic, ComplexBordered, Vec<Vec<Number>>) {
        let mut random = Random::new(seed);
        let (n, inner, rows, core, nodes) = (shape.n, shape.inner, shape.rows(), shape.core_len(), shape.nodes_len());
        let size = nodes + k;
        let mut dense = vec![vec![Number::new(0.0, 0.0); size]; size];
        let mut cyclic = Cyclic::new(shape);
        let sizes: Vec<f64> = (0..n).map(|a| 32f64.powi(a as i32)).collect();
        cyclic.set_sizes(&sizes);
        for i in 0..shape.intervals {
            for r in 0..rows {
                for c in 0..shape.width() {
                    let value = random.next();
                    cyclic.block_mut(i)[r * shape.width() + c] = value;
                    let place = match c {
                        c if c < inner => n + c,
                        c if c < inner + n => c - inner,
                        c => rows + c - inner - n,
                    };
                    dense[i * rows + r][i * rows + place] = (value * sizes[r % n] / sizes[c % n]).into();
                }
            }
        }
        cyclic.factor().expect("random blocks are regular");
        let mut bordered = ComplexBordered::new(shape, k);
        for j in 0..k {
            for r in 0..core {
                let value = Number::new(random.next(), random.next()) * sizes[r % n];
                (bordered.columns[j].re[r], bordered.columns[j].im[r]) = (value.re, value.im);
                dense[r][nodes + j] = value;
            }
            for c in 0..nodes {
                let value = Number::new(random.next(), random.next()) / sizes[c % n];
                (bordered.rows[j].re[c], bordered.rows[j].im[c]) = (value.re, value.im);
                dense[nodes + j][c] = value;
            }
        }
        for r in 0..n {
            dense[core + r][r] = -sigma;
            dense[core + r][core + r] = 1.0.into();
        }
        bordered.reduce(&cyclic);
        bordered.close(&cyclic, sigma).expect("random borders are regular");
        (cyclic, bordered, dense)
    }

    fn split(values: &[Number]) -> ComplexVector {
        let (re, im) = values.iter().map(|value| (value.re, value.im)).unzip();
        ComplexVector { re, im }
    }

    /// Independent: the complex matrix written out, applied to what the solves give, both ways.
    #[test]
    fn solutions_satisfy_the_matrix_written_out() {
        let sigma = Number::from_polar(1.0, 2.1);
        for (seed, (n, inner, intervals, k)) in
            [(2, 4, 3, 1), (3, 6, 40, 1), (3, 0, 17, 0), (4, 12, 33, 1)].into_iter().enumerate()
        {
            let shape = Shape { n, inner, intervals };
            let (cyclic, mut bordered, dense) = planted(shape, k, sigma, seed as u64 + 5);
            let (core, nodes, size) = (shape.core_len(), shape.nodes_len(), shape.nodes_len() + k);
            let mut random = Random::new(99);
            let scale = |at: usize| if at < nodes { cyclic.sizes()[at % n] } else { 1.0 };
            let right: Vec<Number> =
                (0..core).map(|at| Number::new(random.next(), random.next()) * scale(at)).collect();
            let border: Vec<Number> = (0..k).map(|_| Number::new(random.next(), random.next())).collect();
            let mut found = ComplexVector::zeros(nodes);
            let mut scalars = vec![Number::new(0.0, 0.0); k];
            bordered.solve(&cyclic, (Some(&split(&right)), &border), &mut found, &mut scalars);
            let x: Vec<Number> = (0..nodes).map(|at| found.at(at)).chain(scalars.iter().copied()).collect();
            let wanted = right.iter().copied().chain((0..n).map(|_| 0.0.into())).chain(border.iter().copied());
            for (r, wanted) in wanted.enumerate() {
                let sum: Number = (0..size).map(|c| dense[r][c] * x[c]).sum();
                assert!((sum - wanted).norm() < 1e-8 * scale(r), "row {r} of {n} {inner} {intervals}: {sum} {wanted}");
            }

            let (mut psi, mut closing) = (ComplexVector::zeros(core), vec![Number::new(0.0, 0.0); n]);
            let mut chi = vec![Number::new(0.0, 0.0); k];
            bordered.solve_transposed(&cyclic, &border, (&mut psi, &mut closing), &mut chi);
            let y: Vec<Number> = (0..core).map(|at| psi.at(at)).chain(closing).chain(chi).collect();
            let wanted = (0..nodes).map(|_| 0.0.into()).chain(border.iter().copied());
            for (c, wanted) in wanted.enumerate() {
                let sum: Number = (0..size).map(|r| dense[r][c] * y[r]).sum();
                assert!(
                    (sum - wanted).norm() * scale(c) < 1e-8,
                    "column {c} of {n} {inner} {intervals}: {sum} {wanted}"
                );
            }
        }
    }
}
