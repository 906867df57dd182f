//! Dense LU factors that are refilled in place: `P A = L U`, row-major, partial pivoting.

/// Owns an n x n matrix and its factors.
#[derive(Clone)]
pub(crate) struct Lu {
    n: usize,
    /// Row-major; the matrix before [`Lu::factor`], its factors after.
    pub(crate) entries: Vec<f64>,
    pivots: Vec<usize>,
}

impl Lu {
    pub(crate) fn new(n: usize) -> Self {
        Self { n, entries: vec![0.0; n * n], pivots: vec![0; n] }
    }

    /// Factors what stands in `entries`; false where a pivot is zero or not finite.
    pub(crate) fn factor(&mut self) -> bool {
        let n = self.n;
        for k in 0..n {
            let column = |row: usize| self.entries[row * n + k].abs();
            let pivot = (k + 1..n).fold(k, |best, row| if column(row) > column(best) { row } else { best });
            self.pivots[k] = pivot;
            let size = column(pivot);
            if size == 0.0 || !size.is_finite() {
                return false;
            }
            let (upper, lower) = self.entries.split_at_mut((k + 1) * n);
            let top = &mut upper[k * n..];
            if pivot != k {
                let start = (pivot - k - 1) * n;
                top.swap_with_slice(&mut lower[start..start + n]);
            }
            for row in lower.chunks_exact_mut(n) {
                row[k] /= top[k];
                let factor = row[k];
                row[k + 1..].iter_mut().zip(&top[k + 1..]).for_each(|(value, t)| *value -= factor * t);
            }
        }
        true
    }

    pub(crate) fn solve_in_place(&self, b: &mut [f64]) {
        let n = self.n;
        // Whole rows were swapped while factoring, so the right side is permuted before the substitution.
        self.pivots.iter().enumerate().for_each(|(k, &pivot)| b.swap(k, pivot));
        for (k, row) in self.entries.chunks_exact(n).enumerate() {
            let sum: f64 = row[..k].iter().zip(&*b).map(|(l, value)| l * value).sum();
            b[k] -= sum;
        }
        for (k, row) in self.entries.chunks_exact(n).enumerate().rev() {
            let sum: f64 = row[k + 1..].iter().zip(&b[k + 1..]).map(|(u, value)| u * value).sum();
            b[k] = (b[k] - sum) / row[k];
        }
    }

    /// |det A|^(1/n) from the factors.
    pub(crate) fn mean_size(&self) -> f64 {
        let logs: f64 = (0..self.n).map(|k| self.entries[k * self.n + k].abs().ln()).sum();
        (logs / self.n as f64).exp()
    }
}

#[cfg(test)]
mod tests {
    use super::Lu;

    /// Planted answer; the matrix needs row exchanges. Condition about 10, so 1e-13 is roundoff.
    #[test]
    fn solves_a_planted_system() {
        let matrix = [0.0, 2.0, -1.0, 4.0, 1e-3, 2.0, 1.0, 5.0, 9.0];
        let x = [1.0, -2.0, 0.5];
        let mut b: Vec<f64> = matrix.chunks(3).map(|row| row.iter().zip(&x).map(|(a, x)| a * x).sum()).collect();
        let mut lu = Lu::new(3);
        lu.entries.copy_from_slice(&matrix);
        assert!(lu.factor());
        lu.solve_in_place(&mut b);
        assert!(b.iter().zip(&x).all(|(found, exact)| (found - exact).abs() < 1e-13), "{b:?}");
        lu.entries.copy_from_slice(&[1.0, 2.0, 3.0, 2.0, 4.0, 6.0, 1.0, 1.0, 1.0]);
        assert!(!lu.factor());
    }
}
