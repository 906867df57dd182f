//! The factors of a periodic product under orthogonal changes of basis.
//!
//! `P = H T_L ... T_1` with H upper Hessenberg (at first full) and every T upper triangular. A rotation of
//! rows (i-1, i) of H is a change of basis at the start of the cycle; it is passed through the chain so
//! that every T stays triangular, and comes back to H as a rotation of columns. All n x n row-major.

/// `[c s; -s c]` acting on rows: new first = c a + s b, new second = c b - s a.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Rotation {
    c: f64,
    s: f64,
}

impl Rotation {
    /// The rotation that turns `(a, b)` into `(r, 0)`; none where b is already 0.
    pub(crate) fn zeroing(a: f64, b: f64) -> Option<Self> {
        if b == 0.0 {
            return None;
        }
        let r = a.hypot(b);
        Some(Self { c: a / r, s: b / r })
    }

    fn rows(self, matrix: &mut [f64], n: usize, i: usize, from: usize) {
        let (upper, lower) = matrix[(i - 1) * n..(i + 1) * n].split_at_mut(n);
        for (a, b) in upper[from..].iter_mut().zip(&mut lower[from..]) {
            (*a, *b) = (self.c * *a + self.s * *b, self.c * *b - self.s * *a);
        }
    }

    fn columns(self, matrix: &mut [f64], n: usize, i: usize, to: usize) {
        for row in matrix[..to * n].chunks_exact_mut(n) {
            (row[i - 1], row[i]) = (self.c * row[i - 1] + self.s * row[i], self.c * row[i] - self.s * row[i - 1]);
        }
    }
}

/// A 2 x 2 matrix times exp(log_scale), its largest entry about 1.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Scaled2 {
    pub entries: [[f64; 2]; 2],
    pub log_scale: f64,
}

/// H and the triangular factors.
#[derive(Clone, Debug, Default)]
pub(crate) struct Factors {
    pub n: usize,
    pub h: Vec<f64>,
    pub t: Vec<f64>,
}

impl Factors {
    pub(crate) fn h(&self, r: usize, c: usize) -> f64 {
        self.h[r * self.n + c]
    }

    /// Rotates rows (i-1, i) of H and passes the change of basis through the chain.
    pub(crate) fn rotate(&mut self, i: usize, rotation: Rotation) {
        let n = self.n;
        rotation.rows(&mut self.h, n, i, 0);
        let mut passing = rotation;
        for t in self.t.chunks_exact_mut(n * n) {
            passing.columns(t, n, i, i + 1);
            let Some(next) = Rotation::zeroing(t[(i - 1) * n + i - 1], t[i * n + i - 1]) else {
                // The fill is zero: the factor is triangular already and the basis after it unchanged.
                return;
            };
            next.rows(t, n, i, i - 1);
            t[i * n + i - 1] = 0.0;
            passing = next;
        }
        passing.columns(&mut self.h, n, i, n);
    }

    /// Zeroes H[row, column] against the row above by a rotation passed through the chain.
    pub(crate) fn zero(&mut self, row: usize, column: usize) {
        if let Some(rotation) = Rotation::zeroing(self.h(row - 1, column), self.h(row, column)) {
            self.rotate(row, rotation);
            self.h[row * self.n + column] = 0.0;
        }
    }

    /// Product of the triangular factors' diagonal 2 x 2 blocks at (q, q+1).
    pub(crate) fn triangular_product(&self, q: usize) -> Scaled2 {
        let n = self.n;
        let (mut a, mut b, mut d, mut log_scale) = (1.0f64, 0.0f64, 1.0f64, 0.0);
        for t in self.t.chunks_exact(n * n) {
            let (t00, t01, t11) = (t[q * n + q], t[q * n + q + 1], t[(q + 1) * n + q + 1]);
            (a, b, d) = (t00 * a, t00 * b + t01 * d, t11 * d);
            let largest = a.abs().max(b.abs()).max(d.abs());
            if largest > 0.0 {
                log_scale += largest.ln();
                (a, b, d) = (a / largest, b / largest, d / largest);
            }
        }
        Scaled2 { entries: [[a, b], [0.0, d]], log_scale }
    }

    /// Diagonal 2 x 2 block at (q, q+1) of the whole product, leaving out what H couples in from row q-1.
    pub(crate) fn block_product(&self, q: usize) -> Scaled2 {
        let Scaled2 { entries: [[a, b], [_, d]], log_scale } = self.triangular_product(q);
        let (h00, h01, h10, h11) = (self.h(q, q), self.h(q, q + 1), self.h(q + 1, q), self.h(q + 1, q + 1));
        Scaled2 { entries: [[h00 * a, h00 * b + h01 * d], [h10 * a, h10 * b + h11 * d]], log_scale }
    }

    /// log-modulus and sign of the product of diagonal entries `q` of the triangular factors.
    pub(crate) fn diagonal_product(&self, q: usize) -> (f64, f64) {
        let n = self.n;
        self.t.chunks_exact(n * n).fold((0.0, 1.0), |(log, sign), t| {
            let value = t[q * n + q];
            (log + value.abs().ln(), if value < 0.0 { -sign } else { sign })
        })
    }
}
