//! Equilibria: Newton's method on the rates with the exact Jacobian, and the eigenvalues there.

use nalgebra::{Complex, DMatrix, DVector, Schur};

use crate::rates::{Rates, first_not_finite};

/// A state of rest.
#[derive(Clone, Debug, PartialEq)]
pub struct Equilibrium {
    /// The state.
    pub state: Vec<f64>,
    /// Eigenvalues of the Jacobian there as (real, imaginary), by descending real part; empty where they
    /// could not be computed.
    pub eigenvalues: Vec<(f64, f64)>,
}

impl Equilibrium {
    /// The largest real part: the rate at which the slowest disturbance grows (or, negative, decays).
    pub fn growth(&self) -> f64 {
        self.eigenvalues.first().map_or(f64::NAN, |value| value.0)
    }

    /// Whether every disturbance decays.
    pub fn is_stable(&self) -> bool {
        self.growth() < 0.0
    }
}

/// Newton iterations allowed: quadratic convergence needs far fewer from near by.
const ITERATIONS: usize = 25;
/// The iteration has converged when a correction is this part of the size of the state, per state.
const CONVERGED: f64 = 1e-13;

/// Newton's method from `state`; none where it does not converge or the Jacobian is singular.
pub(crate) fn newton(rates: &mut Rates<'_>, time: f64, state: &[f64], scale: &[f64]) -> Option<Equilibrium> {
    let n = state.len();
    let mut point = state.to_vec();
    let mut values = vec![0.0; n];
    let mut best = f64::INFINITY;
    for _ in 0..ITERATIONS {
        rates.at(time, &point, &mut values);
        if first_not_finite(&values).is_some() {
            return None;
        }
        let matrix = jacobian(rates, time, &point)?;
        let correction = matrix.lu().solve(&DVector::from_column_slice(&values))?;
        point.iter_mut().zip(correction.iter()).for_each(|(x, c)| *x -= c);
        let size = |(c, s): (&f64, &f64)| c.abs() / s.max(f64::MIN_POSITIVE);
        let worst = correction.iter().zip(scale).map(size).fold(0.0, f64::max);
        // Below the square root of the roundoff a correction that no longer shrinks is roundoff.
        let stalled = worst < f64::EPSILON.sqrt() && worst >= 0.5 * best;
        if worst <= CONVERGED || stalled {
            let eigenvalues = eigenvalues(jacobian(rates, time, &point)?);
            return Some(Equilibrium { state: point, eigenvalues });
        }
        if !worst.is_finite() {
            return None;
        }
        best = best.min(worst);
    }
    None
}

/// The Jacobian as a dense matrix; none where an entry is not finite.
pub(crate) fn jacobian(rates: &mut Rates<'_>, time: f64, state: &[f64]) -> Option<DMatrix<f64>> {
    let n = state.len();
    let mut matrix = DMatrix::zeros(n, n);
    rates.linearise(time, state);
    for (row, column, value) in rates.entries() {
        matrix[(row, column)] = value;
    }
    matrix.iter().all(|value| value.is_finite()).then_some(matrix)
}

/// Eigenvalues by descending real part. The iteration is bounded, and its threshold is loosened where a
/// multiple eigenvalue keeps it from ending.
fn eigenvalues(mut matrix: DMatrix<f64>) -> Vec<(f64, f64)> {
    /// Iterations per state; a handful is usual.
    const PER_STATE: usize = 100;
    nalgebra::linalg::balancing::balance_parlett_reinsch(&mut matrix);
    let limit = PER_STATE * matrix.nrows();
    let schur = [1.0, 4.0, 16.0, 64.0]
        .iter()
        .find_map(|loosened| Schur::try_new(matrix.clone(), loosened * f64::EPSILON, limit));
    let Some(schur) = schur else { return Vec::new() };
    let mut values: Vec<(f64, f64)> =
        schur.complex_eigenvalues().iter().map(|value: &Complex<f64>| (value.re, value.im)).collect();
    values.sort_by(|a, b| b.0.total_cmp(&a.0).then(b.1.total_cmp(&a.1)));
    values
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::test_models::{hopf_with_shear, roessler};

    /// Exact: eigenvalues of the Hopf normal form at rest are mu ± i.
    #[test]
    fn the_rest_of_the_hopf_case() {
        let field = hopf_with_shear();
        let mut rates = Rates::new(&field, &[-0.2, 0.5]).expect("two parameters");
        let found = newton(&mut rates, 0.0, &[0.05, -0.1], &[1.0, 1.0]).expect("close enough");
        assert!(found.state.iter().all(|x| x.abs() < 1e-15), "{found:?}");
        assert!(found.eigenvalues.iter().all(|(re, im)| (re + 0.2).abs() < 1e-14 && (im.abs() - 1.0).abs() < 1e-14));
        assert!(found.is_stable());
    }

    /// Exact: x = a s, y = -s, z = s with a s^2 - c s + b = 0.
    #[test]
    fn the_inner_rest_of_roessler() {
        let field = roessler();
        let (a, b, c) = (0.2, 0.2, 5.7);
        let parameters = [a, b, c];
        let mut rates = Rates::new(&field, &parameters).expect("three parameters");
        let found = newton(&mut rates, 0.0, &[0.1, 0.1, 0.1], &[1.0; 3]).expect("close enough");
        let s = (c - f64::sqrt(c * c - 4.0 * a * b)) / (2.0 * a);
        let worst = found.state.iter().zip([a * s, -s, s]).map(|(x, e)| (x - e).abs()).fold(0.0, f64::max);
        assert!(worst < 1e-14, "{found:?}");
        assert!(!found.is_stable());
    }
}
