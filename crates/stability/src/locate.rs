//! Location of an event from a bracket.
//!
//! Newton's method on the minimally augmented system, started from the bracket's secant point; where it fails or
//! leaves the bracket, the bracket is halved along the branch and Newton tried again. The value reported comes from
//! a mesh with every interval halved, its error from the difference (methods as in [`crate::TestFunction`]).

use std::sync::Arc;

use armilla_collocation::{Failure as NewtonFailure, Iterate, LinearClosing, Report, Row, Scalar};
use armilla_follow::{Closing, Failure, Orientation, Problem, Station};

use crate::point::{CyclePoint, CycleTangent};
use crate::problem::CycleProblem;
use crate::test_function::{CriticalKind, NullVectors, TestFunction};

/// A located event.
#[derive(Clone, Debug)]
pub struct Located {
    /// Which multiplier is critical.
    pub kind: CriticalKind,
    /// The critical cycle on the refined mesh.
    pub point: CyclePoint,
    /// Estimated absolute error of the parameter.
    pub error: f64,
    /// Estimated absolute error of the period.
    pub period_error: f64,
    /// Critical vectors on the refined mesh.
    pub vectors: NullVectors,
    /// How Newton's method went from the bracket.
    pub report: Report,
    /// Where between the two stations the event lies, 0 to 1.
    pub share: f64,
    /// Halvings of the bracket before Newton's method converged.
    pub halvings: usize,
}

/// Why an event was not located; the bracket stands for it then.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LocateFault {
    /// Parameter values of the narrowest bracket.
    pub bracket: (f64, f64),
}

/// Halvings of the bracket: 40 take any stride to the shortest.
pub(crate) const HALVINGS: usize = 40;

type CycleStation = Station<CyclePoint, CycleTangent>;

impl CycleProblem {
    /// Locates the event of a kind between two stations where watched value `index` changes sign.
    ///
    /// # Errors
    /// [`LocateFault`] with the narrowest bracket reached.
    pub fn locate(
        &mut self,
        kind: CriticalKind,
        index: usize,
        before: &CycleStation,
        after: &CycleStation,
    ) -> Result<Located, LocateFault> {
        let total = after.distance - before.distance;
        let (mut low, mut high) = (before.clone(), after.clone());
        for halvings in 0..HALVINGS {
            let guess = self.secant_point(index, &low, &high);
            if let Some((point, report)) = self.newton_event(kind, &guess, &low, &high)
                && let Ok((point, error, period_error, vectors)) = self.refine_event(kind, &point)
            {
                let share = self.share(before, &point, total);
                return Ok(Located { kind, point, error, period_error, vectors, report, share, halvings });
            }
            let Some(middle) = self.middle(&low, &high) else { break };
            let same = middle.watch.values[index].value * low.watch.values[index].value > 0.0;
            if same { low = middle } else { high = middle }
        }
        Err(LocateFault { bracket: (low.point.unknowns.parameter, high.point.unknowns.parameter) })
    }

    /// Locates the event of a kind that a station stands on, to within roundoff of its own.
    pub fn locate_at(&mut self, kind: CriticalKind, station: &CycleStation) -> Option<Located> {
        /// Distance from the station within which the event is the one it stands on.
        const ON: f64 = 1e-7;
        let mut point = station.point.clone();
        let report = self.augmented(kind, &mut point).ok()?.0;
        if !(self.distance(&station.point, &point) <= ON) {
            return None;
        }
        let (point, error, period_error, vectors) = self.refine_event(kind, &point).ok()?;
        Some(Located { kind, point, error, period_error, vectors, report, share: 1.0, halvings: 0 })
    }

    pub(crate) fn share(&self, before: &CycleStation, point: &CyclePoint, total: f64) -> f64 {
        if total > 0.0 { (self.distance(&before.point, point) / total).clamp(0.0, 1.0) } else { 0.0 }
    }

    /// Linear interpolation of the stations at the zero of the secant.
    pub(crate) fn secant_point(&self, index: usize, low: &CycleStation, high: &CycleStation) -> CyclePoint {
        let (a, b) = (low.watch.values[index].value, high.watch.values[index].value);
        let share = if a == b { 0.5 } else { (a / (a - b)).clamp(0.05, 0.95) };
        let first = low.point.on_mesh(high.point.degree, &high.point.mesh);
        let mix = |x: f64, y: f64| x + share * (y - x);
        let nodes = first.unknowns.nodes.iter().zip(&high.point.unknowns.nodes).map(|(x, y)| mix(*x, *y)).collect();
        let unknowns = Iterate {
            nodes,
            period: mix(first.unknowns.period, high.point.unknowns.period),
            parameter: mix(first.unknowns.parameter, high.point.unknowns.parameter),
        };
        CyclePoint { unknowns, ..high.point.clone() }
    }

