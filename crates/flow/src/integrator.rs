//! Adaptive time integration with dense output, choosing by itself between an explicit and an implicit
//! method.
//!
//! The error of each step, measured per state in units of `absolute_i + relative_i |x_i|` and averaged as
//! root mean square, stays below 1; the next step is `h * safety * error^(-1/q)`, q the order of the
//! estimate. Stiffness is measured, not guessed: a power iteration with the exact Jacobian, carried from
//! step to step, gives the size of its dominant eigenvalue, and h times that size tells which method is
//! limited by accuracy and which by stability (module `stiffness`).

use std::sync::atomic::{AtomicBool, Ordering};

use armilla_model::VectorField;

use crate::error::FlowError;
use crate::explicit::{Explicit, StepFrom};
use crate::implicit::{Attempt, Implicit, NEWTON_LIMIT};
use crate::rates::{Rates, first_not_finite};
use crate::stiffness::{CHECK_EVERY, Stiffness};

/// Errors allowed in a step, per state.
#[derive(Clone, Debug, PartialEq)]
pub struct Tolerance {
    /// Part that does not depend on the size of the state, one per state.
    pub absolute: Vec<f64>,
    /// Part relative to the size of the state, one per state.
    pub relative: Vec<f64>,
}

impl Tolerance {
    /// The same numbers for each of `n` states.
    pub fn uniform(n: usize, relative: f64, absolute: f64) -> Self {
        Self { absolute: vec![absolute; n], relative: vec![relative; n] }
    }
}

/// What an integration is stopped by.
#[derive(Clone, Copy, Debug)]
pub struct Limits<'a> {
    /// Steps allowed, rejected ones included.
    pub steps: usize,
    /// Set it from anywhere to stop the integration at the next step.
    pub abort: &'a AtomicBool,
    /// A state larger than this ends the integration as divergent.
    pub bound: f64,
}

/// The method of a step.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Method {
    /// Dormand–Prince, order 8.
    Explicit,
    /// Radau IIA, order 9.
    Implicit,
}

/// What an integration has cost so far.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Stats {
    /// Steps accepted.
    pub accepted: usize,
    /// Steps tried and rejected.
    pub rejected: usize,
    /// Accepted steps that were implicit.
    pub implicit: usize,
    /// Evaluations of the rates.
    pub evaluations: usize,
    /// Evaluations of the Jacobian.
    pub jacobians: usize,
}

/// Part of the step predicted by the error estimate that is taken; less wastes work, more is rejected.
const SAFETY: f64 = 0.9;
/// Largest growth and largest shrinking of the step from one to the next.
const GROWTH: f64 = 6.0;
const SHRINKING: f64 = 0.2;
/// An implicit step that took k iterations shortens the next one by b/(b - 1 + k) with this b, as in the program
/// of the method (Hairer & Wanner, Solving Ordinary Differential Equations II, IV.8).
const NEWTON_BASE: f64 = (2 * NEWTON_LIMIT + 1) as f64;
/// Orders in h of the two error estimates.
const EXPLICIT_ORDER: f64 = 8.0;
const IMPLICIT_ORDER: f64 = 6.0;

/// Integrates one field at fixed parameters, step by step.
pub struct Integrator<'a> {
    pub(crate) rates: Rates<'a>,
    tolerance: Tolerance,
    limits: Limits<'a>,
    explicit: Explicit,
    implicit: Option<Box<Implicit>>,
    /// A second workspace of the method, for landing inside the last step.
    lander: Explicit,
    implicit_lander: Option<Box<Implicit>>,
    next_method: Method,
    /// Method of the last step accepted, whose dense output stands.
    method: Method,
    stiffness: Stiffness,
    time: f64,
    state: Vec<f64>,
    slope: Vec<f64>,
    previous_time: f64,
    previous_state: Vec<f64>,
    previous_slope: Vec<f64>,
    step: f64,
    /// No step is longer.
    longest: f64,
    /// At most 1, smaller where Newton's iteration was slow: the next step is shortened by it.
    newton_speed: f64,
    /// Whether the last Jacobian evaluated is that at the state reached.
    has_fresh_jacobian: bool,
    end: Vec<f64>,
    end_slope: Vec<f64>,
    weights: Vec<f64>,
    stats: Stats,
}

