//! Gauss and Radau points and weights on `[0, 1]`, computed at start-up.
//!
//! Newton's method on the Legendre three-term recurrence (Abramowitz & Stegun 1964, 22.7.10); Radau IIA points
//! are the zeros of `P_m - P_(m-1)` and contain 1 (Hairer & Wanner 1996, Solving ODEs II, sec. IV.5).

use std::f64::consts::PI;

/// `P_m(x)` and `P_(m-1)(x)` on `[-1, 1]`.
fn legendre(m: usize, x: f64) -> (f64, f64) {
    let (mut now, mut before) = (1.0, 0.0);
    for k in 1..=m {
        let k = k as f64;
        (now, before) = (((2.0 * k - 1.0) * x * now - (k - 1.0) * before) / k, now);
    }
    (now, before)
}

/// Newton steps; from the asymptotic guess five reach the last digit for every m.
const STEPS: usize = 12;

/// The m Gauss points on `[0, 1]`, ascending, and their weights (sum 1).
pub fn gauss(m: usize) -> (Vec<f64>, Vec<f64>) {
    let mut points = vec![0.0; m];
    let mut weights = vec![0.0; m];
    for l in 0..m {
        // Asymptotic zeros of P_m (Abramowitz & Stegun 22.16.6), descending in the cosine.
        let mut x = (PI * (m as f64 - l as f64 - 0.25) / (m as f64 + 0.5)).cos();
        let mut slope = 1.0;
        for _ in 0..STEPS {
            let (p, q) = legendre(m, x);
            slope = m as f64 * (x * p - q) / (x * x - 1.0);
            x -= p / slope;
        }
        points[l] = 0.5 * (1.0 + x);
        weights[l] = 1.0 / ((1.0 - x * x) * slope * slope);
    }
    (points, weights)
}

/// The m Radau IIA points on `(0, 1]`, ascending, the last 1 exactly.
pub fn radau(m: usize) -> Vec<f64> {
    let function = |x: f64| {
        let (p, q) = legendre(m, x);
        p - q
    };
    // The m-1 inner zeros interlace with the zeros of P_m: bisection between neighbouring Gauss points.
    let (gauss_points, _) = gauss(m);
    let mut points: Vec<f64> = gauss_points
        .windows(2)
        .map(|pair| {
            let (mut a, mut b) = (2.0 * pair[0] - 1.0, 2.0 * pair[1] - 1.0);
            let sign = function(a).signum();
            for _ in 0..f64::MANTISSA_DIGITS {
                let middle = 0.5 * (a + b);
                if function(middle).signum() == sign { a = middle } else { b = middle }
            }
            0.5 * (1.0 + 0.5 * (a + b))
        })
        .collect();
    points.push(1.0);
    points
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: Gauss quadrature integrates polynomials of degree 2m-1.
    #[test]
    fn gauss_weights_integrate_to_degree_2m_minus_1() {
        for m in 1..=12 {
            let (points, weights) = gauss(m);
            for power in 0..2 * m {
                let sum: f64 = points.iter().zip(&weights).map(|(x, w)| w * x.powi(power as i32)).sum();
                assert!((sum - 1.0 / (power as f64 + 1.0)).abs() < 4e-15, "{m} {power} {sum}");
            }
        }
    }

    /// Published: Radau IIA points for m = 2, 3 (Hairer & Wanner 1996, tables IV.5.5 and IV.5.6, from memory).
    #[test]
    fn radau_points_are_the_published_ones() {
        assert!((radau(2)[0] - 1.0 / 3.0).abs() < 1e-15);
        let root = 6.0f64.sqrt();
        let three = radau(3);
        assert!((three[0] - (4.0 - root) / 10.0).abs() < 1e-15 && (three[1] - (4.0 + root) / 10.0).abs() < 1e-15);
    }
}