    /// Newton on the augmented system; accepted only between the ends of the bracket.
    fn newton_event(
        &mut self,
        kind: CriticalKind,
        guess: &CyclePoint,
        low: &CycleStation,
        high: &CycleStation,
    ) -> Option<(CyclePoint, Report)> {
        let mut point = guess.clone();
        let report = self.augmented(kind, &mut point).ok()?.0;
        self.is_in_bracket(&point, low, high).then_some((point, report))
    }

    /// Whether a point found by Newton's method is the event that two stations bracket: between the planes through both
    /// normal to their tangents, since a second event beyond one of them may attract Newton's method, and near.
    pub(crate) fn is_in_bracket(&self, point: &CyclePoint, low: &CycleStation, high: &CycleStation) -> bool {
        let length = self.distance(&low.point, &high.point);
        // A chord is shorter than the branch between its ends; twice its length still excludes other branches.
        let near =
            self.distance(&low.point, point) <= 2.0 * length && self.distance(&high.point, point) <= 2.0 * length;
        near && self.lies_between(point, low, high)
    }

    /// Whether a point lies ahead of one station and behind another, so that it is the event they bracket and not a
    /// neighbour of it.
    fn lies_between(&self, point: &CyclePoint, low: &CycleStation, high: &CycleStation) -> bool {
        /// Distances on one mesh are known to this.
        const ROUNDOFF: f64 = 1e-11;
        let ahead = |station: &CycleStation, sign: f64| {
            let from = station.point.on_mesh(point.degree, &point.mesh);
            let tangent = station.tangent.on_mesh(point.degree, &point.mesh);
            let mut step = Row::zero(point.unknowns.nodes.len());
            for ((step, to), from) in step.nodes.iter_mut().zip(&point.unknowns.nodes).zip(&from.unknowns.nodes) {
                *step = to - from;
            }
            step.period = point.unknowns.period - from.unknowns.period;
            step.parameter = point.unknowns.parameter - from.unknowns.parameter;
            let same = station.point.degree == point.degree && station.point.mesh == point.mesh;
            let slack = if same { ROUNDOFF } else { self.settings.mesh.accuracy.max(ROUNDOFF) };
            sign * self.metric.inner(point.tables(), &point.mesh, &tangent.row, &step) >= -slack
        };
        ahead(low, 1.0) && ahead(high, -1.0)
    }

    /// Solves the augmented system in place on the point's mesh.
    pub(crate) fn augmented(
        &mut self,
        kind: CriticalKind,
        point: &mut CyclePoint,
    ) -> Result<(Report, TestFunction), NewtonFailure> {
        self.system.set_mesh(point.degree, &point.mesh);
        self.system.linearise(&point.unknowns)?;
        let mut function = TestFunction::new(kind, &self.system, &point.unknowns)?;
        let reference = point.unknowns.nodes.clone();
        let report = self.newton(point, &reference, &mut function)?;
        Ok((report, function))
    }

    /// The event on finer and finer meshes until its value has the wanted accuracy. Once is enough as a rule; the mesh of a
    /// cycle that hardly moves is chosen by that, and its critical motion may ask for more.
    fn refine_event(
        &mut self,
        kind: CriticalKind,
        coarse: &CyclePoint,
    ) -> Result<(CyclePoint, f64, f64, NullVectors), NewtonFailure> {
        /// Halvings of every interval.
        const ROUNDS: usize = 6;
        /// Share of its error that a threshold must lose with a finer mesh, or roundoff is reached.
        const GAIN: f64 = 0.5;
        let mut best = self.refine_event_once(kind, coarse)?;
        for _ in 1..ROUNDS {
            let (point, error) = (best.0.clone(), best.1);
            let wanted = self.settings.mesh.accuracy * point.unknowns.parameter.abs().max(self.metric.parameter_scale);
            if error <= wanted || 2 * point.intervals() > self.settings.mesh.most {
                break;
            }
            match self.refine_event_once(kind, &point) {
                Ok(finer) if finer.1 < GAIN * error => best = finer,
                _ => break,
            }
        }
        Ok(best)
    }

