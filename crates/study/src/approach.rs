//! How a period grows without bound, told from the last points of a branch.
//!
//! Near a saddle loop `T = a - b ln|p - p*|`; near a saddle-node on a loop `T = a + b |p - p*|^(-1/2)` (Shilnikov,
//! Shilnikov, Turaev & Chua 2001, Methods of Qualitative Theory in Nonlinear Dynamics II, ch. 12 and 13; from memory);
//! where a frequency goes to zero, `T = a + b / |p - p*|`. Each has three constants; three points fix
//! them, those before judge them.

use armilla_stability::CycleProblem;

use crate::walk::Walked;

/// A law of approach.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Law {
    /// Saddle loop.
    Logarithm,
    /// Saddle-node on a loop.
    InverseRoot,
    /// A frequency that goes to zero.
    Inverse,
}

impl Law {
    pub(crate) fn words(self) -> &'static str {
        match self {
            Self::Logarithm => "as towards a saddle loop, like the logarithm of the distance",
            Self::Inverse => "as where a frequency goes to zero, like one over the distance",
            Self::InverseRoot => "as towards a saddle-node on a loop, like one over the root of the distance",
        }
    }

    fn shape(self, distance: f64) -> f64 {
        match self {
            Self::Logarithm => -distance.ln(),
            Self::InverseRoot => distance.powf(-0.5),
            Self::Inverse => 1.0 / distance,
        }
    }
}

/// A diagnosed approach.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Approach {
    pub law: Law,
    /// Parameter value at which the period is infinite.
    pub limit: f64,
    /// Estimated error of it.
    pub error: f64,
}

/// Points looked at.
const WINDOW: usize = 6;
/// Growth of the period over the least period of the branch before the question is asked.
const GROWN: f64 = 3.0;
/// Relative change of the parameter over the window that counts as standing still.
const STILL: f64 = 1e-12;
/// Relative growth of the period per share of the range travelled that counts as without bound, and the growth over the
/// least period that must have happened then: a relaxation oscillation never grows like that.
const STEEP: f64 = 1e3;
/// See [`STEEP`].
const GROWN_STEEPLY: f64 = 20.0;
/// Change of the extremes of the states over the window, relative to their ranges, per growth of the logarithm of the
/// period: on the way to a loop the orbit stands still while its period grows. In a canard explosion the parameter stands
/// still too, but the orbit grows with the period.
const SHAPE: f64 = 0.1;

/// How well a history is known.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Known {
    /// Width of the asked range.
    pub width: f64,
    /// Error of the parameter on a branch.
    pub parameter: f64,
}

/// A point of the history of a branch.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Past {
    /// Parameter.
    pub value: f64,
    /// Period.
    pub period: f64,
    /// Estimated error of the parameter at this period, absolute: the longer the period, the less it tells of itself and the
    /// more of the parameter.
    pub error: f64,
}

/// The history with the last cycles of a walk solved again on meshes with every interval halved; `history` ends with the
/// points of the walk.
pub(crate) fn resolved(problem: &mut CycleProblem, history: &[Past], points: &[Walked]) -> Vec<Past> {
    /// Points told anew: those a limit and its error are told from, twice as far away as the last one included.
    const TOLD: usize = 24;
    let mut history = history.to_vec();
    for (past, walked) in history.iter_mut().rev().zip(points.iter().rev()).take(TOLD) {
        if let Ok((fine, error)) = problem.refine_at_period(&walked.cycle) {
            (past.value, past.error) = (fine.unknowns.parameter, error);
        }
    }
    history
}

/// Tells an approach from the history of a walk that got stuck, oldest first: the last points need not stand still yet, if
/// their periods follow a law.
pub(crate) fn approach_of_stuck(history: &[Past], known: Known) -> Option<Approach> {
    /// Misfit of a law, relative to the growth of the period over the window, up to which noise of the last points may be
    /// its cause.
    const FOLLOWS: f64 = 0.05;
    let least = history.iter().map(|point| point.period).fold(f64::INFINITY, f64::min);
    let moving = moving_part(history, known);
    let grown = moving.len() >= WINDOW && moving.last().is_some_and(|last| last.period > GROWN * least);
    let law = best_law(&moving).filter(|(_, _, misfit)| grown && *misfit < FOLLOWS)?;
    Some(of_law(law, &moving, known))
}

