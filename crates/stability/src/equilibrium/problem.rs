//! The equilibrium behind the seam of `follow`.
//!
//! `f(x, p) = 0`, unknowns the n states and the parameter. Corrections and tangents come from the matrix `[f_x, f_p; row]`,
//! which is regular wherever the branch is (Keller 1977, in Applications of Bifurcation Theory, 359).

use std::sync::Arc;

use armilla_collocation::Fault;
use armilla_follow::{Closing, Corrected, Failure, Orientation, Problem, Watch, Watched};
use armilla_linalg::{Eigenvalues, eigenvalues};
use armilla_model::VectorField;
use armilla_record::{Eigenvalue, MeshReason, Point, Reached};

use super::local::{Local, TermSizes};
use super::null::BorderSizes;
use super::point::{EquilibriumPoint, EquilibriumTangent, RestMetric};
use super::systems::{Border, Systems};

/// Index of the fold function in the watch list: the parameter's component of the tangent.
pub const WATCH_TURN: usize = 0;
/// Index of the branching function: `Prod lambda` over the parameter's component, by its sign and the nearest eigenvalue.
pub const WATCH_CROSSING: usize = 1;

/// Real part of an eigenvalue, over the norm of the balanced Jacobian, up to which its side of the imaginary axis is
/// roundoff's: gyroscopic pairs of a hundred states stay within it, and no event moves by more than roundoff through it.
pub const SIDE: f64 = 1e-11;

/// The model as the equilibrium problem needs it.
#[derive(Clone)]
pub struct EquilibriumSpec {
    /// The rates.
    pub field: Arc<dyn VectorField>,
    /// Values of all parameters.
    pub parameters: Vec<f64>,
    /// Index of the followed parameter.
    pub free: usize,
    /// Sizes the states are known to have, absolute, 0 where unknown: n numbers.
    pub typical: Vec<f64>,
    /// Size of the followed parameter in the metric: the width of the asked range.
    pub parameter_scale: f64,
}

/// Iterations of Newton's method; quadratic convergence needs far fewer.
const ITERATIONS: usize = 20;
/// Scaled correction below which the iteration has converged.
const CONVERGED: f64 = 1e-14;
/// Scaled correction below which one that no longer shrinks is roundoff.
const STALLED: f64 = 1e-8;
/// Share of the last correction that quadratic convergence leaves less of.
const SHRINKING: f64 = 0.25;
/// Contraction of two corrections beyond which the iteration is given up.
const GIVE_UP: f64 = 4.0;
/// A scale off by more than this factor below the size of its state is renewed.
const OUT_OF_SCALE: f64 = 1.5;
/// Parameter component of a unit tangent below which its sign is roundoff.
const TURNING_NOISE: f64 = 1e-11;
/// A size below this share of the largest tells nothing of a state whose usual size is not known.
const VANISHED: f64 = 1e-9;
/// Spectra that are remembered: a stride and its halves ask several times.
const REMEMBERED: usize = 6;
/// Units in the last place of the terms of a rate.
const UNITS: f64 = 4.0;

/// Equilibria of one model in one parameter.
pub struct EquilibriumProblem {
    pub(crate) spec: EquilibriumSpec,
    pub(crate) metric: RestMetric,
    pub(crate) local: Local,
    pub(crate) terms: TermSizes,
    pub(crate) systems: Systems,
    spectra: Vec<(EquilibriumPoint, Arc<Eigenvalues>)>,
    fault: bool,
}

/// Where Newton's method went.
pub(crate) struct Course {
    /// Scaled sizes of the corrections.
    pub corrections: Vec<f64>,
}

impl Course {
    /// Whether the iteration ends with a correction of this size; none where it goes on.
    pub(crate) fn judge(&mut self, size: f64) -> Option<bool> {
        let before = self.corrections.last().copied();
        self.corrections.push(size);
        match before {
            _ if !size.is_finite() => Some(false),
            _ if size <= CONVERGED => Some(true),
            Some(before) if size <= STALLED && size > SHRINKING * before => Some(true),
            Some(before) if size > GIVE_UP * before && self.corrections.len() > 2 => Some(false),
            _ => None,
        }
    }

