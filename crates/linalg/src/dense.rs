//! Small dense factorisations on contiguous row-major storage.
//!
//! [`Lu`] is LU with partial pivoting after row equilibration (Golub & Van Loan 2013, Matrix
//! Computations, sec. 3.4 and 3.5.2). Below [`BLOCKED_FROM`] rows a contiguous loop of our own; from
//! there on faer's blocked factorisation.

use faer::{Mat, Par, dyn_stack::MemBuffer, dyn_stack::MemStack, linalg::lu::partial_pivoting::factor};

/// Size from which faer's blocked LU is faster than the plain loop (measured: equal at about 24 rows,
/// 20 % ahead at 50).
const BLOCKED_FROM: usize = 32;

/// `y += factor * x`, the inner loop of everything here.
#[inline(always)]
pub(crate) fn axpy(y: &mut [f64], factor: f64, x: &[f64]) {
    y.iter_mut().zip(x).for_each(|(y, x)| *y += factor * x);
}

/// Inner product, in eight partial sums where it is long: one after the other, additions wait for each other.
#[inline(always)]
pub(crate) fn dot(x: &[f64], y: &[f64]) -> f64 {
    const LANES: usize = 8;
    let tail = |x: &[f64], y: &[f64]| x.iter().zip(y).map(|(x, y)| x * y).sum::<f64>();
    if x.len() < 4 * LANES {
        return tail(x, y);
    }
    let (x, x_rest) = x.as_chunks::<LANES>();
    let (y, y_rest) = y.as_chunks::<LANES>();
    let mut sums = [0.0; LANES];
    for (x, y) in x.iter().zip(y) {
        (0..LANES).for_each(|k| sums[k] += x[k] * y[k]);
    }
    sums.iter().sum::<f64>() + tail(x_rest, y_rest)
}

/// Two different rows of a row-major matrix, the first to read, the second to change (`read < change`).
#[inline(always)]
pub(crate) fn row_pair(a: &mut [f64], width: usize, read: usize, change: usize) -> (&[f64], &mut [f64]) {
    let (head, tail) = a.split_at_mut(change * width);
    (&head[read * width..(read + 1) * width], &mut tail[..width])
}

/// A square LU factorisation with its own storage.
#[derive(Clone, Debug)]
pub struct Lu {
    size: usize,
    factors: Vec<f64>,
    swaps: Vec<usize>,
    row_scale: Vec<f64>,
    odd_swaps: bool,
    work: Vec<f64>,
    blocked: Option<Blocked>,
}

/// Storage of faer's factorisation.
struct Blocked {
    matrix: Mat<f64>,
    forward: Vec<usize>,
    inverse: Vec<usize>,
    memory: MemBuffer,
    /// Current order of rows and where each row is, to turn a permutation into swaps.
    now: Vec<usize>,
    place: Vec<usize>,
}

impl Blocked {
    fn new(size: usize) -> Self {
        let scratch = factor::lu_in_place_scratch::<usize, f64>(size, size, Par::Seq, Default::default());
        Self {
            matrix: Mat::zeros(size, size),
            forward: vec![0; size],
            inverse: vec![0; size],
            memory: MemBuffer::new(scratch),
            now: vec![0; size],
            place: vec![0; size],
        }
    }
}

impl Clone for Blocked {
    /// Fresh storage of the same size; what it holds does not outlive a call.
    fn clone(&self) -> Self {
        Self::new(self.forward.len())
    }
}

impl std::fmt::Debug for Blocked {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Blocked").field("size", &self.forward.len()).finish_non_exhaustive()
    }
}

impl Lu {
    /// Storage for a matrix of `size` rows.
    pub fn new(size: usize) -> Self {
        Self {
            size,
            factors: vec![0.0; size * size],
            swaps: vec![0; size],
            row_scale: vec![1.0; size],
            odd_swaps: false,
            work: vec![0.0; size],
            blocked: (size >= BLOCKED_FROM).then(|| Blocked::new(size)),
        }
    }

    /// The matrix to be factored next, row-major; overwritten by [`Lu::factor`].
    pub fn matrix_mut(&mut self) -> &mut [f64] {
        &mut self.factors
    }

    /// Factors the matrix in place. False when it is singular to working precision or not finite.
    pub fn factor(&mut self) -> bool {
        let size = self.size;
        self.odd_swaps = false;
        for (row, scale) in self.factors.chunks_exact_mut(size).zip(&mut self.row_scale) {
            let largest = row.iter().fold(0.0f64, |largest, value| largest.max(value.abs()));
            // A row of zeros, NaN or infinities leaves no usable pivot.
            if !(largest > 0.0 && largest.is_finite()) {
                return false;
            }
            *scale = 1.0 / largest;
            row.iter_mut().for_each(|value| *value *= *scale);
        }
        match self.blocked.take() {
            None => self.factor_plain(),
            Some(mut blocked) => {
                let regular = self.factor_blocked(&mut blocked);
                self.blocked = Some(blocked);
                regular
            }
        }
    }