/// The law that fits best, with its limit and its misfit.
fn best_law(points: &[Past]) -> Option<(Law, f64, f64)> {
    let fitted = |law| fit(law, points).map(|(limit, misfit)| (law, limit, misfit));
    let laws = [Law::Logarithm, Law::InverseRoot, Law::Inverse];
    laws.into_iter().filter_map(fitted).min_by(|a, b| a.2.total_cmp(&b.2))
}

fn of_law((law, limit, _): (Law, f64, f64), moving: &[Past], known: Known) -> Approach {
    Approach { law, limit, error: error(law, limit, moving, known) }
}

/// Tells an approach from a history, oldest first.
pub(crate) fn approach(history: &[Past], known: Known) -> Option<Approach> {
    let width = known.width;
    let least = history.iter().map(|point| point.period).fold(f64::INFINITY, f64::min);
    let window = &history[history.len().checked_sub(WINDOW)?..];
    let (first, last) = (window[0], window[WINDOW - 1]);
    let growing = window.windows(2).all(|pair| pair[1].period > pair[0].period);
    let travelled = (last.value - first.value).abs() / width;
    let still = travelled < STILL && last.period > GROWN * least;
    let steep = (last.period / first.period).ln() > STEEP * travelled && last.period > GROWN_STEEPLY * least;
    if !growing || !(still || steep) {
        return None;
    }
    let moving = moving_part(history, known);
    let told = best_law(&moving).map(|law| of_law(law, &moving, known));
    // Without a law the limit is as near as the parameter has come while the period grew by a third: by any law it has no
    // farther to go.
    let since = history.iter().rev().find(|past| past.period < last.period / 1.5).unwrap_or(&first);
    let error = (last.value - since.value).abs() + known.parameter + last.error + f64::EPSILON * width;
    told.or(Some(Approach { law: Law::Logarithm, limit: last.value, error }))
}

/// Share of the largest range, over all states, below which what a state does is roundoff in a plane that the cycle lies in.
const IN_PLANE: f64 = 1e-12;

/// Whether the orbit stands still over the last points while its period grows.
pub(crate) fn orbit_stands(points: &[Walked]) -> bool {
    let Some(start) = points.len().checked_sub(WINDOW) else { return false };
    let (first, last) = (&points[start].point, &points[points.len() - 1].point);
    let range = |k: usize| last.maxima[k] - last.minima[k];
    let moved = |k: usize| (last.maxima[k] - first.maxima[k]).abs().max((last.minima[k] - first.minima[k]).abs());
    let allowed = SHAPE * (last.period / first.period).ln();
    let largest = (0..last.maxima.len()).map(range).fold(0.0, f64::max);
    (0..last.maxima.len()).all(|k| moved(k) <= allowed * range(k).max(IN_PLANE * largest))
}

/// The points whose parameters still differ by much more than their error.
fn moving_part(history: &[Past], known: Known) -> Vec<Past> {
    let resolved = (1e4 * f64::EPSILON * known.width).max(RESOLVED * known.parameter);
    let mut end = history.len();
    while end >= 2 && (history[end - 1].value - history[end - 2].value).abs() < resolved {
        end -= 1;
    }
    // Only the last stretch on which the period grows and the parameter goes one way belongs to the approach.
    let goes_on = |k: usize| {
        let step = |k: usize| history[k + 1].value - history[k].value;
        history[k + 1].period > history[k].period && (k + 2 >= end || step(k) * step(k + 1) > 0.0)
    };
    let mut start = end.saturating_sub(1);
    while start > 0 && goes_on(start - 1) {
        start -= 1;
    }
    history[start..end].to_vec()
}

/// Limit from the last three points, and how far the window before misses the law, relative to the growth of the period.
fn fit(law: Law, points: &[Past]) -> Option<(f64, f64)> {
    let points = &points[points.len().saturating_sub(WINDOW)..];
    let [.., first, second, third] = *points else { return None };
    let (p1, p2, p3) = (first.value, second.value, third.value);
    let (t1, t2, t3) = (first.period, second.period, third.period);
    let step = p3 - p2;
    let wanted = (t2 - t1) / (t3 - t2);
    // Distance x of the last point from the limit; the ratio of differences is monotone in it.
    let ratio = |x: f64| {
        let shape = |p: f64| law.shape(x + (p3 - p) * step.signum());
        (shape(p2) - shape(p1)) / (law.shape(x) - shape(p2))
    };
    let (mut low, mut high) = (1e-12 * step.abs(), 1e6 * step.abs());
    if !(ratio(low) < wanted && wanted < ratio(high)) {
        return None;
    }
    for _ in 0..200 {
        let middle = (low * high).sqrt();
        if ratio(middle) < wanted { low = middle } else { high = middle }
    }
    let distance = (low * high).sqrt();
    let shape = |p: f64| law.shape(distance + (p3 - p) * step.signum());
    let slope = (t3 - t2) / (shape(p3) - shape(p2));
    let misfit = points
        .iter()
        .map(|past| (t3 + slope * (shape(past.value) - shape(p3)) - past.period).abs() / (t3 - points[0].period))
        .fold(0.0, f64::max);
    Some((p3 + distance * step.signum(), misfit))
}

