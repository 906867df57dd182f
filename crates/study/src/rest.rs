//! Where a cycle that shrinks comes to rest.
//!
//! Near its birth at a state of rest the parameter and the period of a cycle are smooth even functions of its amplitude
//! (Hopf 1942, Berichte der Sächsischen Akademie 94:3). So polynomials in the square of the amplitude through the last
//! points are extrapolated to 0; each point more gains about a factor of that square, until the errors of the points
//! themselves, enlarged by the weights, outgrow the gain. From there the Hopf point itself is located; what was
//! extrapolated stands where there is none, as with rates that have kinks.

use armilla_record::Criticality;
use armilla_stability::{CyclePoint, CycleProblem};

use crate::equilibrium_events::hopf_side;

/// A cycle on the way to rest.
#[derive(Clone, Debug)]
pub(crate) struct Motion {
    /// Size of its motion about its mean.
    pub size: f64,
    /// Parameter.
    pub parameter: f64,
    /// Period.
    pub period: f64,
    /// The cycle, of the last [`MOST`] only.
    pub cycle: Option<CyclePoint>,
}

impl Motion {
    /// Of a cycle.
    pub fn of(problem: &CycleProblem, cycle: &CyclePoint) -> Self {
        let unknowns = &cycle.unknowns;
        Self {
            size: problem.motion(cycle),
            parameter: unknowns.parameter,
            period: unknowns.period,
            cycle: Some(cycle.clone()),
        }
    }
}

/// Units in the last place that a period is known to at best.
const PERIOD_UNITS: f64 = 8.0;

/// Adds a motion and lets go of the cycles that are not needed any more.
pub(crate) fn push(motions: &mut Vec<Motion>, motion: Motion) {
    motions.push(motion);
    if let Some(old) = motions.len().checked_sub(MOST + 1) {
        motions[old].cycle = None;
    }
}

/// A point of a curve in the square of the amplitude.
#[derive(Clone, Copy, Debug)]
struct Place {
    square: f64,
    value: f64,
    /// Estimated error of the value at this square.
    error: f64,
}

/// A motion on the mesh with every interval halved.
struct Refined {
    motion: Motion,
    /// Error of the period, by discretisation and by roundoff.
    period_error: (f64, f64),
    /// Relative change of the square of the motion, and the share of it that may be left.
    change: f64,
    left: f64,
}

/// The birth of a cycle, from the last cycles before and behind it on meshes with every interval halved; `scale` is the size
/// of the parameter for roundoff. None where there are less than two.
pub(crate) fn birth(problem: &mut CycleProblem, motions: &[Motion], scale: f64) -> Option<Rest> {
    let refined: Vec<Refined> = motions.iter().filter_map(|motion| refine(problem, motion)).collect();
    let square = |refined: &Refined| refined.motion.size * refined.motion.size;
    let periods: Vec<Place> = refined
        .iter()
        .map(|refined| Place {
            square: square(refined),
            value: refined.motion.period,
            error: refined.period_error.0 + refined.period_error.1,
        })
        .collect();
    // A change of all squares by one factor leaves the limit where it is: only what differs from that counts. Close to
    // rest the factor is lost, and all that is left of the square counts.
    let common = median(refined.iter().map(|refined| refined.change).collect());
    let slope = slope(&refined, &square);
    let parameters: Vec<Place> = refined
        .iter()
        .map(|refined| {
            let change = refined.change.abs().min((refined.change - common).abs());
            let discretisation = MARGIN * refined.left * (slope * square(refined) * change).abs();
            let value = refined.motion.parameter;
            let conditioning = CONDITIONING * refined.period_error.1 / refined.motion.period * value.abs();
            let error = discretisation + conditioning + UNITS * f64::EPSILON * scale;
            Place { square: square(refined), value, error }
        })
        .collect();
    let (value, error) = limit(&parameters)?;
    let (period, period_error) = limit(&periods)?;
    // Sums over a cycle round alike at every point.
    let period_error = period_error + PERIOD_UNITS * f64::EPSILON * period;
    Some(Rest { value, error, period, period_error, located: None })
}