    /// What the last correction leaves: next to nothing where they went on falling, all of it where they had come to stand.
    pub(crate) fn left(&self) -> f64 {
        match self.corrections[..] {
            [.., before, last] if before > 0.0 => last * (last / before).powi(2).min(1.0),
            _ => 0.0,
        }
    }
}

impl EquilibriumProblem {
    /// A problem without a point yet; the metric is that of `typical`, 1 where nothing is known.
    pub(crate) fn new(spec: EquilibriumSpec) -> Self {
        let local = Local::new(&spec.field, &spec.parameters, spec.free);
        let systems = Systems::new(spec.field.n_states(), &local.entries);
        let scales = spec.typical.iter().map(|size| if *size > 0.0 { *size } else { 1.0 }).collect();
        Self {
            metric: RestMetric { scales, parameter_scale: spec.parameter_scale },
            terms: TermSizes::new(&spec.field, &spec.parameters, spec.free),
            local,
            systems,
            spectra: Vec::new(),
            fault: false,
            spec,
        }
    }

    /// Sets the metric to the sizes of the states at a point: their values, else what they are known for, else what the
    /// parameter moves them by over its range, else 1.
    pub(crate) fn measure(&mut self, point: &EquilibriumPoint) {
        let known: Vec<f64> = point.state.iter().zip(&self.spec.typical).map(|(x, t)| x.abs().max(*t)).collect();
        let largest = known.iter().copied().fold(0.0, f64::max);
        let tells = |size: f64, typical: f64| size > 0.0 && (typical > 0.0 || size > VANISHED * largest);
        let slope = self.tangent(point, Orientation::Parameter(1.0)).ok();
        let moved = |k: usize| {
            let tangent = slope.as_ref().filter(|tangent| tangent.parameter > 0.0);
            let moved = tangent.map_or(0.0, |t| (t.state[k] / t.parameter * self.spec.parameter_scale).abs());
            if moved.is_finite() && moved > VANISHED * largest && moved > 0.0 { moved } else { 1.0 }
        };
        let sizes = known.iter().zip(&self.spec.typical).enumerate();
        self.metric.scales = sizes.map(|(k, (size, t))| if tells(*size, *t) { *size } else { moved(k) }).collect();
    }

    /// Sets the metric to that of a point, forgetting what was seen elsewhere on the branch: before a second walk from the
    /// same start. Where the parameter does not close the equations, as at a branching, the metric stays.
    pub fn anchor(&mut self, point: &EquilibriumPoint) {
        if self.tangent(point, Orientation::Parameter(1.0)).is_ok() {
            self.measure(point);
        }
    }

    /// Number of states.
    pub fn n_states(&self) -> usize {
        self.spec.typical.len()
    }

    /// Sizes of the states in the metric.
    pub fn sizes(&self) -> &[f64] {
        &self.metric.scales
    }

    /// Size of the followed parameter in the metric.
    pub fn parameter_scale(&self) -> f64 {
        self.metric.parameter_scale
    }

    /// Whether the eigenvalues asked for last could not be computed.
    pub fn has_no_spectrum(&self) -> bool {
        self.fault
    }

    /// Eigenvalues at a point.
    ///
    /// # Errors
    /// [`Failure`] where a rate is not finite or the bounded iteration does not end.
    pub fn spectrum(&mut self, point: &EquilibriumPoint) -> Result<Arc<Eigenvalues>, Failure<Fault>> {
        if let Some((_, known)) = self.spectra.iter().find(|(at, _)| at == point) {
            return Ok(known.clone());
        }
        let n = point.state.len();
        self.local.linearise(point).map_err(Failure::Outside)?;
        let mut dense = vec![0.0; n * n];
        for ((row, column), value) in self.local.entries.iter().zip(&self.local.jacobian) {
            dense[row * n + column] += value;
        }
        let found = eigenvalues(n, &dense);
        self.fault = found.is_err();
        let found = Arc::new(found.map_err(|_| Failure::NotConverged)?);
        if self.spectra.len() >= REMEMBERED {
            self.spectra.remove(0);
        }
        self.spectra.push((point.clone(), found.clone()));
        Ok(found)
    }

