//! Where a cycle that shrinks comes to rest.
//!
//! Near its birth at a state of rest the parameter and the period of a cycle are smooth even functions of its amplitude
//! (Hopf 1942, Berichte der Sächsischen Akademie 94:3). So polynomials in the square of the amplitude through the last
//! points are extrapolated to 0; each point more gains about a factor of that square, until the errors of the points
//! themselves, enlarged by the weights, outgrow the gain.

use armilla_stability::{CyclePoint, CycleProblem};

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

/// Adds a motion and lets go of the cycles that are not needed any more.
pub(crate) fn push(motions: &mut Vec<Motion>, motion: Motion) {
    motions.push(motion);
    if let Some(old) = motions.len().checked_sub(MOST + 1) {
        motions[old].cycle = None;
    }
}

/// The last motions on meshes with every interval halved, and their errors: of the parameter at a given motion, and of the
/// period. `scale` is the size of the parameter for roundoff.
pub(crate) fn refined(problem: &mut CycleProblem, motions: &[Motion], scale: f64) -> (Vec<Motion>, (f64, f64)) {
    /// What moves one way at one cycle may move the other way at a neighbour.
    const MARGIN: f64 = 4.0;
    /// Units in the last place. The conditioning of a small cycle would tell some hundred times more: it counts roundoff
    /// that turns the phase, which neither parameter nor period see.
    const UNITS: f64 = 128.0;
    let mut fine = Vec::new();
    let mut errors = (0.0f64, 0.0f64);
    let mut last_slope = 0.0;
    for (k, motion) in motions.iter().enumerate().skip(motions.len().saturating_sub(MOST)) {
        let Some(coarse) = &motion.cycle else { continue };
        if k > 0 {
            let (a, b) = (&motions[k - 1], motion);
            let slope = (b.parameter - a.parameter) / (b.size * b.size - a.size * a.size);
            last_slope = if slope.is_finite() { slope } else { last_slope };
        }
        // Where the finer mesh fails all of the error is left, and nothing tells how large it is but the profile's.
        let (better, left) = match problem.refine(coarse) {
            Ok((better, _)) => {
                let left = problem.left_over(coarse, &better);
                (Motion::of(problem, &better), left)
            }
            Err(_) => (motion.clone(), 1.0),
        };
        let moved = last_slope * (better.size * better.size - motion.size * motion.size);
        errors.0 = errors.0.max(MARGIN * left * moved.abs());
        errors.1 = errors.1.max(MARGIN * left * (better.period - motion.period).abs());
        fine.push(better);
    }
    let roundoff = UNITS * f64::EPSILON;
    let period = fine.last().map_or(0.0, |motion| motion.period);
    (fine, (errors.0 + roundoff * scale, errors.1 + roundoff * period))
}

/// The birth of a cycle, extrapolated.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Rest {
    /// Parameter.
    pub value: f64,
    /// Estimated error of it.
    pub error: f64,
    /// Period.
    pub period: f64,
    /// Estimated error of it.
    pub period_error: f64,
}

/// Most points used: errors of the points come to outweigh the gain before that.
const MOST: usize = 7;

/// Extrapolates from points in the order along the branch; `uncertainty` are the errors of their parameters and of their
/// periods at a given motion. None for less than two points.
pub(crate) fn extrapolate_to_rest(motions: &[Motion], uncertainty: (f64, f64)) -> Option<Rest> {
    let last = &motions[motions.len().saturating_sub(MOST)..];
    let parameters: Vec<(f64, f64)> = last.iter().map(|motion| (motion.size, motion.parameter)).collect();
    let periods: Vec<(f64, f64)> = last.iter().map(|motion| (motion.size, motion.period)).collect();
    let (value, error) = extrapolated(&parameters, uncertainty.0)?;
    let (period, period_error) = extrapolated(&periods, uncertainty.1)?;
    Some(Rest { value, error, period, period_error })
}

/// The extrapolation with the least estimated error among those through the last two points, the last three, and so on.
fn extrapolated(points: &[(f64, f64)], uncertainty: f64) -> Option<(f64, f64)> {
    let mut before = points.last()?.1;
    let mut best: Option<(f64, f64)> = None;
    for count in 2..=points.len() {
        let used = &points[points.len() - count..];
        let weights = weights(used);
        let value: f64 = weights.iter().zip(used).map(|(weight, (_, value))| weight * value).sum();
        let enlarged: f64 = weights.iter().map(|weight| weight.abs() * uncertainty).sum();
        let error = (value - before).abs() + enlarged;
        // Two equal amplitudes leave no weights.
        if error.is_finite() && best.is_none_or(|(_, least)| error < least) {
            best = Some((value, error));
        }
        before = value;
    }
    best
}

/// Lagrange's weights at 0 in the square of the amplitude.
fn weights(points: &[(f64, f64)]) -> Vec<f64> {
    let square = |k: usize| points[k].0 * points[k].0;
    let weight = |k: usize| {
        let others = (0..points.len()).filter(|other| *other != k);
        others.map(|other| square(other) / (square(other) - square(k))).product()
    };
    (0..points.len()).map(weight).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn motions(parameter: impl Fn(f64) -> f64, period: impl Fn(f64) -> f64) -> Vec<Motion> {
        let sizes = [0.6, 0.5, 0.41, 0.31, 0.22, 0.13, 0.06, 0.04];
        sizes.map(|size| Motion {
            size,
            parameter: parameter(size),
            period: period(size),
            cycle: None,
        }).to_vec()
    }

    /// Exact by construction: the limits at amplitude 0 of even functions.
    #[test]
    fn planted_births_return_with_errors_that_cover() {
        let motions = motions(|r| 2.0 + (r * r).sin() - 0.3 * r.powi(4), |r| 6.0 / (1.0 + r * r));
        let rest = extrapolate_to_rest(&motions, (1e-12, 1e-12)).expect("eight points");
        assert!((rest.value - 2.0).abs() <= rest.error && rest.error < 1e-8, "{rest:?}");
        assert!((rest.period - 6.0).abs() <= rest.period_error && rest.period_error < 1e-6, "{rest:?}");
    }

    /// Exact by construction: a polynomial of second degree in the square is met to roundoff.
    #[test]
    fn a_polynomial_is_met_to_roundoff() {
        let motions = motions(|r| r.powi(4) - r * r, |_| 6.0);
        let rest = extrapolate_to_rest(&motions, (1e-15, 1e-14)).expect("eight points");
        assert!(rest.value.abs() <= rest.error && rest.error < 1e-13, "{rest:?}");
        assert!(rest.period_error < 1e-12, "{rest:?}");
    }

    /// Errors of the points themselves are covered as far as they are told: 1e-7 of an amplitude of 0.6 at most moves a
    /// square, and with it the parameter, by 7e-8, of the nearer ones less.
    #[test]
    fn noise_in_the_amplitudes_is_covered() {
        for seed in 0..20u32 {
            let mut motions = motions(|r| (r * r).sin(), |r| 6.0 + r * r);
            for (k, motion) in motions.iter_mut().enumerate() {
                motion.size *= 1.0 + 1e-7 * f64::from((seed + 3).pow(3) * (k as u32 + 7).pow(2) % 101 % 7).sin();
            }
            let rest = extrapolate_to_rest(&motions, (8e-8, 8e-8)).expect("eight points");
            assert!(rest.value.abs() <= rest.error, "{rest:?}");
            assert!((rest.period - 6.0).abs() <= rest.period_error, "{rest:?}");
        }
    }
}