/// What moves one way at one cycle may move the other way at a neighbour.
const MARGIN: f64 = 4.0;
/// Roundoff of the parameter at a given motion, relative, over that of the period at a given parameter: a tenth and a
/// fiftieth were seen at the births of a membrane's spikes.
const CONDITIONING: f64 = 1.0;
/// The difference between two meshes is one sample of roundoff; so many times that, plus a share of the bound by the
/// conditioning, which for small cycles is some hundred times too large, since it counts what only turns the phase.
const SAMPLE: f64 = 16.0;
/// See [`SAMPLE`].
const UNLIKELY: f64 = 32.0;
/// Units in the last place by which a parameter is off whatever the conditioning.
const UNITS: f64 = 32.0;

fn median(mut numbers: Vec<f64>) -> f64 {
    numbers.sort_by(f64::total_cmp);
    numbers.get(numbers.len() / 2).copied().unwrap_or(0.0)
}

/// Change of the parameter with the square of the motion, over all points.
fn slope(refined: &[Refined], square: &impl Fn(&Refined) -> f64) -> f64 {
    let by_square = |a: &&Refined, b: &&Refined| square(a).total_cmp(&square(b));
    let (near, far) = (refined.iter().min_by(by_square), refined.iter().max_by(by_square));
    let (Some(near), Some(far)) = (near, far) else { return 0.0 };
    let slope = (far.motion.parameter - near.motion.parameter) / (square(far) - square(near));
    if slope.is_finite() { slope } else { 0.0 }
}

fn refine(problem: &mut CycleProblem, motion: &Motion) -> Option<Refined> {
    let coarse = motion.cycle.as_ref()?;
    let (fine, error) = problem.refine(coarse).ok()?;
    let left = problem.left_over(coarse, &fine);
    let fine = Motion::of(problem, &fine);
    let difference = (fine.period - motion.period).abs();
    let discretisation = left * difference;
    let bound = (error - discretisation).max(0.0);
    let roundoff = bound.min(SAMPLE * difference + bound / UNLIKELY);
    let change = (fine.size / motion.size).powi(2) - 1.0;
    Some(Refined { motion: fine, period_error: (discretisation, roundoff), change, left })
}

/// The birth of a cycle, extrapolated or located.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Rest {
    /// Parameter.
    pub value: f64,
    /// Estimated error of it.
    pub error: f64,
    /// Period.
    pub period: f64,
    /// Estimated error of it.
    pub period_error: f64,
    /// What the Hopf point itself tells, where it was located.
    pub located: Option<Birth>,
}

/// A birth located as a Hopf point of equilibria.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Birth {
    /// The equilibrium.
    pub state: Vec<f64>,
    /// Side on which cycles are born.
    pub criticality: Option<Criticality>,
    /// The first Lyapunov coefficient, in words.
    pub note: String,
}

impl Rest {
    /// The same birth located on the defining system of Hopf points, begun from the extrapolated one and `cycle`, the last
    /// before it; itself where that does not lead to a Hopf point near by, as with rates that have kinks.
    pub(crate) fn located(self, problem: &CycleProblem, cycle: &CyclePoint, width: f64) -> Self {
        /// Estimated errors of the extrapolation within which the located point is the same birth.
        const ERRORS: f64 = 10.0;
        /// Share of the range, and of the period, that are allowed besides.
        const NEAR: f64 = 1e-4;
        let Some((_, hopf, form)) = problem.hopf_near(cycle, self.value, self.period) else { return self };
        let Some((period, period_error)) = hopf.period() else { return self };
        let near = (hopf.point.parameter - self.value).abs() <= ERRORS * self.error + NEAR * width
            && (period - self.period).abs() <= ERRORS * self.period_error + NEAR * self.period;
        if !near {
            return self;
        }
        let (criticality, note) = hopf_side(form.as_ref());
        let located = Some(Birth { state: hopf.point.state, criticality, note });
        Self { value: hopf.point.parameter, error: hopf.error, period, period_error, located }
    }
}

