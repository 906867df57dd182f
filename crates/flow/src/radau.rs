//! The numbers of the Radau IIA method with five stages, computed at start-up from its nodes.
//!
//! The nodes are the zeros of P_s - P_(s-1) (Legendre polynomials) on [-1, 1], moved to [0, 1]; the matrix A
//! makes the quadrature `h Sum_j a_ij k_j` over [0, c_i] exact for polynomials of degree s-1 (Hairer & Wanner,
//! Solving Ordinary Differential Equations II, IV.5). Accuracy: a few units in the last place.

use crate::lu::Lu;

/// Number of stages s.
pub(crate) const STAGES: usize = 5;

/// Numbers of the method.
#[derive(Clone)]
pub(crate) struct RadauTable {
    /// Nodes, ascending, the last exactly 1.
    pub(crate) c: [f64; STAGES],
    /// Matrix A by rows.
    pub(crate) a: [[f64; STAGES]; STAGES],
    /// Weight of the rates at the beginning in the error estimate.
    pub(crate) gamma: f64,
    /// Weights of the increments in the error estimate.
    pub(crate) error_weights: [f64; STAGES],
}

impl RadauTable {
    pub(crate) fn new() -> Self {
        let c = nodes();
        let (a, gamma, error_weights) = coefficients(&c);
        Self { c, a, gamma, error_weights }
    }
}

/// The right Radau nodes on [0, 1], ascending, the last exactly 1.
fn nodes() -> [f64; STAGES] {
    // Value of P_s - P_(s-1) by the three-term recurrence.
    let value = |x: f64| {
        let (mut before, mut here) = (1.0, x);
        for k in 2..=STAGES {
            let next = ((2 * k - 1) as f64 * x * here - (k - 1) as f64 * before) / k as f64;
            (before, here) = (here, next);
        }
        here - before
    };
    // Cells finer than the smallest gap between zeros; the zero at 1 is known and left out.
    const CELLS: usize = 64;
    let mut c = [1.0; STAGES];
    let mut found = 0;
    for cell in 0..CELLS {
        let place = |k: usize| -1.0 + 1.99 * k as f64 / CELLS as f64;
        let (mut low, mut high) = (place(cell), place(cell + 1));
        if value(low) * value(high) > 0.0 || found == STAGES - 1 {
            continue;
        }
        // Halving to the last bit.
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if value(low) * value(middle) <= 0.0 { high = middle } else { low = middle }
        }
        c[found] = 0.5 * (1.0 + 0.5 * (low + high));
        found += 1;
    }
    c
}

/// The matrix A, gamma and the error weights that belong to the nodes.
fn coefficients(c: &[f64; STAGES]) -> ([[f64; STAGES]; STAGES], f64, [f64; STAGES]) {
    // Row q of the transposed Vandermonde matrix: Sum_j w_j c_j^q = right side q, for q = 0 … s-1.
    let mut moments = Lu::new(STAGES);
    for (k, entry) in moments.entries.iter_mut().enumerate() {
        let (q, j) = (k / STAGES, k % STAGES);
        *entry = c[j].powi(q as i32);
    }
    assert!(moments.factor(), "the nodes are distinct");
    let a: [[f64; STAGES]; STAGES] = std::array::from_fn(|i| {
        let mut row: [f64; STAGES] = std::array::from_fn(|q| c[i].powi(q as i32 + 1) / (q + 1) as f64);
        moments.solve_in_place(&mut row);
        row
    });
    let mut transposed = Lu::new(STAGES);
    for (k, entry) in transposed.entries.iter_mut().enumerate() {
        *entry = a[k % STAGES][k / STAGES];
    }
    assert!(transposed.factor(), "the matrix of the method is regular");
    // Any positive gamma gives order s; the mean size of the eigenvalues of A filters as the method does.
    let gamma = transposed.mean_size();
    // Weights of the embedded solution less those of the method: all moments agree but for gamma in the
    // first, so the difference solves the moment equations with right side (-gamma, 0, …, 0).
    let mut difference = [0.0; STAGES];
    difference[0] = -gamma;
    moments.solve_in_place(&mut difference);
    // From slopes to increments: h k = A^-1 z.
    transposed.solve_in_place(&mut difference);
    (a, gamma, difference)
}

#[cfg(test)]
mod tests {
    use super::nodes;

    /// Nodes of the five-stage method by Hairer & Wanner's program, from memory; and exact: a Radau rule
    /// of s nodes has Sum c_i = s^2 / (2 s - 1) (Vieta on the node polynomial).
    #[test]
    fn nodes_are_those_of_radau() {
        let c = nodes();
        assert!((c[0] - 0.057_104_196_114_518).abs() < 1e-14 && c[4] == 1.0, "{c:?}");
        assert!((c.iter().sum::<f64>() - 25.0 / 9.0).abs() < 1e-14);
    }
}