    /// Number of eigenvalues on the imaginary axis, as far as rounding tells; none where they could not be computed.
    pub fn neutral_count(&mut self, point: &EquilibriumPoint) -> Option<usize> {
        let spectrum = self.spectrum(point).ok()?;
        Some(spectrum.values.iter().filter(|value| is_neutral(value.re, spectrum.norm)).count())
    }

    /// Sizes for borders at the last point linearised.
    pub(crate) fn border_sizes(&self) -> BorderSizes {
        BorderSizes::new(&self.metric.scales, self.norm())
    }

    /// Largest row sum of the Jacobian in the units of the metric, at the last point linearised.
    pub(crate) fn norm(&self) -> f64 {
        let scales = &self.metric.scales;
        let mut rows = vec![0.0; scales.len()];
        for ((row, column), value) in self.local.entries.iter().zip(&self.local.jacobian) {
            rows[*row] += (value * scales[*column] / scales[*row]).abs();
        }
        rows.into_iter().fold(0.0, f64::max)
    }

    /// Newton's method on `f = 0` and `row (x, p) = target`, in place.
    pub(crate) fn newton(
        &mut self,
        point: &mut EquilibriumPoint,
        row: &EquilibriumTangent,
        target: f64,
    ) -> Result<Course, Failure<Fault>> {
        let n = point.state.len();
        let mut course = Course { corrections: Vec::new() };
        let mut step = vec![0.0; n + 1];
        for _ in 0..ITERATIONS {
            self.local.linearise(point).map_err(Failure::Outside)?;
            step[..n].copy_from_slice(&self.local.rates);
            step[n] = row.product(&point.state, point.parameter) - target;
            let border = Border { column: &self.local.column, row: &row.state, corner: row.parameter };
            let system = self.systems.single(&self.local.jacobian, 0.0, &border).ok_or(Failure::NotConverged)?;
            system.solve(&mut step);
            point.state.iter_mut().zip(&step).for_each(|(x, d)| *x -= d);
            point.parameter -= step[n];
            match course.judge(self.metric.largest(&step[..n], step[n])) {
                Some(true) => return Ok(course),
                Some(false) => return Err(Failure::NotConverged),
                None => {}
            }
        }
        Err(Failure::NotConverged)
    }

    /// Corrects with the parameter held.
    pub(crate) fn correct_at(&mut self, point: &mut EquilibriumPoint, value: f64) -> Result<Course, Failure<Fault>> {
        let row = EquilibriumTangent { state: vec![0.0; point.state.len()], parameter: 1.0 };
        let course = self.newton(point, &row, value)?;
        // The row meets the value up to rounding; the user asked for the value.
        point.parameter = value;
        Ok(course)
    }

    /// Estimated error of the states of a corrected point, largest over the size of its state: what rounding of the terms
    /// of the rates moves them by along the branch's own normal.
    fn state_error(&mut self, point: &EquilibriumPoint, tangent: &EquilibriumTangent) -> f64 {
        let n = point.state.len();
        if self.local.linearise(point).is_err() {
            return f64::INFINITY;
        }
        let sizes = self.terms.of_rates(&self.local, point);
        let row = self.metric.functional(tangent);
        let border = Border { column: &self.local.column, row: &row.state, corner: row.parameter };
        let Some(system) = self.systems.single(&self.local.jacobian, 0.0, &border) else { return f64::INFINITY };
        let mut moved = vec![0.0; n + 1];
        let rounded = |(k, size): (usize, &f64)| any_sign(k) * UNITS * f64::EPSILON * size;
        moved.iter_mut().zip(sizes.iter().enumerate().map(rounded)).for_each(|(m, size)| *m = size);
        system.solve(&mut moved);
        self.metric.largest(&moved[..n], moved[n]) + UNITS * f64::EPSILON
    }