    fn factor_plain(&mut self) -> bool {
        let size = self.size;
        let a = &mut self.factors;
        for q in 0..size {
            let mut pivot = q;
            for r in q + 1..size {
                if a[r * size + q].abs() > a[pivot * size + q].abs() {
                    pivot = r;
                }
            }
            self.swaps[q] = pivot;
            if pivot != q {
                self.odd_swaps = !self.odd_swaps;
                let (top, bottom) = a.split_at_mut(pivot * size);
                top[q * size..(q + 1) * size].swap_with_slice(&mut bottom[..size]);
            }
            let diagonal = a[q * size + q];
            if diagonal == 0.0 || !diagonal.is_finite() {
                return false;
            }
            for r in q + 1..size {
                let (source, target) = row_pair(a, size, q, r);
                let factor = target[q] / diagonal;
                target[q] = factor;
                if factor != 0.0 {
                    axpy(&mut target[q + 1..], -factor, &source[q + 1..]);
                }
            }
        }
        true
    }

    fn factor_blocked(&mut self, blocked: &mut Blocked) -> bool {
        let size = self.size;
        let Blocked { matrix, forward, inverse, memory, now, place } = blocked;
        for r in 0..size {
            for c in 0..size {
                matrix[(r, c)] = self.factors[r * size + c];
            }
        }
        let stack = MemStack::new(memory);
        let (info, permutation) =
            factor::lu_in_place(matrix.as_mut(), forward, inverse, Par::Seq, stack, Default::default());
        self.odd_swaps = info.transposition_count % 2 == 1;
        let (order, _) = permutation.arrays();
        swaps_of(order, (now, place), &mut self.swaps);
        for r in 0..size {
            for c in 0..size {
                self.factors[r * size + c] = matrix[(r, c)];
            }
        }
        (0..size).all(|q| {
            let diagonal = self.factors[q * size + q];
            diagonal != 0.0 && diagonal.is_finite()
        })
    }

    /// Solves `A x = b` in place.
    pub fn solve(&self, b: &mut [f64]) {
        let size = self.size;
        b.iter_mut().zip(&self.row_scale).for_each(|(b, scale)| *b *= scale);
        for q in 0..size {
            b.swap(q, self.swaps[q]);
        }
        for r in 1..size {
            b[r] -= dot(&self.factors[r * size..r * size + r], &b[..r]);
        }
        for r in (0..size).rev() {
            let row = &self.factors[r * size..(r + 1) * size];
            b[r] = (b[r] - dot(&row[r + 1..], &b[r + 1..])) / row[r];
        }
    }

    /// Solves `A X = B` in place for `count` right sides at once, row-major (size x count): each factor is read once.
    pub fn solve_many(&self, b: &mut [f64], count: usize) {
        let size = self.size;
        for (row, scale) in b.chunks_exact_mut(count).zip(&self.row_scale) {
            row.iter_mut().for_each(|b| *b *= scale);
        }
        for q in 0..size {
            let other = self.swaps[q];
            if other != q {
                let (low, high) = b.split_at_mut(q.max(other) * count);
                low[q.min(other) * count..][..count].swap_with_slice(&mut high[..count]);
            }
        }
        for r in 1..size {
            let (known, rest) = b.split_at_mut(r * count);
            for (factor, known) in self.factors[r * size..r * size + r].iter().zip(known.chunks_exact(count)) {
                axpy(&mut rest[..count], -factor, known);
            }
        }
        for r in (0..size).rev() {
            let row = &self.factors[r * size..(r + 1) * size];
            let (rest, known) = b.split_at_mut((r + 1) * count);
            let here = &mut rest[r * count..];
            for (factor, known) in row[r + 1..].iter().zip(known.chunks_exact(count)) {
                axpy(here, -factor, known);
            }
            here.iter_mut().for_each(|b| *b /= row[r]);
        }
    }

    /// Solves `A^T x = b` in place.
    pub fn solve_transposed(&mut self, b: &mut [f64]) {
        let size = self.size;
        let x = &mut self.work;
        x.copy_from_slice(b);
        for q in 0..size {
            let row = &self.factors[q * size..(q + 1) * size];
            x[q] /= row[q];
            let value = x[q];
            axpy(&mut x[q + 1..], -value, &row[q + 1..]);
        }
        for q in (1..size).rev() {
            let row = &self.factors[q * size..q * size + q];
            let value = x[q];
            axpy(&mut x[..q], -value, row);
        }
        for q in (0..size).rev() {
            x.swap(q, self.swaps[q]);
        }
        b.iter_mut().zip(x.iter()).zip(&self.row_scale).for_each(|((b, x), scale)| *b = x * scale);
    }

    /// Sign of the determinant of the last matrix factored.
    pub fn determinant_sign(&self) -> f64 {
        let size = self.size;
        let sign = if self.odd_swaps { -1.0 } else { 1.0 };
        (0..size).fold(sign, |sign, q| sign * self.factors[q * size + q].signum())
    }
}