impl<'a> Integrator<'a> {
    /// An integrator standing at `time`, `state`.
    ///
    /// # Errors
    /// Wrong lengths, a tolerance that is not positive, rates that are not finite there.
    pub fn new(
        field: &dyn VectorField,
        parameters: &'a [f64],
        start: (f64, &[f64]),
        tolerance: Tolerance,
        limits: Limits<'a>,
    ) -> Result<Self, FlowError> {
        let rates = Rates::new(field, parameters)?;
        let n = rates.n();
        check_length("states", start.1.len(), n)?;
        check_tolerance(&tolerance, n)?;
        let zeros = vec![0.0; n];
        let mut made = Self {
            rates,
            tolerance,
            limits,
            explicit: Explicit::new(n),
            implicit: None,
            lander: Explicit::new(n),
            implicit_lander: None,
            next_method: Method::Explicit,
            method: Method::Explicit,
            stiffness: Stiffness::new(n),
            time: start.0,
            state: start.1.to_vec(),
            slope: zeros.clone(),
            previous_time: start.0,
            previous_state: start.1.to_vec(),
            previous_slope: zeros.clone(),
            step: 0.0,
            longest: f64::INFINITY,
            newton_speed: 1.0,
            has_fresh_jacobian: false,
            end: zeros.clone(),
            end_slope: zeros.clone(),
            weights: zeros,
            stats: Stats::default(),
        };
        made.restart(start.0, start.1)?;
        Ok(made)
    }

    /// Puts the integrator at another time and state; the method and the counts are kept.
    ///
    /// # Errors
    /// Rates that are not finite there.
    pub fn restart(&mut self, time: f64, state: &[f64]) -> Result<(), FlowError> {
        self.time = time;
        self.state.copy_from_slice(state);
        self.previous_time = time;
        self.previous_state.copy_from_slice(state);
        self.rates.at(time, &self.state, &mut self.slope);
        if let Some(state_index) = first_not_finite(&self.slope).or(first_not_finite(&self.state)) {
            return Err(FlowError::NotFinite { state_index, time, state: state.to_vec() });
        }
        if let Some(implicit) = &mut self.implicit {
            implicit.forget();
        }
        self.step = self.first_step();
        Ok(())
    }

    /// Errors allowed from now on.
    ///
    /// # Errors
    /// Wrong lengths or a tolerance that is not positive.
    pub fn set_tolerance(&mut self, tolerance: Tolerance) -> Result<(), FlowError> {
        check_tolerance(&tolerance, self.rates.n())?;
        self.tolerance = tolerance;
        Ok(())
    }

    /// Longest step from now on: what a motion at rest cannot tell, the times at which a forcing acts.
    pub fn set_longest_step(&mut self, longest: f64) {
        self.longest = longest;
    }

    /// Time reached.
    pub fn time(&self) -> f64 {
        self.time
    }

    /// State reached.
    pub fn state(&self) -> &[f64] {
        &self.state
    }

    /// Rates at the state reached.
    pub fn slope(&self) -> &[f64] {
        &self.slope
    }

    /// Time at the beginning of the last step.
    pub fn previous_time(&self) -> f64 {
        self.previous_time
    }

    /// State at the beginning of the last step.
    pub fn previous_state(&self) -> &[f64] {
        &self.previous_state
    }

    /// Method of the last step.
    pub fn method(&self) -> Method {
        self.method
    }

    /// Whether the last step has left the Jacobian at the state reached; landing inside the step overwrites it.
    pub(crate) fn has_fresh_jacobian(&self) -> bool {
        self.has_fresh_jacobian
    }

    /// Counts so far.
    pub fn stats(&self) -> Stats {
        Stats { evaluations: self.rates.evaluations, jacobians: self.rates.jacobians, ..self.stats }
    }

    /// State at the fraction `theta` in [0, 1] of the last step, from its dense output.
    pub fn dense(&self, theta: f64, out: &mut [f64]) {
        match (&self.implicit, self.method) {
            (Some(implicit), Method::Implicit) => implicit.dense(theta, out),
            _ => self.explicit.dense(theta, out),
        }
    }

    /// State at the fraction `theta` of the last step by a shorter step of the same method, which is as
    /// accurate as the step itself (the dense output is of lower order).
    pub fn land(&mut self, theta: f64, out: &mut [f64]) {
        let from = StepFrom {
            time: self.previous_time,
            step: theta * (self.time - self.previous_time),
            state: &self.previous_state,
            slope: &self.previous_slope,
        };
        if theta == 0.0 {
            out.copy_from_slice(&self.previous_state);
            return;
        }
        if self.method == Method::Explicit {
            self.lander.advance(&mut self.rates, from, out);
            return;
        }
        let n = self.state.len();
        let lander = self.implicit_lander.get_or_insert_with(|| Box::new(Implicit::new(n)));
        lander.forget();
        self.rates.linearise(from.time, from.state);
        if lander.advance(&mut self.rates, from, &self.weights, out) == Attempt::NoConvergence {
            // A shorter step than one that converged: its own collocation polynomial is what is left.
            self.dense(theta, out);
        }
    }