    /// A point as a row of the branch table.
    ///
    /// # Errors
    /// [`Failure`] where the eigenvalues fail.
    pub fn describe(&mut self, point: &EquilibriumPoint, distance: f64) -> Result<Point, Failure<Fault>> {
        let tangent = self.tangent(point, Orientation::Parameter(1.0));
        let error = match tangent {
            Ok(tangent) => self.state_error(point, &tangent),
            // At a fold the parameter cannot close the tangent; nothing is known of rounding then but that it is finite.
            Err(_) => f64::EPSILON.sqrt(),
        };
        let spectrum = self.spectrum(point)?;
        let trace: f64 = {
            self.local.linearise(point).map_err(Failure::Outside)?;
            let diagonal = self.local.entries.iter().zip(&self.local.jacobian).filter(|((r, c), _)| r == c);
            diagonal.map(|(_, value)| value).sum()
        };
        let sum: f64 = spectrum.values.iter().map(|value| value.re).sum();
        Ok(Point {
            value: point.parameter,
            distance,
            unstable_count: unstable_count(&spectrum),
            liouville_defect: (sum - trace).abs(),
            profile_error: error,
            maxima: point.state.clone(),
            minima: point.state.clone(),
            means: point.state.clone(),
            spreads: vec![0.0; point.state.len()],
            eigenvalues: spectrum.values.iter().map(|value| Eigenvalue { re: value.re, im: value.im }).collect(),
            choice: MeshReason::Unstated,
            reached: Reached::Accuracy,
            ..Point::default()
        })
    }

    /// The unit tangent that `row` is positive on, at the point linearised last.
    fn tangent_by(&mut self, point: &EquilibriumPoint, row: &EquilibriumTangent) -> Option<EquilibriumTangent> {
        let n = point.state.len();
        let border = Border { column: &self.local.column, row: &row.state, corner: row.parameter };
        let system = self.systems.single(&self.local.jacobian, 0.0, &border)?;
        let mut right = vec![0.0; n + 1];
        right[n] = 1.0;
        system.solve(&mut right);
        let tangent = EquilibriumTangent { state: right[..n].to_vec(), parameter: right[n] };
        let tangent = self.metric.normalised(tangent);
        tangent.is_finite().then_some(tangent)
    }
}

/// Signs without a pattern: roundings of different rows are independent.
pub(crate) fn any_sign(k: usize) -> f64 {
    if (k.wrapping_mul(0x9E37_79B9) >> 7) & 1 == 0 { 1.0 } else { -1.0 }
}

/// Whether an eigenvalue stands on the imaginary axis as far as rounding tells.
pub(crate) fn is_neutral(re: f64, norm: f64) -> bool {
    re.abs() <= SIDE * norm
}

/// Number of eigenvalues to the right of the imaginary axis by more than rounding: those of a conservative model stay on it.
pub(crate) fn unstable_count(spectrum: &Eigenvalues) -> usize {
    spectrum.values.iter().filter(|value| value.re > 0.0 && !is_neutral(value.re, spectrum.norm)).count()
}

impl Problem for EquilibriumProblem {
    type Point = EquilibriumPoint;
    type Tangent = EquilibriumTangent;
    type Error = Fault;

    fn advance(&self, point: &EquilibriumPoint, tangent: &EquilibriumTangent, stride: f64) -> EquilibriumPoint {
        point.plus(stride, tangent)
    }

