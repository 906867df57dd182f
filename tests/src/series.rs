//! Independent computations: a Taylor series integrator, and a quadrature along a cycle.

use armilla_record::Profile;

/// The van der Pol oscillator `x' = y, y' = mu (1 - x^2) y - x` integrated by its Taylor series.
///
/// With `w = x^2` and `z = (1 - w) y` the coefficients obey `(k+1) x_(k+1) = y_k`, `(k+1) y_(k+1) = mu z_k - x_k`,
/// products by the Cauchy rule (Moore 1966, Interval Analysis, ch. 11).
#[derive(Clone, Copy, Debug)]
pub struct VanDerPol {
    /// The parameter.
    pub mu: f64,
    /// The state.
    pub state: [f64; 2],
    /// What the state lacks by rounding: on the slow parts, where x creeps, a unit in the last place is a long time.
    rest: [f64; 2],
}

/// Terms of the series: with steps of [`STEP`], [`SHARE`] of the fast time, the last is far below roundoff.
const TERMS: usize = 30;
/// Longest step.
const STEP: f64 = 0.02;
/// Share of 1/mu, the time in which a large mu makes the oscillator jump, that a step is at most.
const SHARE: f64 = 0.1;

impl VanDerPol {
    /// At a state.
    pub fn new(mu: f64, state: [f64; 2]) -> Self {
        Self { mu, state, rest: [0.0; 2] }
    }

    /// The state after a time of either sign.
    #[must_use]
    pub fn after(self, time: f64) -> Self {
        let steps = (time.abs() / STEP.min(SHARE / self.mu)).ceil().max(1.0);
        (0..steps as usize).fold(self, |at, _| at.step(time / steps))
    }

    fn step(self, h: f64) -> Self {
        let (mut x, mut y, mut w) = ([0.0; TERMS + 1], [0.0; TERMS + 1], [0.0; TERMS]);
        [x[0], y[0]] = self.state;
        for k in 0..TERMS {
            w[k] = (0..=k).map(|i| x[i] * x[k - i]).sum();
            let z = y[k] - (0..=k).map(|i| w[i] * y[k - i]).sum::<f64>();
            let next = (k + 1) as f64;
            (x[k + 1], y[k + 1]) = (y[k] / next, (self.mu * z - x[k]) / next);
        }
        let increment = |c: &[f64]| c[1..].iter().rev().fold(0.0, |sum, c| (sum + c) * h);
        let (x, x_rest) = added(self.state[0], self.rest[0] + increment(&x));
        let (y, y_rest) = added(self.state[1], self.rest[1] + increment(&y));
        Self { state: [x, y], rest: [x_rest, y_rest], ..self }
    }
}

/// A sum and its rounding (Knuth 1969, The Art of Computer Programming 2, 4.2.2).
fn added(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    let part = sum - a;
    (sum, (a - (sum - part)) + (b - part))
}

/// Integral of `divergence(state)` over one period by the trapezoidal rule, which converges faster than any power on
/// a smooth periodic function (Trefethen & Weideman 2014, SIAM Rev. 56:385).
pub fn divergence_integral(profile: &Profile, divergence: impl Fn(&[f64]) -> f64) -> f64 {
    const SAMPLES: usize = 20_000;
    let mut evaluator = profile.evaluator();
    let mut state = vec![0.0; profile.n_states];
    let sum: f64 = (0..SAMPLES)
        .map(|k| {
            evaluator.at(k as f64 / SAMPLES as f64, &mut state);
            divergence(&state)
        })
        .sum();
    sum * profile.period / SAMPLES as f64
}