    /// Makes one step of the length that the tolerance allows.
    ///
    /// # Errors
    /// Every variant of [`FlowError`] that happens on the way; the integrator then still stands at the
    /// last good state.
    pub fn advance(&mut self) -> Result<(), FlowError> {
        let mut shrink_only = false;
        loop {
            self.check_limits()?;
            self.step = self.step.min(self.longest);
            let (error, order) = self.attempt();
            let factor = (SAFETY * self.newton_speed * error.powf(-1.0 / order)).clamp(SHRINKING, GROWTH);
            if error <= 1.0 {
                self.accept(if shrink_only { factor.min(1.0) } else { factor });
                return self.check_bound();
            }
            self.stats.rejected += 1;
            shrink_only = true;
            // An error that is no number (rates not finite somewhere in the step) shrinks most.
            self.step *= if error.is_finite() { factor.min(SAFETY) } else { SHRINKING };
            self.check_step()?;
        }
    }

    fn check_limits(&self) -> Result<(), FlowError> {
        if self.limits.abort.load(Ordering::Relaxed) {
            return Err(FlowError::Aborted { time: self.time });
        }
        let steps = self.limits.steps;
        if self.stats.accepted + self.stats.rejected >= steps {
            return Err(FlowError::Budget { steps, time: self.time, state: self.state.clone() });
        }
        Ok(())
    }

    fn check_step(&mut self) -> Result<(), FlowError> {
        // A step of some units in the last place of the time no longer moves it reliably.
        const PLACES: f64 = 16.0;
        // Where time stands near zero, steps below the smallest normal number are none.
        let least = (PLACES * f64::EPSILON * self.time.abs()).max(f64::MIN_POSITIVE);
        if self.step.abs() >= least {
            return Ok(());
        }
        let (time, state) = (self.time, self.state.clone());
        match first_not_finite(&self.end_slope) {
            Some(state_index) => Err(FlowError::NotFinite { state_index, time, state }),
            None => Err(FlowError::StepTooSmall { step: self.step, time, state }),
        }
    }

    fn check_bound(&self) -> Result<(), FlowError> {
        match self.state.iter().position(|value| value.abs() > self.limits.bound) {
            Some(state_index) => Err(FlowError::Diverges { state_index, time: self.time, state: self.state.clone() }),
            None => Ok(()),
        }
    }

    /// Tries one step; its error and the order of the estimate. Not finite where the step failed.
    fn attempt(&mut self) -> (f64, f64) {
        self.newton_speed = 1.0;
        for (i, weight) in self.weights.iter_mut().enumerate() {
            *weight = self.tolerance.absolute[i] + self.tolerance.relative[i] * self.state[i].abs();
        }
        let from = StepFrom { time: self.time, step: self.step, state: &self.state, slope: &self.slope };
        let (error, order) = match self.next_method {
            Method::Explicit => {
                self.explicit.advance(&mut self.rates, from, &mut self.end);
                (self.explicit.error(self.step, &self.weights), EXPLICIT_ORDER)
            }
            Method::Implicit => {
                let n = self.state.len();
                let implicit = self.implicit.get_or_insert_with(|| Box::new(Implicit::new(n)));
                self.rates.linearise(self.time, &self.state);
                match implicit.advance(&mut self.rates, from, &self.weights, &mut self.end) {
                    Attempt::Done { error, iterations } => {
                        self.newton_speed = NEWTON_BASE / (NEWTON_BASE - 1.0 + iterations as f64);
                        (error, IMPLICIT_ORDER)
                    }
                    Attempt::NoConvergence => (f64::INFINITY, IMPLICIT_ORDER),
                }
            }
        };
        self.rates.at(self.time + self.step, &self.end, &mut self.end_slope);
        let finite = first_not_finite(&self.end_slope).is_none() && first_not_finite(&self.end).is_none();
        (if finite && !error.is_nan() { error } else { f64::INFINITY }, order)
    }