    fn correct(
        &mut self,
        prediction: &EquilibriumPoint,
        closing: Closing<'_, EquilibriumPoint, EquilibriumTangent>,
    ) -> Result<Corrected<EquilibriumPoint>, Failure<Fault>> {
        let mut point = prediction.clone();
        let course = match closing {
            Closing::Parameter(value) => self.correct_at(&mut point, value),
            Closing::Arclength { from, tangent: direction, stride: amount }
            | Closing::Component { from, direction, amount } => {
                let row = self.metric.functional(direction);
                let target = row.product(&from.state, from.parameter) + amount;
                self.newton(&mut point, &row, target)
            }
        }?;
        if let Closing::Arclength { stride, .. } = closing {
            // A correction longer than the step itself does not come from the neighbourhood of the prediction.
            if !(self.distance(&point, prediction) <= stride) {
                return Err(Failure::Jumped);
            }
        }
        let contraction = match course.corrections[..] {
            [first, second, ..] if first > 0.0 => second / first,
            _ => 0.0,
        };
        Ok(Corrected { point, contraction, iterations: course.corrections.len() })
    }

    fn tangent(
        &mut self,
        point: &EquilibriumPoint,
        orientation: Orientation<'_, EquilibriumTangent>,
    ) -> Result<EquilibriumTangent, Failure<Fault>> {
        let row = match orientation {
            Orientation::Along(old) => self.metric.functional(old),
            Orientation::Parameter(sign) => EquilibriumTangent { state: vec![0.0; point.state.len()], parameter: sign },
        };
        self.local.linearise(point).map_err(Failure::Outside)?;
        self.tangent_by(point, &row).ok_or(Failure::NotConverged)
    }

    fn inner(&self, a: &EquilibriumTangent, b: &EquilibriumTangent) -> f64 {
        self.metric.inner(a, b)
    }

    fn distance(&self, a: &EquilibriumPoint, b: &EquilibriumPoint) -> f64 {
        self.metric.length(&a.minus(b))
    }

    fn parameter(&self, point: &EquilibriumPoint) -> f64 {
        point.parameter
    }

    fn watch(&mut self, point: &EquilibriumPoint, tangent: &EquilibriumTangent) -> Result<Watch, Failure<Fault>> {
        let spectrum = self.spectrum(point)?;
        let turn = tangent.parameter / self.metric.parameter_scale;
        let turn = if turn.abs() < TURNING_NOISE { 0.0 } else { turn };
        let real = || spectrum.values.iter().filter(|value| value.im == 0.0).map(|value| value.re);
        let is_neutral = |re: f64| is_neutral(re, spectrum.norm);
        // One that is 0 all along has no sign of its own; the unstable count leaves it out, as those below 0.
        let side = |re: f64| if re > 0.0 && !is_neutral(re) { 1.0 } else { -1.0 };
        // det A = det [A, f_p; t] t_p by Cramer's rule: the sign of the bordered determinant, up to that of the tangent.
        let sign = real().map(side).product::<f64>() * turn.signum();
        let nearest = real().filter(|re| !is_neutral(*re)).map(f64::abs).fold(spectrum.norm, f64::min);
        let value = |value: f64| Watched { value, slope: None };
        let crossing = if turn == 0.0 { 0.0 } else { sign * nearest };
        Ok(Watch { values: vec![value(turn), value(crossing)], unstable_count: unstable_count(&spectrum) })
    }

    fn renew(
        &mut self,
        point: &EquilibriumPoint,
        tangents: &[&EquilibriumTangent],
    ) -> Option<(EquilibriumPoint, Vec<EquilibriumTangent>)> {
        let sizes = point.state.iter().zip(&self.metric.scales);
        if !sizes.clone().any(|(x, scale)| x.abs() > OUT_OF_SCALE * scale) {
            return None;
        }
        self.metric.scales = sizes.map(|(x, scale)| scale.max(x.abs())).collect();
        Some((point.clone(), tangents.iter().map(|tangent| self.metric.normalised((*tangent).clone())).collect()))
    }
}