/// Difference to the limit told from points twice as far away, what errors of the periods move, and roundoff of the
/// parameter.
///
/// What the law leaves out is smaller than its growing term by the square of the distance (by its square times a
/// logarithm at a saddle loop), and moves the limit by as much: the limit from twice as far away is off at least three
/// times as far, and the difference covers the error.
fn error(law: Law, limit: f64, points: &[Past], known: Known) -> f64 {
    let last = points.last().map_or(limit, |last| last.value);
    let distance = (limit - last).abs();
    let farther = points.iter().rposition(|past| (limit - past.value).abs() >= 2.0 * distance);
    let before = farther.and_then(|at| fit(law, &points[..=at]));
    // Without points that far away nothing tells how well the law holds.
    let by_law = before.map_or(distance, |(other, _)| (limit - other).abs());
    // The worst for a ratio of differences: the middle of three against its neighbours.
    let moved = |value: f64| {
        let mut points = points.to_vec();
        if let [.., middle, _] = &mut points[..] {
            middle.value += value;
        }
        fit(law, &points).map_or(distance, |(other, _)| (limit - other).abs())
    };
    let value = points.iter().rev().take(3).map(|past| past.error).fold(0.0, f64::max);
    let by_noise = moved(value).max(moved(-value));
    by_law + by_noise + value + 16.0 * f64::EPSILON * known.width.max(limit.abs())
}

/// Differences of neighbouring parameters, in their errors, that a limit is told from: larger leaves more of what the law
/// leaves out, smaller more noise.
const RESOLVED: f64 = 100.0;

#[cfg(test)]
mod tests {
    use super::*;

    const KNOWN: Known = Known { width: 1.0, parameter: 1e-15 };

    fn past(value: f64, period: f64) -> Past {
        Past { value, period, error: 1e-15 }
    }

    fn history(law: Law, limit: f64, steps: usize) -> Vec<Past> {
        // Strides of about equal growth of the period, as a follower makes them.
        (0..steps)
            .map(|k| {
                let distance = match law {
                    Law::Logarithm => 0.1 * (-0.8 * k as f64).exp(),
                    Law::InverseRoot => 0.1 / (1.0 + 0.7 * k as f64).powi(2),
                    Law::Inverse => 0.1 / (1.0 + 0.7 * k as f64),
                };
                past(limit - distance, 3.0 + 1.5 * law.shape(distance))
            })
            .collect()
    }

    /// Exact by construction: each law with a planted limit.
    #[test]
    fn planted_limits_return() {
        let found = approach(&history(Law::Logarithm, 0.7, 40), KNOWN).expect("grows without bound");
        assert_eq!(found.law, Law::Logarithm);
        assert!((found.limit - 0.7).abs() <= found.error && found.error < 1e-9, "{found:?}");
        let found = approach(&history(Law::InverseRoot, -0.2, 120), KNOWN).expect("grows without bound");
        assert_eq!(found.law, Law::InverseRoot);
        assert!((found.limit + 0.2).abs() <= found.error && found.error < 1e-4, "{found:?}");
    }

    /// Exact by construction: a rotation whose frequency is the parameter.
    #[test]
    fn a_vanishing_frequency_is_told() {
        let found = approach(&history(Law::Inverse, 0.0, 400), KNOWN).expect("grows without bound");
        assert_eq!(found.law, Law::Inverse);
        assert!(found.limit.abs() <= found.error && found.error < 1e-3, "{found:?}");
    }

    /// A relaxation oscillation's period grows like its parameter: no blow-up.
    #[test]
    fn proportional_growth_is_no_blow_up() {
        let history: Vec<Past> = (1..200).map(|k| past(5.0 * k as f64, 8.0 * k as f64)).collect();
        assert_eq!(approach(&history, Known { width: 1000.0, ..KNOWN }), None);
    }
}