/// Most points used: errors of the points come to outweigh the gain before that.
const MOST: usize = 10;

/// The parameter at rest from the motions as they are, without an error: for a walk that got stuck before it. None for less
/// than two.
pub(crate) fn guess(motions: &[Motion]) -> Option<f64> {
    let last = &motions[motions.len().saturating_sub(3)..];
    let place = |motion: &Motion| Place { square: motion.size * motion.size, value: motion.parameter, error: 0.0 };
    limit(&last.iter().map(place).collect::<Vec<_>>()).map(|(value, _)| value)
}

/// The value at square 0 with its error: of all runs of neighbours the one with the least estimated error. Near rest the
/// conditioning is bad, far from it the polynomial is.
fn limit(places: &[Place]) -> Option<(f64, f64)> {
    let mut best: Option<(f64, f64)> = None;
    for last in 1..places.len() {
        let mut before = places[last].value;
        for first in (0..last).rev() {
            let used = &places[first..=last];
            let weights = weights(used);
            let value: f64 = weights.iter().zip(used).map(|(weight, place)| weight * place.value).sum();
            let enlarged: f64 = weights.iter().zip(used).map(|(weight, place)| weight.abs() * place.error).sum();
            let error = (value - before).abs() + enlarged;
            // Two equal amplitudes leave no weights.
            if error.is_finite() && best.is_none_or(|(_, least)| error < least) {
                best = Some((value, error));
            }
            before = value;
        }
    }
    best
}

/// Lagrange's weights at square 0.
fn weights(places: &[Place]) -> Vec<f64> {
    let weight = |k: usize| {
        let others = (0..places.len()).filter(|other| *other != k);
        others.map(|other| places[other].square / (places[other].square - places[k].square)).product()
    };
    (0..places.len()).map(weight).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn places(value: impl Fn(f64) -> f64, error: f64) -> Vec<Place> {
        let sizes = [0.5, 0.41, 0.31, 0.22, 0.13, 0.06, 0.04f64];
        sizes.map(|size| Place { square: size * size, value: value(size), error }).to_vec()
    }

    /// Exact by construction: the limits at amplitude 0 of even functions.
    #[test]
    fn planted_births_return_with_errors_that_cover() {
        let (value, error) = limit(&places(|r| 2.0 + (r * r).sin() - 0.3 * r.powi(4), 1e-12)).expect("seven points");
        assert!((value - 2.0).abs() <= error && error < 1e-8, "{value} {error:e}");
        let (value, error) = limit(&places(|r| 6.0 / (1.0 + r * r), 1e-12)).expect("seven points");
        assert!((value - 6.0).abs() <= error && error < 1e-6, "{value} {error:e}");
    }

    /// Exact by construction: a polynomial of second degree in the square is met to roundoff.
    #[test]
    fn a_polynomial_is_met_to_roundoff() {
        let (value, error) = limit(&places(|r| r.powi(4) - r * r, 1e-15)).expect("seven points");
        assert!(value.abs() <= error && error < 1e-13, "{value:e} {error:e}");
    }

    /// Errors of the points themselves are covered as far as they are told, and points that are worse are left out.
    #[test]
    fn noise_is_covered() {
        for seed in 0..20u32 {
            let noise = |k: usize| f64::from((seed + 3).pow(3) * (k as u32 + 7).pow(2) % 101 % 7).sin();
            let mut places = places(|r| (r * r).sin(), 1e-9);
            places[5].error = 1e-3;
            places[6].error = 1e-3;
            for (k, place) in places.iter_mut().enumerate() {
                place.value += place.error * noise(k);
            }
            let (value, error) = limit(&places).expect("seven points");
            assert!(value.abs() <= error && error < 1e-5, "{value:e} {error:e}");
        }
    }
}
