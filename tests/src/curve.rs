//! The true cycles of the exact cases, as functions of scaled time.

use std::f64::consts::{SQRT_2, TAU};

use crate::matching::Curve;
use crate::series::VanDerPol;

/// A circle of radius `radius` in the first two of `n` states, the others at `rest`.
pub fn circle(radius: f64, rest: &[f64]) -> Curve {
    let rest = rest.to_vec();
    Box::new(move |time, state| {
        let (sine, cosine) = (TAU * time).sin_cos();
        state[..2].copy_from_slice(&[radius * cosine, radius * sine]);
        state[2..].copy_from_slice(&rest);
    })
}

/// X3 and X4, the doubled cycle: `(r - 1) + i z = U exp(i theta/2)`, in two turns.
pub fn twisted(amplitude: f64) -> Curve {
    Box::new(move |time, state| {
        let (half_sine, half_cosine) = (TAU * time).sin_cos();
        let (sine, cosine) = (2.0 * TAU * time).sin_cos();
        let radius = 1.0 + amplitude * half_cosine;
        state.copy_from_slice(&[radius * cosine, radius * sine, amplitude * half_sine]);
    })
}

/// Harmonics of `exp(b sin theta)`, which fall like `(b/2)^k / k!`: far below roundoff for b < 2 behind the last.
const HARMONICS: usize = 24;

/// X12 (`power` 1) and X13 (`power` 2), the cycle beside z = 0, for mu > 0.
///
/// By hand: w = z^-power obeys `w' = power (1 - w (mu + a cos om t))`, so with b = power a/om and
/// `exp(b sin theta) = sum c_k exp(i k theta)`, `w = power exp(-b sin theta) sum c_k exp(i k theta)/(power mu + i k om)`.
pub fn branched(power: u32, (mu, a, om): (f64, f64, f64)) -> Curve {
    let q = f64::from(power);
    let b = q * a / om;
    // Trapezoidal rule, exact to roundoff on so many points: c_k = (cosine part, sine part) of harmonic k.
    const POINTS: usize = 128;
    let coefficient = |k: usize| {
        let (mut cosine, mut sine) = (0.0, 0.0);
        for j in 0..POINTS {
            let angle = TAU * j as f64 / POINTS as f64;
            let value = (b * angle.sin()).exp() / POINTS as f64;
            // The angle is reduced before it is multiplied, so that high harmonics keep their digits.
            let multiple = TAU * ((j * k) % POINTS) as f64 / POINTS as f64;
            cosine += value * multiple.cos();
            sine -= value * multiple.sin();
        }
        (cosine, sine)
    };
    let terms: Vec<(f64, f64)> = (0..=HARMONICS)
        .map(|k| {
            let ((re, im), decay, turn) = (coefficient(k), q * mu, k as f64 * om);
            let size = decay * decay + turn * turn;
            let double = if k == 0 { 1.0 } else { 2.0 };
            (double * (re * decay + im * turn) / size, double * (im * decay - re * turn) / size)
        })
        .collect();
    Box::new(move |time, state| {
        let theta = TAU * time;
        let sum: f64 = terms
            .iter()
            .enumerate()
            .map(|(k, (re, im))| {
                let (sine, cosine) = (k as f64 * theta).sin_cos();
                re * cosine - im * sine
            })
            .sum();
        let w = q * (-b * theta.sin()).exp() * sum;
        state.copy_from_slice(&[theta.cos(), theta.sin(), w.powf(-1.0 / q)]);
    })
}

/// X14: `x = x1 dn(x1 t/sqrt 2 | m)`, y = x'. By hand from `x'^2 = 2 h + x^2 - x^4/2` on the level curve.
pub fn near_loop(h: f64) -> Curve {
    let root = (1.0 + 4.0 * h).sqrt();
    let largest = (1.0 + root).sqrt();
    let m = 2.0 * root / (1.0 + root);
    // 1 - m without cancellation.
    let complement = -4.0 * h / (1.0 + root).powi(2);
    let elliptic = Elliptic::new(complement);
    Box::new(move |time, state| {
        // dn has the period 2 K.
        let [sn, cn, dn] = elliptic.at(2.0 * elliptic.quarter * (time - time.round()));
        state.copy_from_slice(&[largest * dn, -largest * largest / SQRT_2 * m * sn * cn]);
    })
}

/// Jacobi's functions by the descending means of Gauss (Abramowitz & Stegun 1964, 16.4; Bulirsch 1965, Numer. Math. 7:78).
struct Elliptic {
    means: Vec<(f64, f64)>,
    complement: f64,
    quarter: f64,
}

