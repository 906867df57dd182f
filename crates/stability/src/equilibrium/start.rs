//! From a guess to an equilibrium.
//!
//! Newton's method, damped by the natural monotonicity test: a step is halved until the correction that the next iterate
//! asks for, with the same Jacobian, is shorter (Deuflhard 2004, Newton Methods for Nonlinear Problems, Springer, sec.
//! 3.3). The test does not depend on the units of the rates. Where the iteration comes to stand at a singular Jacobian, the
//! curve of [`super::homotopy`] goes round it.

use armilla_collocation::Fault;

use super::homotopy::lead;
use super::point::EquilibriumPoint;
use super::problem::{EquilibriumProblem, EquilibriumSpec};
use super::systems::Border;

/// Why no equilibrium was found from a guess.
#[derive(Clone, Debug, PartialEq)]
pub enum RestFault {
    /// A rate is not finite at the guess.
    NotFinite {
        /// Index of the state whose rate it is.
        state: usize,
    },
    /// The damped iteration came to stand at these states.
    NotConverged {
        /// The states it stopped at.
        states: Vec<f64>,
        /// Scaled length of the correction that it still asked for.
        correction: f64,
    },
    /// The Jacobian is singular where the iteration stands.
    Singular {
        /// The states it stopped at.
        states: Vec<f64>,
        /// Whether that is an equilibrium: one on a fold or a branching, or not isolated, or degenerate.
        is_at_rest: bool,
    },
}

/// Damped steps allowed.
const STEPS: usize = 200;
/// Least damping: a correction that must be cut further points nowhere.
const LEAST: f64 = 1e-8;
/// Scaled correction from which the undamped method finishes.
const NEAR: f64 = 1e-6;

impl EquilibriumProblem {
    /// The equilibrium that Newton's method finds from `near`, at the parameter value `parameter`.
    ///
    /// # Errors
    /// [`RestFault`].
    pub fn start(spec: EquilibriumSpec, near: &[f64], parameter: f64) -> Result<(Self, EquilibriumPoint), RestFault> {
        let mut problem = Self::new(spec);
        let guess = EquilibriumPoint { state: near.to_vec(), parameter };
        let scales = problem.metric.scales.iter_mut().zip(near).zip(&problem.spec.typical);
        scales.for_each(|((scale, x), typical)| {
            *scale = if *typical > 0.0 { typical.max(x.abs()) } else { scale.max(x.abs()) }
        });
        let mut point = match problem.damped(guess.clone()) {
            Ok(point) => point,
            Err(fault @ RestFault::NotFinite { .. }) => return Err(fault),
            // The damped iteration stands where the Jacobian is singular; the curve goes on through there.
            Err(fault) => match lead(&problem.spec, &guess) {
                Some(state) => EquilibriumPoint { state, parameter },
                None => return Err(fault),
            },
        };
        let near = point.clone();
        if problem.correct_at(&mut point, parameter).is_err() {
            return Err(RestFault::NotConverged { states: near.state, correction: NEAR });
        }
        problem.measure(&point);
        Ok((problem, point))
    }

    fn damped(&mut self, mut point: EquilibriumPoint) -> Result<EquilibriumPoint, RestFault> {
        let n = point.state.len();
        let hold = vec![0.0; n];
        if let Err(Fault::NotFinite { state, .. }) = self.local.linearise(&point) {
            return Err(RestFault::NotFinite { state });
        }
        let mut damping = 1.0f64;
        let mut last = f64::INFINITY;
        for _ in 0..STEPS {
            let stopped = |states: &[f64], correction| RestFault::NotConverged { states: states.to_vec(), correction };
            if self.local.linearise(&point).is_err() {
                return Err(stopped(&point.state, last));
            }
            let (jacobian, mut step) = (self.local.jacobian.clone(), self.local.rates.clone());
            step.push(0.0);
            // With a column of zeros and the parameter held, the matrix is the Jacobian alone.
            let border = Border { column: &hold, row: &hold, corner: 1.0 };
            let solved = self.systems.single(&jacobian, 0.0, &border).map(|system| system.solve(&mut step));
            last = self.metric.largest(&step[..n], 0.0);
            if solved.is_none() || !last.is_finite() {
                return Err(RestFault::Singular { is_at_rest: self.rests(&point), states: point.state });
            }
            if last <= NEAR {
                return Ok(point);
            }
            damping = (2.0 * damping).min(1.0);
            loop {
                let state = point.state.iter().zip(&step).map(|(x, d)| x - damping * d).collect();
                let trial = EquilibriumPoint { state, parameter: point.parameter };
                if self.shortens(&trial, &jacobian, last, damping) {
                    point = trial;
                    break;
                }
                damping *= 0.5;
                if damping < LEAST {
                    return Err(stopped(&point.state, last));
                }
            }
        }
        Err(RestFault::NotConverged { states: point.state, correction: last })
    }

    /// Whether the rates at the point linearised last are rounding of their terms.
    fn rests(&mut self, point: &EquilibriumPoint) -> bool {
        /// Units in the last place of the terms of a rate.
        const UNITS: f64 = 4.0;
        let sizes = self.terms.of_rates(&self.local, point);
        self.local.rates.iter().zip(&sizes).all(|(rate, size)| rate.abs() <= UNITS * f64::EPSILON * size)
    }

    /// Whether the correction asked for at a trial point, by the Jacobian of the point before, is shorter than that before.
    fn shortens(&mut self, trial: &EquilibriumPoint, jacobian: &[f64], last: f64, damping: f64) -> bool {
        let n = trial.state.len();
        if self.local.linearise(trial).is_err() {
            return false;
        }
        let hold = vec![0.0; n];
        let border = Border { column: &hold, row: &hold, corner: 1.0 };
        let mut simplified = self.local.rates.clone();
        simplified.push(0.0);
        let Some(system) = self.systems.single(jacobian, 0.0, &border) else { return false };
        system.solve(&mut simplified);
        self.metric.largest(&simplified[..n], 0.0) <= (1.0 - 0.25 * damping) * last
    }
}