    /// Takes the step just tried, prepares its dense output and the next step.
    fn accept(&mut self, factor: f64) {
        let from = StepFrom { time: self.time, step: self.step, state: &self.state, slope: &self.slope };
        if self.next_method == Method::Explicit {
            self.explicit.prepare_dense(&mut self.rates, from, &self.end, &self.end_slope);
        }
        self.stats.accepted += 1;
        self.stats.implicit += usize::from(self.next_method == Method::Implicit);
        self.method = self.next_method;
        self.previous_time = self.time;
        self.time += self.step;
        std::mem::swap(&mut self.previous_state, &mut self.state);
        std::mem::swap(&mut self.previous_slope, &mut self.slope);
        self.state.copy_from_slice(&self.end);
        self.slope.copy_from_slice(&self.end_slope);
        let due = self.next_method == Method::Implicit || self.stats.accepted.is_multiple_of(CHECK_EVERY);
        let taken = self.step;
        self.step *= factor;
        self.has_fresh_jacobian = due;
        if due {
            self.rates.linearise(self.time, &self.state);
            self.stiffness.measure(&self.rates, taken);
            self.choose_method();
        }
    }

    fn choose_method(&mut self) {
        let next = self.stiffness.choice(self.next_method);
        if next != self.next_method {
            self.next_method = next;
            if let Some(implicit) = &mut self.implicit {
                implicit.forget();
            }
        }
    }

    /// A first step from the sizes of the rates and of their change along an Euler step
    /// (Hairer, Nørsett & Wanner 1993, II.4), for order 8.
    fn first_step(&mut self) -> f64 {
        let n = self.state.len() as f64;
        for (i, weight) in self.weights.iter_mut().enumerate() {
            *weight = self.tolerance.absolute[i] + self.tolerance.relative[i] * self.state[i].abs();
        }
        let size = |values: &[f64], weights: &[f64]| {
            (values.iter().zip(weights).map(|(v, w)| (v / w).powi(2)).sum::<f64>() / n).sqrt()
        };
        let (state_size, slope_size) = (size(&self.state, &self.weights), size(&self.slope, &self.weights));
        // A state or rates of no size say nothing of the time scale; the Euler step then finds it.
        const SMALL: f64 = 1e-5;
        let trial = if state_size < SMALL || slope_size < SMALL { 1e-6 } else { 0.01 * state_size / slope_size };
        for (i, end) in self.end.iter_mut().enumerate() {
            *end = self.state[i] + trial * self.slope[i];
        }
        self.rates.at(self.time + trial, &self.end, &mut self.end_slope);
        let change: f64 =
            (0..self.state.len()).map(|i| ((self.end_slope[i] - self.slope[i]) / self.weights[i]).powi(2)).sum::<f64>();
        let curvature = (change / n).sqrt() / trial;
        let largest = slope_size.max(curvature);
        let by_order =
            if largest > 1e-15 && largest.is_finite() { (0.01 / largest).powf(1.0 / EXPLICIT_ORDER) } else { trial };
        (100.0 * trial).min(by_order)
    }
}

pub(crate) fn check_length(what: &'static str, found: usize, wanted: usize) -> Result<(), FlowError> {
    if found == wanted { Ok(()) } else { Err(FlowError::Length { what, found, wanted }) }
}

