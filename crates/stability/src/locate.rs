//! Location of an event from a bracket.
//!
//! Newton's method on the minimally augmented system, started from the bracket's secant point; where it fails or
//! leaves the bracket, the bracket is halved along the branch and Newton tried again. The value reported comes from
//! a mesh with every interval halved, its error from the difference (methods as in [`crate::TestFunction`]).

use std::sync::Arc;

use armilla_collocation::{Failure as NewtonFailure, Iterate, Report, Scalar};
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
const HALVINGS: usize = 40;

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

    fn share(&self, before: &CycleStation, point: &CyclePoint, total: f64) -> f64 {
        if total > 0.0 { (self.distance(&before.point, point) / total).clamp(0.0, 1.0) } else { 0.0 }
    }

    /// Linear interpolation of the stations at the zero of the secant.
    fn secant_point(&self, index: usize, low: &CycleStation, high: &CycleStation) -> CyclePoint {
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

    /// Newton on the augmented system; accepted only inside the bracket's neighbourhood.
    fn newton_event(
        &mut self,
        kind: CriticalKind,
        guess: &CyclePoint,
        low: &CycleStation,
        high: &CycleStation,
    ) -> Option<(CyclePoint, Report)> {
        let mut point = guess.clone();
        let report = self.augmented(kind, &mut point).ok()?.0;
        let length = self.distance(&low.point, &high.point);
        // A chord is shorter than the branch between its ends; twice its length still excludes anything else.
        let inside =
            self.distance(&low.point, &point) <= 2.0 * length && self.distance(&high.point, &point) <= 2.0 * length;
        inside.then_some((point, report))
    }

    /// Solves the augmented system in place on the point's mesh.
    pub(crate) fn augmented(
        &mut self,
        kind: CriticalKind,
        point: &mut CyclePoint,
    ) -> Result<(Report, NullVectors), NewtonFailure> {
        self.system.set_mesh(point.degree, &point.mesh);
        self.system.linearise(&point.unknowns)?;
        let mut function = TestFunction::new(kind, &self.system, &point.unknowns)?;
        let reference = point.unknowns.nodes.clone();
        let report = self.newton(point, &reference, &mut function)?;
        Ok((report, function.vectors().clone()))
    }

    /// The event again with every interval halved: the better value, and the difference as the error of it.
    fn refine_event(
        &mut self,
        kind: CriticalKind,
        coarse: &CyclePoint,
    ) -> Result<(CyclePoint, f64, f64, NullVectors), NewtonFailure> {
        let mesh: Arc<[f64]> = halved(&coarse.mesh).into();
        let mut fine = coarse.on_mesh(coarse.degree, &mesh);
        let (_, vectors) = self.augmented(kind, &mut fine)?;
        let left = self.left_over(coarse, &fine);
        let value_error = left * (coarse.unknowns.parameter - fine.unknowns.parameter).abs()
            + self.rounding(Scalar::Parameter, fine.unknowns.parameter);
        let period_error = left * (coarse.unknowns.period - fine.unknowns.period).abs()
            + self.rounding(Scalar::Period, fine.unknowns.period);
        Ok((fine, value_error, period_error, vectors))
    }

    /// Share of the difference between a number on a mesh and on the halved one that may be left on the latter.
    ///
    /// Numbers converge at least as fast as the profile, mostly with twice its order, and how fast the profile converges
    /// is measured on these two meshes; [`CANCELLING`] is the margin. Where the profile gains nothing, all of it.
    pub fn left_over(&mut self, coarse: &CyclePoint, fine: &CyclePoint) -> f64 {
        let gain = self.estimate(fine).error / self.estimate(coarse).error;
        // Written so that NaN leaves all.
        if gain * CANCELLING < 1.0 { gain * CANCELLING } else { 1.0 }
    }

    /// Roundoff of a scalar of the last corrected point: that of the rows through the conditioning, and of the number.
    fn rounding(&mut self, scalar: Scalar, value: f64) -> f64 {
        let scale = match scalar {
            Scalar::Parameter => self.metric.parameter_scale,
            Scalar::Period => 0.0,
        };
        ROUNDOFF_MARGIN * self.newton.roundoff(&self.system, scalar)
            + COHERENT_UNITS * f64::EPSILON * value.abs().max(scale)
    }

    /// A station halfway along the branch between two stations.
    fn middle(&mut self, low: &CycleStation, high: &CycleStation) -> Option<CycleStation> {
        let stride = 0.5 * self.distance(&low.point, &high.point);
        let prediction = self.advance(&low.point, &low.tangent, stride);
        let closing = Closing::Arclength { from: &low.point, tangent: &low.tangent, stride };
        let point = self.correct(&prediction, closing).ok()?.point;
        let tangent = self.tangent(&point, Orientation::Along(&low.tangent)).ok()?;
        let watch = self.watch(&point, &tangent).ok()?;
        Some(Station { point, tangent, watch, distance: low.distance + stride })
    }

    /// Narrows a bracket over which `differs` tells its ends apart, for changes without a defining system: returns
    /// the narrowest pair of stations.
    pub fn narrow(
        &mut self,
        before: &CycleStation,
        after: &CycleStation,
        same_as_before: impl Fn(&CycleStation) -> bool,
    ) -> (CycleStation, CycleStation) {
        let (mut low, mut high) = (before.clone(), after.clone());
        for _ in 0..HALVINGS {
            // Bisection along the chord: past this length the ends agree to the profile's accuracy.
            if self.distance(&low.point, &high.point) < self.settings.mesh.accuracy.max(1e-10) {
                break;
            }
            let Some(middle) = self.middle(&low, &high) else { break };
            if same_as_before(&middle) { low = middle } else { high = middle }
        }
        (low, high)
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
        let left = match self.correct_at(&mut fine, value) {
            Ok(_) => self.left_over(point, &fine),
            Err(_) => {
                fine = point.clone();
                self.correct_at(&mut fine, value).map_err(|_| Failure::NotConverged)?;
                1.0
            }
        };
        let error = left * (fine.unknowns.period - point.unknowns.period).abs()
            + self.rounding(Scalar::Period, fine.unknowns.period);
        Ok((fine, error))
    }
}

/// Both the coarse and the fine value carry roundoff of the estimated size as a standard deviation; four of them cover
/// the difference and the truth if rows round independently. Twice that, since they need not: on X3 the doubling was
/// found a little beyond four from its exact place.
const ROUNDOFF_MARGIN: f64 = 8.0;
/// Margin of the share that is left of a difference: parts of the error on the coarse mesh may cancel each other, and the
/// difference is smaller by such a factor then.
const CANCELLING: f64 = 2.0;
/// Units in the last place, of the value or of the range of its parameter, for rounding that acts on every row alike and
/// that the sum of independent errors leaves out: the basis tables are correct to a few units each.
const COHERENT_UNITS: f64 = 16.0;

pub(crate) fn halved(mesh: &[f64]) -> Vec<f64> {
    let mut out = Vec::with_capacity(2 * mesh.len());
    for pair in mesh.windows(2) {
        out.extend([pair[0], 0.5 * (pair[0] + pair[1])]);
    }
    out.push(1.0);
    out
}
