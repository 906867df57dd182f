//! Eigenvalues of a general matrix: balanced, and with a bounded iteration.
//!
//! Balancing makes rows and columns alike in size by powers of two, which round nothing (Parlett & Reinsch 1969, Numer.
//! Math. 13:293): eigenvalues of models in mixed units then have errors of the size of their own blocks. The Schur
//! iteration is faer's (small-bulge multishift QR after Braman, Byers & Mathias 2002, SIAM J. Matrix Anal. Appl. 23:929),
//! bounded in its sweeps, on one thread. Cost about 10 n^3; errors are some units of roundoff of the balanced norm, times
//! the eigenvalue's own conditioning.

use faer::diag::Diag;
use faer::dyn_stack::{MemBuffer, MemStack};
use faer::linalg::evd::{ComputeEigenvectors, evd_real, evd_scratch};
use faer::{Mat, Par};

use crate::periodic::NotConverged;

/// An eigenvalue.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Eigenvalue {
    /// Real part.
    pub re: f64,
    /// Imaginary part; exactly 0 for a real one.
    pub im: f64,
}

/// Eigenvalues with what they are accurate to.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Eigenvalues {
    /// By descending real part; of a pair the one with positive imaginary part first.
    pub values: Vec<Eigenvalue>,
    /// Largest row sum of the balanced matrix: the size that their roundoff is relative to.
    pub norm: f64,
}

/// Balancing stops where a round gains less than this factor in any row and column (Parlett & Reinsch's own).
const GAIN: f64 = 0.95;
/// Rounds of balancing; three are usual, and what is left of it costs accuracy only.
const ROUNDS: usize = 20;

/// Eigenvalues of an n x n row-major matrix.
///
/// # Errors
/// [`NotConverged`] where an entry is not finite or the bounded iteration does not end.
///
/// # Panics
/// If the matrix is not n x n.
pub fn eigenvalues(n: usize, matrix: &[f64]) -> Result<Eigenvalues, NotConverged> {
    assert_eq!(matrix.len(), n * n, "entries of a matrix of {n} rows");
    if !matrix.iter().all(|value| value.is_finite()) {
        return Err(NotConverged);
    }
    let mut balanced = matrix.to_vec();
    balance(n, &mut balanced);
    let norm = balanced.chunks_exact(n).map(|row| row.iter().map(|a| a.abs()).sum::<f64>()).fold(0.0, f64::max);
    let matrix = Mat::from_fn(n, n, |r, c| balanced[r * n + c]);
    let (mut re, mut im) = (Diag::<f64>::zeros(n), Diag::<f64>::zeros(n));
    let none = ComputeEigenvectors::No;
    let mut memory = MemBuffer::new(evd_scratch::<f64>(n, none, none, Par::Seq, Default::default()));
    let stack = MemStack::new(&mut memory);
    evd_real(matrix.as_ref(), re.as_mut(), im.as_mut(), None, None, Par::Seq, stack, Default::default())
        .map_err(|_| NotConverged)?;
    let parts = re.column_vector().iter().zip(im.column_vector().iter());
    let mut values: Vec<Eigenvalue> = parts.map(|(re, im)| Eigenvalue { re: *re, im: *im }).collect();
    if !values.iter().all(|value| value.re.is_finite() && value.im.is_finite()) {
        return Err(NotConverged);
    }
    values.sort_by(|a, b| b.re.total_cmp(&a.re).then(b.im.total_cmp(&a.im)));
    Ok(Eigenvalues { values, norm })
}

/// Balances in place, without permutations.
fn balance(n: usize, a: &mut [f64]) {
    for _ in 0..ROUNDS {
        let mut done = true;
        for i in 0..n {
            let others = || (0..n).filter(move |j| *j != i);
            let column: f64 = others().map(|j| a[j * n + i].abs()).sum();
            let row: f64 = others().map(|j| a[i * n + j].abs()).sum();
            // Nothing couples one way: no factor makes them alike.
            if !(column > 0.0 && row > 0.0) {
                continue;
            }
            let factor = 2f64.powi((0.5 * (row / column).log2()).round().clamp(-500.0, 500.0) as i32);
            if (column * factor + row / factor) < GAIN * (column + row) {
                done = false;
                for j in 0..n {
                    a[i * n + j] /= factor;
                    a[j * n + i] *= factor;
                }
            }
        }
        if done {
            break;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: a companion matrix of (s + 1)(s^2 + 1)(s - 3), rows and columns scaled by powers far apart.
    #[test]
    fn planted_roots_return_through_bad_scaling() {
        let coefficients = [3.0, 2.0, 2.0, 2.0];
        let n = 4;
        let mut a = vec![0.0; n * n];
        for r in 0..n - 1 {
            a[r * n + r + 1] = 1.0;
        }
        // (s^2 - 2 s - 3)(s^2 + 1) = s^4 - 2 s^3 - 2 s^2 - 2 s - 3; the last row holds what s^4 equals.
        a[(n - 1) * n..].copy_from_slice(&coefficients);
        let scales = [1.0, 1e8, 1e-6, 1e3];
        for r in 0..n {
            for c in 0..n {
                a[r * n + c] *= scales[r] / scales[c];
            }
        }
        let found = eigenvalues(n, &a).expect("converges").values;
        let exact = [(3.0, 0.0), (0.0, 1.0), (0.0, -1.0), (-1.0, 0.0)];
        for (found, (re, im)) in found.iter().zip(exact) {
            assert!((found.re - re).abs() < 1e-13 && (found.im - im).abs() < 1e-13, "{found:?} for {re} {im}");
        }
    }

    /// Exact: a circulant matrix of 60 rows, eigenvalues -2 + 3 exp(2 pi i k/n).
    #[test]
    fn a_ring_of_sixty() {
        let n = 60;
        let mut a = vec![0.0; n * n];
        for r in 0..n {
            a[r * n + r] = -2.0;
            a[r * n + (r + 1) % n] = 3.0;
        }
        let found = eigenvalues(n, &a).expect("converges").values;
        assert_eq!(found.len(), n);
        for value in found {
            assert!(((value.re + 2.0).hypot(value.im) - 3.0).abs() < 1e-12, "{value:?}");
        }
    }

    #[test]
    fn what_is_not_finite_is_refused() {
        assert_eq!(eigenvalues(1, &[f64::NAN]), Err(NotConverged));
    }
}