    /// The event again with every interval halved: the better value, and the difference as the error of it.
    fn refine_event_once(
        &mut self,
        kind: CriticalKind,
        coarse: &CyclePoint,
    ) -> Result<(CyclePoint, f64, f64, NullVectors), NewtonFailure> {
        let mesh: Arc<[f64]> = halved(&coarse.mesh).into();
        let mut fine = coarse.on_mesh(coarse.degree, &mesh);
        let (report, function) = self.augmented(kind, &mut fine)?;
        let size = function.size(&mut self.system);
        // Roundoff first: it refers to what was solved last.
        let (value_rounding, period_rounding) = self.rounding_of_scalars(&fine, size);
        let left = self.left_over(coarse, &fine);
        let to_correct = to_correct(&report);
        let value_error = left * (coarse.unknowns.parameter - fine.unknowns.parameter).abs()
            + to_correct * self.metric.parameter_scale
            + value_rounding;
        let period_error = left * (coarse.unknowns.period - fine.unknowns.period).abs()
            + to_correct * self.metric.period_scale
            + period_rounding;
        Ok((fine, value_error, period_error, function.vectors().clone()))
    }

    /// Share of the difference between a number on a mesh and on the halved one that may be left on the latter.
    ///
    /// Numbers converge at least as fast as the profile, mostly with twice its order, and how fast the profile converges
    /// is measured on these two meshes; `CANCELLING` is the margin. Where the profile gains nothing, all of it.
    pub fn left_over(&mut self, coarse: &CyclePoint, fine: &CyclePoint) -> f64 {
        let before = self.estimate(coarse).error;
        // What is no larger than rounding tells of no convergence: a motion that does not move is exact on every mesh.
        if before <= self.left_by_newton(coarse) {
            return 1.0;
        }
        let gain = self.estimate(fine).error / before;
        // Written so that NaN leaves all.
        if gain * CANCELLING < 1.0 { gain * CANCELLING } else { 1.0 }
    }

    /// Roundoff of the parameter and of the period of the last corrected point, `size` as in [`CycleProblem::rounding`].
    pub(crate) fn rounding_of_scalars(&mut self, point: &CyclePoint, size: f64) -> (f64, f64) {
        let Iterate { period, parameter, .. } = point.unknowns;
        (self.rounding(Scalar::Parameter, parameter, size), self.rounding(Scalar::Period, period, size))
    }

    /// Roundoff of a linear functional of the last corrected point.
    pub(crate) fn rounding_along(&mut self, row: &Row, closing: f64) -> f64 {
        ROUNDOFF_MARGIN * self.newton.roundoff_along(&self.system, row, closing)
    }

    /// Roundoff of a scalar of the last corrected point: that of the rows and of a closing with terms of size `closing`
    /// through the conditioning, and of the number.
    fn rounding(&mut self, scalar: Scalar, value: f64, closing: f64) -> f64 {
        let scale = match scalar {
            Scalar::Parameter => self.metric.parameter_scale,
            Scalar::Period => 0.0,
        };
        ROUNDOFF_MARGIN * self.newton.roundoff(&self.system, scalar, closing)
            + COHERENT_UNITS * f64::EPSILON * value.abs().max(scale)
    }

    fn middle(&mut self, low: &CycleStation, high: &CycleStation) -> Option<CycleStation> {
        self.between(low, high, 0.5)
    }

    /// Share of the chord between two stations at which a point beside it lies, counted along the first one's tangent as
    /// [`CycleProblem::between`] counts it.
    pub fn share_of(&self, (low, high): (&CycleStation, &CycleStation), point: &CyclePoint) -> f64 {
        let on = &low.point;
        let (point, tangent) =
            (point.on_mesh(on.degree, &on.mesh), self.normalised(low.tangent.on_mesh(on.degree, &on.mesh)));
        let (here, there) = (&on.unknowns, &point.unknowns);
        let step = Row {
            nodes: there.nodes.iter().zip(&here.nodes).map(|(to, from)| to - from).collect(),
            period: there.period - here.period,
            parameter: there.parameter - here.parameter,
        };
        self.metric.inner(on.tables(), &on.mesh, &tangent.row, &step) / self.distance(on, &high.point)
    }

