//! Eigenvalues of a product of matrices from the sequence, never from the product.
//!
//! Problem: the multipliers of `P = G_L ... G_1`, all n x n, with moduli that may span hundreds of orders.
//! Method: orthogonal sweeps `G_i Q = Q' R` round the cycle sort and roughly split the spectrum; the
//! remaining orthogonal factor `Q_0^T Q_L` is reduced to Hessenberg form with the R kept triangular, and the
//! implicit double-shift periodic QR iteration (Bojanczyk, Golub & Van Dooren 1992, Proc. SPIE 1770:31;
//! Kressner 2006, Linear Algebra Appl. 417:423) splits it into blocks of one and two. Log-moduli are sums of
//! logarithms of diagonal entries; a block of two takes its determinant from those sums and only its trace
//! from the (scaled) product of 2 x 2 blocks.
//! Accuracy: backward stable factor by factor, so each multiplier has a small *relative* error as far as it is
//! well conditioned. Cost O(L n^3).

use std::f64::consts::PI;

use crate::factors::{Factors, Rotation, Scaled2};

/// A multiplier that may lie outside the range of floating-point numbers.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ScaledMultiplier {
    /// Natural logarithm of the modulus; minus infinity for an exact zero.
    pub log_modulus: f64,
    /// Angle in (-pi, pi], exactly 0 or pi for a real multiplier.
    pub angle: f64,
}

/// The iteration did not split the spectrum, or an input was not finite.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct NotConverged;

impl std::fmt::Display for NotConverged {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "the multipliers could not be separated from the sequence of interval maps")
    }
}

impl std::error::Error for NotConverged {}

/// Orthogonal sweeps before the iteration. Two sort the spectrum so that shifts work on its small end; a
/// third rarely changes anything.
const SWEEPS: usize = 2;
/// Double-shift steps allowed for one eigenvalue or pair; well-behaved blocks need two to four.
const STEPS_PER_BLOCK: usize = 60;
/// Every so many steps without a split the shift is replaced by one that breaks symmetric stagnation.
const EXCEPTIONAL_EVERY: usize = 10;
/// Share of the squared half trace above which a determinant belongs to two multipliers of like size: their quotient is
/// then above 0.17.
const CLOSE: f64 = 0.5;

/// Workspace of the decomposition; reused from call to call.
#[derive(Clone, Debug, Default)]
pub struct PeriodicSchur {
    factors: Factors,
    basis: Vec<f64>,
    image: Vec<f64>,
    taus: Vec<f64>,
}

impl PeriodicSchur {
    /// An empty workspace.
    pub fn new() -> Self {
        Self::default()
    }

    /// Multipliers of the product of `maps` (n x n row-major each, the first applied first), written to `out`
    /// with the largest modulus first; complex pairs stand together, positive angle first.
    ///
    /// # Errors
    /// [`NotConverged`].
    ///
    /// # Panics
    /// If `maps` is not a whole number of n x n matrices.
    pub fn multipliers(&mut self, n: usize, maps: &[f64], out: &mut Vec<ScaledMultiplier>) -> Result<(), NotConverged> {
        out.clear();
        if n == 0 {
            return Ok(());
        }
        assert_eq!(maps.len() % (n * n), 0, "{} numbers are no sequence of {n} x {n} maps", maps.len());
        if maps.iter().any(|value| !value.is_finite()) {
            return Err(NotConverged);
        }
        self.triangularise(n, maps);
        self.reduce_to_hessenberg();
        self.split(out)?;
        out.sort_by(|a, b| b.log_modulus.total_cmp(&a.log_modulus).then(b.angle.total_cmp(&a.angle)));
        Ok(())
    }