/// The transpositions (row q with `swaps[q]`, in turn) that bring rows into the order `order`; `now` and `place` are
/// scratch.
fn swaps_of(order: &[usize], (now, place): (&mut [usize], &mut [usize]), swaps: &mut [usize]) {
    for (q, (now, place)) in now.iter_mut().zip(place.iter_mut()).enumerate() {
        (*now, *place) = (q, q);
    }
    for (q, &wanted) in order.iter().enumerate() {
        let other = place[wanted];
        let here = now[q];
        now.swap(q, other);
        place[wanted] = q;
        place[here] = other;
        swaps[q] = other;
    }
}

/// Householder reflection that turns `x` into `(beta, 0, ...)`: overwrites `x` by `(beta, v_1, ...)` with
/// v_0 = 1 and returns tau in `H = I - tau v v^T` (Golub & Van Loan 2013, alg. 5.1.1).
pub(crate) fn householder(x: &mut [f64]) -> f64 {
    let Some((head, tail)) = x.split_first_mut() else { return 0.0 };
    let largest = tail.iter().fold(0.0f64, |largest, value| largest.max(value.abs()));
    if largest == 0.0 {
        return 0.0;
    }
    // Scaling keeps squares of 1e-200 and 1e+200 alike inside the range.
    let scale = largest.max(head.abs());
    let sum: f64 = tail.iter().map(|value| (value / scale).powi(2)).sum();
    let norm = scale * ((*head / scale).powi(2) + sum).sqrt();
    let beta = if *head > 0.0 { -norm } else { norm };
    let tau = (beta - *head) / beta;
    let divisor = *head - beta;
    tail.iter_mut().for_each(|value| *value /= divisor);
    *head = beta;
    tau
}

#[cfg(test)]
pub(crate) mod tests {
    use super::*;

    /// A small generator for tests: xorshift (Marsaglia 2003, J. Stat. Softw. 8:14), uniform in (-1, 1).
    pub(crate) struct Random(u64);

    impl Random {
        pub(crate) fn new(seed: u64) -> Self {
            Self(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1)
        }
        pub(crate) fn next(&mut self) -> f64 {
            self.0 ^= self.0 << 13;
            self.0 ^= self.0 >> 7;
            self.0 ^= self.0 << 17;
            (self.0 >> 11) as f64 / (1u64 << 52) as f64 - 1.0
        }
    }

    /// Exact: the planted solution, on both sides of the switch to the blocked factorisation.
    #[test]
    fn planted_solutions_return_from_both_solves() {
        let mut random = Random::new(3);
        for size in [1, 2, 5, 31, 32, 60] {
            let mut lu = Lu::new(size);
            lu.matrix_mut().iter_mut().for_each(|a| *a = random.next());
            let a = lu.matrix_mut().to_vec();
            let x: Vec<f64> = (0..size).map(|_| random.next()).collect();
            assert!(lu.factor());
            let mut b: Vec<f64> = (0..size).map(|r| dot(&a[r * size..(r + 1) * size], &x)).collect();
            let mut many: Vec<f64> = b.iter().flat_map(|b| [*b, -2.0 * b, 0.0]).collect();
            lu.solve_many(&mut many, 3);
            for (row, x) in many.chunks_exact(3).zip(&x) {
                assert!(
                    (row[0] - x).abs() < 1e-11 && (row[1] + 2.0 * x).abs() < 1e-11 && row[2] == 0.0,
                    "{size}: {row:?}"
                );
            }
            lu.solve(&mut b);
            let mut c: Vec<f64> = (0..size).map(|q| (0..size).map(|r| a[r * size + q] * x[r]).sum()).collect();
            lu.solve_transposed(&mut c);
            for ((b, c), x) in b.iter().zip(&c).zip(&x) {
                assert!((b - x).abs() < 1e-11 && (c - x).abs() < 1e-11, "size {size}: {b} {c} {x}");
            }
        }
    }

    /// Exact: the determinant of a permutation with a known sign.
    #[test]
    fn determinant_sign_counts_swaps() {
        for size in [3, 40] {
            let mut lu = Lu::new(size);
            for r in 0..size {
                lu.matrix_mut()[r * size + (r + 1) % size] = 2.0;
            }
            assert!(lu.factor());
            // A cycle of length s has sign (-1)^(s-1).
            let expected = if size % 2 == 0 { -1.0 } else { 1.0 };
            assert_eq!(lu.determinant_sign(), expected);
        }
    }

    #[test]
    fn a_singular_matrix_is_refused() {
        let mut lu = Lu::new(2);
        lu.matrix_mut().copy_from_slice(&[1.0, 2.0, 2.0, 4.0]);
        assert!(!lu.factor());
        lu.matrix_mut().copy_from_slice(&[1.0, f64::NAN, 2.0, 4.0]);
        assert!(!lu.factor());
    }
}