    /// A station on the branch between two stations, at a share of the chord from `low` to `high`; none where it does not
    /// correct or where the corrected cycle does not lie between them.
    pub fn between(&mut self, low: &CycleStation, high: &CycleStation, share: f64) -> Option<CycleStation> {
        let length = self.distance(&low.point, &high.point);
        let stride = share * length;
        // The metric may have changed since the station was made.
        let tangent = self.normalised(low.tangent.clone());
        let prediction = self.advance(&low.point, &tangent, stride);
        let closing = Closing::Arclength { from: &low.point, tangent: &tangent, stride };
        let point = self.correct(&prediction, closing).ok()?.point;
        let tangent = self.tangent(&point, Orientation::Along(&low.tangent)).ok()?;
        let watch = self.watch(&point, &tangent).ok()?;
        Some(Station { point, tangent, watch, distance: low.distance + share * (high.distance - low.distance) })
    }

    /// The cycle re-solved on a mesh with every interval halved, at the same parameter, and its period's error. Where
    /// roundoff stands in the way of that, as close to a loop through a state of rest, on its own mesh once more: what is in
    /// doubt then is what roundoff does.
    ///
    /// # Errors
    /// [`Failure`] where that does not converge either.
    pub fn refine(&mut self, point: &CyclePoint) -> Result<(CyclePoint, f64), Failure<armilla_collocation::Fault>> {
        let mesh: Arc<[f64]> = halved(&point.mesh).into();
        let mut fine = point.on_mesh(point.degree, &mesh);
        let value = point.unknowns.parameter;
        let solved = self.correct_at(&mut fine, value).is_ok();
        if !solved {
            fine = point.clone();
            self.correct_at(&mut fine, value).map_err(|_| Failure::NotConverged)?;
        }
        // The closing holds the parameter exactly. Roundoff first: it refers to what was solved last.
        let rounding = self.rounding(Scalar::Period, fine.unknowns.period, 0.0);
        let left = if solved { self.left_over(point, &fine) } else { 1.0 };
        let error = left * (fine.unknowns.period - point.unknowns.period).abs() + rounding;
        Ok((fine, error))
    }

    /// The cycle re-solved on a mesh with every interval halved, at the same period, and its parameter's error: near a loop
    /// through a state of rest the period is no function of the parameter that rounding leaves, but the parameter one of
    /// the period.
    ///
    /// # Errors
    /// [`Failure`] where that does not converge.
    pub fn refine_at_period(
        &mut self,
        point: &CyclePoint,
    ) -> Result<(CyclePoint, f64), Failure<armilla_collocation::Fault>> {
        let mesh: Arc<[f64]> = halved(&point.mesh).into();
        let mut fine = point.on_mesh(point.degree, &mesh);
        let reference = fine.unknowns.nodes.clone();
        let row = Row { period: 1.0, ..Row::zero(reference.len()) };
        let mut closing = LinearClosing { row, target: point.unknowns.period };
        let report = self.newton(&mut fine, &reference, &mut closing).map_err(|_| Failure::NotConverged)?;
        let rounding = self.rounding(Scalar::Parameter, fine.unknowns.parameter, 0.0);
        let difference = (fine.unknowns.parameter - point.unknowns.parameter).abs();
        let error =
            self.left_over(point, &fine) * difference + to_correct(&report) * self.metric.parameter_scale + rounding;
        Ok((fine, error))
    }
}

/// Both the coarse and the fine value carry roundoff of the estimated size as a standard deviation; four of them cover
/// the difference and the truth if rows round independently and formulas to a unit or so. Four times that, since they need not:
/// of some hundreds of planted doublings one was found ten from its place, in a model whose formulas cancel inside.
pub(crate) const ROUNDOFF_MARGIN: f64 = 16.0;
/// Margin of the share that is left of a difference: parts of the error on the coarse mesh may cancel each other, and the
/// difference is smaller by such a factor then.
const CANCELLING: f64 = 2.0;
/// Units in the last place, of the value or of the range of its parameter, for rounding that acts on every row alike and
/// that the sum of independent errors leaves out: the basis tables are correct to a few units each.
pub(crate) const COHERENT_UNITS: f64 = 16.0;

/// Scaled size of what Newton's method left to correct: nothing to speak of where it went on falling, the last correction
/// where it had come to stand still, as beside a second event.
pub(crate) fn to_correct(report: &Report) -> f64 {
    match report.corrections[..] {
        [.., before, last] => last * (last / before).powi(2).min(1.0),
        _ => 0.0,
    }
}

pub(crate) fn halved(mesh: &[f64]) -> Vec<f64> {
    let mut out = Vec::with_capacity(2 * mesh.len());
    for pair in mesh.windows(2) {
        out.extend([pair[0], 0.5 * (pair[0] + pair[1])]);
    }
    out.push(1.0);
    out
}