fn check_tolerance(tolerance: &Tolerance, n: usize) -> Result<(), FlowError> {
    check_length("absolute tolerances", tolerance.absolute.len(), n)?;
    check_length("relative tolerances", tolerance.relative.len(), n)?;
    let bad = |value: &&f64| !(value.is_finite() && **value >= 0.0);
    let positive = tolerance.absolute.iter().find(|value| !(value.is_finite() && **value > 0.0));
    match positive.or(tolerance.relative.iter().find(bad)) {
        Some(&value) => Err(FlowError::Setting { name: "a tolerance", value, allowed: "finite and positive" }),
        None => Ok(()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::test_models::{rotation, van_der_pol};

    static RUNNING: AtomicBool = AtomicBool::new(false);

    fn limits() -> Limits<'static> {
        Limits { steps: 1_000_000, abort: &RUNNING, bound: 1e12 }
    }

    fn to_time(integrator: &mut Integrator<'_>, end: f64) -> Vec<f64> {
        while integrator.time() < end {
            integrator.advance().expect("nothing stops it");
        }
        let theta = (end - integrator.previous_time()) / (integrator.time() - integrator.previous_time());
        let mut out = integrator.state().to_vec();
        integrator.land(theta, &mut out);
        out
    }

    /// Exact solution (cos t, sin t) after ten turns, at a tolerance of 1e-12 a step.
    #[test]
    fn ten_turns_of_a_rotation() {
        let field = rotation(1.0);
        let mut integrator =
            Integrator::new(&field, &[1.0], (0.0, &[1.0, 0.0]), Tolerance::uniform(2, 1e-12, 1e-12), limits()).unwrap();
        let end = to_time(&mut integrator, 20.0 * std::f64::consts::PI);
        assert!((end[0] - 1.0).abs() < 1e-10 && end[1].abs() < 1e-10, "{end:?} {:?}", integrator.stats());
        assert_eq!(integrator.stats().implicit, 0);
    }

    /// van der Pol mu = 1000 for half a period: the stiff stretch is crossed implicitly, in few steps, and
    /// the state at t = 500 does not depend on the tolerance. On the slow stretch ln x - x^2/2 = -(t - t0)/mu
    /// to leading order (exact: singular perturbation), so x(500) from x = 2 is near the root of
    /// ln x - x^2/2 = ln 2 - 2 + 0.5... checked by bisection to 1e-5 (next order is mu^-2).
    #[test]
    fn a_stiff_stretch_is_crossed_implicitly() {
        let field = van_der_pol();
        let run = |tolerance: f64| {
            let start: (f64, &[f64]) = (0.0, &[2.0, 0.0]);
            let mut integrator =
                Integrator::new(&field, &[1000.0], start, Tolerance::uniform(2, tolerance, tolerance * 1e-3), limits())
                    .unwrap();
            (to_time(&mut integrator, 500.0), integrator.stats())
        };
        let (fine, stats) = run(1e-11);
        assert!(stats.implicit > 20 && stats.accepted < 2000, "{stats:?}");
        let (coarse, _) = run(1e-8);
        assert!((fine[0] - coarse[0]).abs() < 1e-6, "{fine:?} {coarse:?}");
        let value = |x: f64| x.ln() - 0.5 * x * x - (2f64.ln() - 2.0 + 0.5);
        let (mut low, mut high) = (1.0, 2.0);
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if value(middle) > 0.0 { low = middle } else { high = middle }
        }
        assert!((fine[0] - low).abs() < 1e-5, "{fine:?} {low}");
    }

    /// x' = x^2 from 1 blows up at t = 1 exactly.
    #[test]
    fn a_blow_up_is_an_error_with_its_time() {
        let field = crate::test_models::TestField::new(1, 0, |_, x, _, f, j| {
            f[0] = x[0] * x[0];
            j[0] = 2.0 * x[0];
        });
        let mut integrator =
            Integrator::new(&field, &[], (0.0, &[1.0]), Tolerance::uniform(1, 1e-10, 1e-10), limits()).unwrap();
        let error = loop {
            if let Err(error) = integrator.advance() {
                break error;
            }
        };
        let (FlowError::Diverges { time, .. } | FlowError::StepTooSmall { time, .. }) = error else {
            panic!("{error}")
        };
        assert!((time - 1.0).abs() < 1e-6, "{error}");
    }

    /// sqrt(1 - t) ends at t = 1; the rate is no number beyond.
    #[test]
    fn leaving_the_domain_of_a_formula_is_said_so() {
        let field = crate::test_models::TestField::new(1, 0, |t, _, _, f, j| {
            f[0] = (1.0 - t).sqrt();
            j[0] = 0.0;
        });
        let mut integrator =
            Integrator::new(&field, &[], (0.0, &[0.0]), Tolerance::uniform(1, 1e-10, 1e-10), limits()).unwrap();
        let error = loop {
            if let Err(error) = integrator.advance() {
                break error;
            }
        };
        assert!(matches!(error, FlowError::NotFinite { state_index: 0, .. }), "{error}");
    }

    #[test]
    fn limits_and_wishes_to_stop_are_kept() {
        let field = rotation(1.0);
        let stop = AtomicBool::new(false);
        let limits = Limits { steps: 7, abort: &stop, bound: 1e12 };
        let tolerance = Tolerance::uniform(2, 1e-12, 1e-12);
        let mut integrator = Integrator::new(&field, &[1.0], (0.0, &[1.0, 0.0]), tolerance, limits).unwrap();
        let error = (0..8).find_map(|_| integrator.advance().err()).expect("seven steps are allowed");
        assert!(matches!(error, FlowError::Budget { steps: 7, .. }), "{error}");
        stop.store(true, Ordering::Relaxed);
        assert!(matches!(integrator.advance(), Err(FlowError::Aborted { .. })));
    }
}