    /// Sweeps orthogonally round the cycle; leaves R_i in the triangular factors and `Q_0^T Q_L` in H.
    fn triangularise(&mut self, n: usize, maps: &[f64]) {
        let size = n * n;
        self.factors.n = n;
        self.factors.t.resize(maps.len(), 0.0);
        self.image.resize(size, 0.0);
        self.taus.resize(n, 0.0);
        self.basis.resize(size, 0.0);
        self.basis.fill(0.0);
        (0..n).for_each(|q| self.basis[q * n + q] = 1.0);
        for _ in 0..SWEEPS {
            self.factors.h.clone_from(&self.basis);
            for (map, t) in maps.chunks_exact(size).zip(self.factors.t.chunks_exact_mut(size)) {
                multiply(n, map, &self.basis, &mut self.image);
                orthogonalise(n, &mut self.image, &mut self.basis, &mut self.taus, t);
            }
        }
        // H now holds Q_0 of the last sweep and basis Q_L: form Q_0^T Q_L.
        for r in 0..n {
            for c in 0..n {
                self.image[r * n + c] = (0..n).map(|k| self.factors.h[k * n + r] * self.basis[k * n + c]).sum();
            }
        }
        self.factors.h.copy_from_slice(&self.image);
    }

    fn reduce_to_hessenberg(&mut self) {
        let n = self.factors.n;
        for column in 0..n.saturating_sub(2) {
            for row in (column + 2..n).rev() {
                self.factors.zero(row, column);
            }
        }
    }

    fn split(&mut self, out: &mut Vec<ScaledMultiplier>) -> Result<(), NotConverged> {
        let mut last = self.factors.n - 1;
        let mut steps = 0;
        loop {
            let first = self.active_from(last);
            match last - first {
                0 => out.push(self.single(last)),
                1 => self.pair(first, out),
                _ => {
                    steps += 1;
                    if steps > STEPS_PER_BLOCK {
                        return Err(NotConverged);
                    }
                    self.double_shift_step(first, last, steps % EXCEPTIONAL_EVERY == 0);
                    continue;
                }
            }
            steps = 0;
            if first == 0 {
                return Ok(());
            }
            last = first - 1;
        }
    }

    /// Start of the unreduced block that ends at `last`; sets negligible subdiagonal entries to zero.
    fn active_from(&mut self, last: usize) -> usize {
        let n = self.factors.n;
        let mut first = last;
        while first > 0 {
            let size = self.factors.h(first, first).abs() + self.factors.h(first - 1, first - 1).abs();
            // Where both neighbours vanish, the factor's own size (it is orthogonal but for rounding) decides.
            let reference = if size > 0.0 { size } else { 1.0 };
            if self.factors.h(first, first - 1).abs() <= f64::EPSILON * reference {
                self.factors.h[first * n + first - 1] = 0.0;
                break;
            }
            first -= 1;
        }
        first
    }

    fn single(&self, q: usize) -> ScaledMultiplier {
        let (log, sign) = self.factors.diagonal_product(q);
        let h = self.factors.h(q, q);
        ScaledMultiplier { log_modulus: log + h.abs().ln(), angle: if sign * h < 0.0 { PI } else { 0.0 } }
    }

    /// The two eigenvalues of the block at (q, q+1): determinant from the sums of logarithms, trace from the product.
    fn pair(&self, q: usize, out: &mut Vec<ScaledMultiplier>) {
        let Scaled2 { entries: [[p00, p01], [p10, p11]], log_scale } = self.factors.block_product(q);
        let (h00, h01, h10, h11) =
            (self.factors.h(q, q), self.factors.h(q, q + 1), self.factors.h(q + 1, q), self.factors.h(q + 1, q + 1));
        let determinant_h = h00 * h11 - h01 * h10;
        let ((log0, sign0), (log1, sign1)) = (self.factors.diagonal_product(q), self.factors.diagonal_product(q + 1));
        let log_det = log0 + log1 + determinant_h.abs().ln();
        let sign_det = sign0 * sign1 * determinant_h.signum();
        let half_trace = 0.5 * (p00 + p11);
        // Determinant on the scale of the trace; it may underflow harmlessly.
        let det = sign_det * (log_det - 2.0 * log_scale).exp();
        // The determinant carries the roundoff of its logarithms, whose root would part a double multiplier; the entries of
        // the block do not, but lose a root much smaller than the other.
        let discriminant = if det > CLOSE * half_trace * half_trace {
            0.25 * (p00 - p11).powi(2) + p01 * p10
        } else {
            half_trace * half_trace - det
        };
        if discriminant < 0.0 {
            let angle = (-discriminant).sqrt().atan2(half_trace);
            let log_modulus = 0.5 * log_det;
            out.push(ScaledMultiplier { log_modulus, angle });
            out.push(ScaledMultiplier { log_modulus, angle: -angle });
            return;
        }
        let large = half_trace + discriminant.sqrt().copysign(half_trace);
        let large_log = large.abs().ln() + log_scale;
        let angle_of = |sign: f64| if sign < 0.0 { PI } else { 0.0 };
        out.push(ScaledMultiplier { log_modulus: large_log, angle: angle_of(large.signum()) });
        // A vanishing large root means both vanish; otherwise the small one is the quotient.
        let small_log = if large == 0.0 { f64::NEG_INFINITY } else { log_det - large_log };
        out.push(ScaledMultiplier { log_modulus: small_log, angle: angle_of(sign_det * large.signum()) });
    }