impl Elliptic {
    /// For the parameter m = 1 - `complement`.
    fn new(complement: f64) -> Self {
        let (mut a, mut b) = (1.0f64, complement.sqrt());
        let mut means = vec![(a, (1.0 - complement).sqrt())];
        while (a - b).abs() > 1e-16 * a && means.len() < 12 {
            let c = 0.5 * (a - b);
            (a, b) = (0.5 * (a + b), (a * b).sqrt());
            means.push((a, c));
        }
        Self { means, complement, quarter: 0.25 * TAU / a }
    }

    /// sn, cn, dn.
    fn at(&self, u: f64) -> [f64; 3] {
        let steps = self.means.len() - 1;
        let mut phi = self.means[steps].0 * u * 2f64.powi(steps as i32);
        for (a, c) in self.means[1..].iter().rev() {
            phi = 0.5 * (phi + (c / a * phi.sin()).asin());
        }
        let (sn, cn) = phi.sin_cos();
        // dn^2 = 1 - m sn^2 = cn^2 + (1 - m) sn^2, the second form without cancellation.
        [sn, cn, (cn * cn + self.complement * sn * sn).sqrt()]
    }
}

/// Van der Pol's cycle by its Taylor series, settled over some periods; `period` is known.
pub fn van_der_pol(mu: f64, period: f64) -> Curve {
    const CHECKPOINTS: usize = 4000;
    // A disturbance decays by exp(-0.63) a period at mu = 0.1, faster beyond: to 1e-17 in 62 periods.
    let periods = if mu < 1.0 { 70 } else { 7 };
    let settled = VanDerPol::new(mu, [2.0, 0.0]).after(f64::from(periods) * period);
    let mut checkpoints = vec![settled];
    for k in 1..CHECKPOINTS {
        checkpoints.push(checkpoints[k - 1].after(period / CHECKPOINTS as f64));
    }
    Box::new(move |time, state| {
        let place = time.rem_euclid(1.0) * CHECKPOINTS as f64;
        let nearest = (place as usize).min(CHECKPOINTS - 1);
        let at = checkpoints[nearest].after((place - nearest as f64) * period / CHECKPOINTS as f64);
        state.copy_from_slice(&at.state);
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Each curve satisfies its equation: difference quotients of fourth order against the rates written by hand.
    fn check(curve: &Curve, period: f64, n: usize, rates: impl Fn(&[f64]) -> Vec<f64>) {
        let at = |time: f64| {
            let mut state = vec![0.0; n];
            curve(time, &mut state);
            state
        };
        // Quotients of fourth order: off by the fourth power of the step in periods times some thousands.
        const STEP: f64 = 2e-4;
        for k in 0..37 {
            let time = k as f64 / 37.0;
            let around = [-2.0, -1.0, 1.0, 2.0].map(|j| at(time + j * STEP));
            for (j, rate) in rates(&at(time)).into_iter().enumerate() {
                let slope =
                    (around[0][j] - 8.0 * around[1][j] + 8.0 * around[2][j] - around[3][j]) / (12.0 * STEP * period);
                assert!((slope - rate).abs() < 1e-8, "state {j} at {time}: {slope} for {rate}");
            }
        }
    }

    #[test]
    fn branched_cycles_satisfy_their_equations() {
        let (mu, a, om) = (0.2, 0.7, 1.5);
        for power in [1, 2] {
            check(&branched(power, (mu, a, om)), TAU / om, 3, |u| {
                let square = u[0] * u[0] + u[1] * u[1];
                let z = u[2] * (mu + a * u[0]) - u[2].powi(power as i32 + 1);
                vec![u[0] * (1.0 - square) - om * u[1], u[1] * (1.0 - square) + om * u[0], z]
            });
        }
    }

    #[test]
    fn level_curves_satisfy_their_equation() {
        for (h, period) in [(-0.2, 4.630_675_304_149_133), (-0.1, 5.236_163_250_510_283)] {
            check(&near_loop(h), period, 2, |u| vec![u[1], u[0] - u[0].powi(3)]);
        }
    }

    #[test]
    fn van_der_pol_satisfies_its_equation() {
        check(&van_der_pol(1.0, 6.663_286_859_323_13), 6.663_286_859_323_13, 2, |u| {
            vec![u[1], (1.0 - u[0] * u[0]) * u[1] - u[0]]
        });
    }
}