    /// One implicit double-shift step on the block `first..=last` (three rows or more).
    fn double_shift_step(&mut self, first: usize, last: usize, exceptional: bool) {
        let x = self.first_column(first, last, exceptional);
        if let Some(rotation) = Rotation::zeroing(x[1], x[2]) {
            self.factors.rotate(first + 2, rotation);
        }
        if let Some(rotation) = Rotation::zeroing(x[0], x[1].hypot(x[2])) {
            self.factors.rotate(first + 1, rotation);
        }
        for column in first..last {
            for row in (column + 2..=(column + 3).min(last)).rev() {
                self.factors.zero(row, column);
            }
        }
    }

    /// First three entries, up to a factor, of `(P - a)(P - b) e_first` with a, b the eigenvalues of the trailing block.
    fn first_column(&self, first: usize, last: usize, exceptional: bool) -> [f64; 3] {
        let tail = self.factors.block_product(last - 1);
        let lead = self.factors.triangular_product(first);
        let log_scale = tail.log_scale.max(lead.log_scale);
        let shrink = (tail.log_scale - log_scale).exp();
        let [[a, b], [c, d]] = tail.entries.map(|row| row.map(|value| value * shrink));
        let (mut trace, mut det) = (a + d, a * d - b * c);
        if exceptional {
            // Wilkinson-like ad hoc values of the size of the block; any generic choice serves.
            let size = a.abs() + b.abs() + c.abs() + d.abs();
            (trace, det) = (1.5 * size, size * size);
        }
        let shrink = (lead.log_scale - log_scale).exp();
        let [[t00, t01], [_, t11]] = lead.entries.map(|row| row.map(|value| value * shrink));
        let h = |r: usize, c: usize| self.factors.h(first + r, first + c);
        let (p00, p10) = (h(0, 0) * t00, h(1, 0) * t00);
        let (p01, p11, p21) = (h(0, 0) * t01 + h(0, 1) * t11, h(1, 0) * t01 + h(1, 1) * t11, h(2, 1) * t11);
        [p00 * (p00 - trace) + p01 * p10 + det, p10 * (p00 + p11 - trace), p21 * p10]
    }
}

/// `out = a b`, n x n row-major.
fn multiply(n: usize, a: &[f64], b: &[f64], out: &mut [f64]) {
    out.fill(0.0);
    for (row, out) in a.chunks_exact(n).zip(out.chunks_exact_mut(n)) {
        for (&factor, b) in row.iter().zip(b.chunks_exact(n)) {
            crate::dense::axpy(out, factor, b);
        }
    }
}

/// QR of `image`: R into `r`, Q into `basis`. Householder, with Q accumulated backwards; the diagonal of R keeps
/// whatever sign comes, since signs are multiplied in the end.
fn orthogonalise(n: usize, image: &mut [f64], basis: &mut [f64], taus: &mut [f64], r: &mut [f64]) {
    for (q, tau) in taus.iter_mut().enumerate() {
        *tau = reflect(n, q, image);
    }
    basis.fill(0.0);
    (0..n).for_each(|q| basis[q * n + q] = 1.0);
    for q in (0..n).rev() {
        for c in q..n {
            let mut sum = basis[q * n + c];
            for row in q + 1..n {
                sum += image[row * n + q] * basis[row * n + c];
            }
            sum *= taus[q];
            basis[q * n + c] -= sum;
            for row in q + 1..n {
                basis[row * n + c] -= sum * image[row * n + q];
            }
        }
    }
    for row in 0..n {
        for c in 0..n {
            r[row * n + c] = if c >= row { image[row * n + c] } else { 0.0 };
        }
    }
}

/// One Householder step on column `q`, in place; returns tau, leaves v below the diagonal.
fn reflect(n: usize, q: usize, a: &mut [f64]) -> f64 {
    let head = a[q * n + q];
    let largest = (q + 1..n).fold(0.0f64, |largest, r| largest.max(a[r * n + q].abs()));
    if largest == 0.0 {
        return 0.0;
    }
    let scale = largest.max(head.abs());
    let norm = scale * (q..n).map(|r| (a[r * n + q] / scale).powi(2)).sum::<f64>().sqrt();
    let beta = if head > 0.0 { -norm } else { norm };
    let tau = (beta - head) / beta;
    for r in q + 1..n {
        a[r * n + q] /= head - beta;
    }
    a[q * n + q] = beta;
    for c in q + 1..n {
        let mut sum = a[q * n + c];
        for r in q + 1..n {
            sum += a[r * n + q] * a[r * n + c];
        }
        sum *= tau;
        a[q * n + c] -= sum;
        for r in q + 1..n {
            a[r * n + c] -= sum * a[r * n + q];
        }
    }
    tau
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::dense::Lu;
    use crate::dense::tests::Random;

    /// Maps `G_i = X_(i+1) D_i X_i^-1` with random X: the product is similar to the product of the block-diagonal D.
    fn conjugated(n: usize, blocks: &[Vec<f64>], seed: u64) -> Vec<f64> {
        let mut random = Random::new(seed);
        let count = blocks.len();
        let bases: Vec<Vec<f64>> = (0..count)
            .map(|_| {
                let mut x: Vec<f64> = (0..n * n).map(|_| 0.3 * random.next()).collect();
                (0..n).for_each(|q| x[q * n + q] += 1.0);
                x
            })
            .collect();
        let mut maps = vec![0.0; count * n * n];
        for i in 0..count {
            let mut lu = Lu::new(n);
            lu.matrix_mut().copy_from_slice(&bases[i]);
            assert!(lu.factor());
            let mut product = vec![0.0; n * n];
            multiply(n, &bases[(i + 1) % count], &blocks[i], &mut product);
            // Row r of G solves g X_i = row r of (X_(i+1) D): a transposed solve.
            for r in 0..n {
                let row = &mut product[r * n..(r + 1) * n];
                lu.solve_transposed(row);
                maps[i * n * n + r * n..i * n * n + (r + 1) * n].copy_from_slice(row);
            }
        }
        maps
    }

    fn diagonal(values: &[f64]) -> Vec<f64> {
        let n = values.len();
        let mut d = vec![0.0; n * n];
        values.iter().enumerate().for_each(|(q, v)| d[q * n + q] = *v);
        d
    }

    fn multipliers(n: usize, maps: &[f64]) -> Vec<ScaledMultiplier> {
        let mut out = Vec::new();
        PeriodicSchur::new().multipliers(n, maps, &mut out).expect("converges");
        out
    }

    /// Exact by construction: moduli from exp(-700) to exp(200) at once, signs mixed, N and N+1 maps.
    #[test]
    fn widely_spread_multipliers_keep_their_relative_accuracy() {
        for count in [60, 61] {
            let rates: [f64; 5] = [200.0, 3.0, -2.0, -60.0, -700.0];
            let blocks: Vec<Vec<f64>> = (0..count)
                .map(|i| {
                    let values: Vec<f64> = rates
                        .iter()
                        .enumerate()
                        .map(|(q, rate)| (rate / count as f64).exp() * if i == 0 && q % 2 == 1 { -1.0 } else { 1.0 })
                        .collect();
                    diagonal(&values)
                })
                .collect();
            let found = multipliers(5, &conjugated(5, &blocks, 9));
            for (q, (multiplier, rate)) in found.iter().zip(rates).enumerate() {
                // Rounding of the maps themselves: each entry carries eps |G|, felt by direction q as eps |G| / d_q.
                let felt = f64::EPSILON * ((rates[0] - rate) / count as f64).exp();
                let bound = 20.0 * (count as f64).sqrt() * felt + 1e-13 * rate.abs();
                assert!((multiplier.log_modulus - rate).abs() < bound, "{count} {q}: {multiplier:?} {bound}");
                assert_eq!(multiplier.angle, if q % 2 == 1 { PI } else { 0.0 }, "{count} {q}");
            }
        }
    }

    /// Exact by construction: rotations by a known angle plus real multipliers; also equal moduli that do not split by sweeps.
    #[test]
    fn complex_pairs_and_equal_moduli_are_found() {
        let count = 37;
        let (angle, rate): (f64, f64) = (2.0, -0.5);
        let step = angle / count as f64;
        let modulus = (rate / count as f64).exp();
        let blocks: Vec<Vec<f64>> = (0..count)
            .map(|i| {
                let mut d = diagonal(&[0.0, 0.0, modulus, if i == 3 { -modulus } else { modulus }]);
                let (s, c) = step.sin_cos();
                (d[0], d[1], d[4], d[5]) = (modulus * c, -modulus * s, modulus * s, modulus * c);
                d
            })
            .collect();
        let found = multipliers(4, &conjugated(4, &blocks, 4));
        let mut angles: Vec<f64> = found.iter().map(|m| m.angle).collect();
        angles.sort_by(f64::total_cmp);
        assert!(found.iter().all(|m| (m.log_modulus - rate).abs() < 1e-11), "{found:?}");
        for (found, exact) in angles.iter().zip([-angle, 0.0, angle, PI]) {
            assert!((found - exact).abs() < 1e-11, "{angles:?}");
        }
    }

    /// Exact by construction: a double multiplier with two directions, far below the first, after many maps.
    #[test]
    fn a_double_multiplier_is_not_parted() {
        let count = 8000;
        let decay = (-1.5f64).exp();
        let blocks: Vec<Vec<f64>> = (0..count).map(|_| diagonal(&[1.0, decay, decay])).collect();
        for seed in 0..5 {
            let found = multipliers(3, &conjugated(3, &blocks, seed));
            let double = -1.5 * count as f64;
            assert!(found[1..].iter().all(|mu| (mu.log_modulus - double).abs() < 1e-12 * double.abs()), "{found:?}");
        }
    }

    /// Independent: nalgebra's eigenvalues of the multiplied-out matrix, for random well-conditioned sequences.
    #[test]
    fn random_products_agree_with_a_general_eigenvalue_routine() {
        let mut random = Random::new(21);
        for n in 1..=9 {
            for count in [1, 2, 5] {
                let maps: Vec<f64> = (0..count * n * n).map(|_| random.next()).collect();
                let mut product = nalgebra::DMatrix::<f64>::identity(n, n);
                for map in maps.chunks_exact(n * n) {
                    product = nalgebra::DMatrix::from_row_slice(n, n, map) * product;
                }
                let schur = nalgebra::linalg::Schur::try_new(product, 1e-15, 10_000).expect("bounded");
                let mut exact: Vec<(f64, f64)> =
                    schur.complex_eigenvalues().iter().map(|z| (z.norm().ln(), z.arg())).collect();
                exact.sort_by(|a, b| b.0.total_cmp(&a.0).then(b.1.total_cmp(&a.1)));
                for (found, (log, angle)) in multipliers(n, &maps).iter().zip(exact) {
                    let error = (found.log_modulus - log).abs() + (found.angle.cos() - angle.cos()).abs();
                    assert!(error < 1e-7, "n {n}, {count} maps: {found:?} for {log} {angle}");
                }
            }
        }
    }

    #[test]
    fn zero_maps_and_infinite_ones_do_not_hang() {
        let found = multipliers(3, &[0.0; 18]);
        assert!(found.iter().all(|m| m.log_modulus == f64::NEG_INFINITY), "{found:?}");
        let mut out = Vec::new();
        assert_eq!(PeriodicSchur::new().multipliers(1, &[f64::INFINITY], &mut out), Err(NotConverged));
    }
}
