//! Below what the motion of a state is none: roundoff of its rate, or the rest of what has died out.
//!
//! Motion is judged relative to the range of each state, so that nothing depends on units. A state that dies out
//! beside others that move has a range that goes to zero, or to the roundoff that the others feed into it: judged by
//! that alone it would hold up every verdict and shrink every step. Two floors keep it from that. Roundoff: the terms
//! of a rate, taken at their largest over a window, err by units in the last place, and what they do to the state adds
//! up over a return, or as long as the state remembers it. Dying out: a range is small beside the widest ever seen of
//! this state, while other states keep theirs.

use crate::integrator::Integrator;
use crate::observe::Observation;

/// Roundoff of a step in units in the last place of the largest terms of a rate: the dozen stages of a step err by
/// about one each, their weights are of order one.
const STEP_UNITS: f64 = 10.0;
/// Roundoff of a return in the same units: some dozen steps, and what lasts of the returns before it.
const RETURN_UNITS: f64 = 100.0;
/// Part of its widest range below which a state is no longer resolved relative to its own range, where others have
/// kept theirs. Closing to the tolerance of settling relative to this is closing to the last bit of what it was.
const FADING: f64 = 1e-6;
/// Part of its widest range below which such a state has died out: its turns are not those of the cycle.
const DIED_OUT: f64 = 1e-10;

/// What floors are made of.
#[derive(Clone, Debug)]
pub(crate) struct Floors {
    /// Sum over j of |J_ij x_j|, the largest over the last window.
    terms: Vec<f64>,
    /// |J_ii|, the largest over the last window: how fast a state forgets, or grows.
    own: Vec<f64>,
    /// Widest range of each state in any window, the first steps included.
    widest: Vec<f64>,
    /// Sums of one sample.
    sample: Vec<f64>,
    is_new_window: bool,
}

/// The floors of each state after a window.
#[derive(Clone, Debug)]
pub(crate) struct Floor {
    /// Gap of a return below which there is none.
    pub(crate) noise: Vec<f64>,
    /// Least range that gaps are judged against.
    pub(crate) range: Vec<f64>,
    /// Range below which the state has died out.
    pub(crate) died: Vec<f64>,
}

impl Floors {
    pub(crate) fn new(n: usize) -> Self {
        let zeros = || vec![0.0; n];
        Self { terms: zeros(), own: zeros(), widest: zeros(), sample: zeros(), is_new_window: true }
    }

    /// From now on the largest terms are those of a new window; the old ones stand until something is seen of it.
    pub(crate) fn begin_window(&mut self) {
        self.is_new_window = true;
    }

    /// Takes in the last step of `integrator`, where it has left a Jacobian.
    pub(crate) fn sample(&mut self, integrator: &Integrator<'_>) {
        if !integrator.has_fresh_jacobian() {
            return;
        }
        if std::mem::take(&mut self.is_new_window) {
            self.terms.fill(0.0);
            self.own.fill(0.0);
        }
        self.sample.fill(0.0);
        let state = integrator.state();
        for (row, column, value) in integrator.rates.entries() {
            // A derivative that is not finite here says nothing of the noise.
            if value.is_finite() {
                self.sample[row] += (value * state[column]).abs();
                if row == column {
                    self.own[row] = self.own[row].max(value.abs());
                }
            }
        }
        self.terms.iter_mut().zip(&self.sample).for_each(|(most, here)| *most = most.max(*here));
    }

    /// Takes in the ranges of a window.
    pub(crate) fn widen(&mut self, seen: &Observation) {
        self.widest.iter_mut().enumerate().for_each(|(i, widest)| *widest = widest.max(seen.range(i)));
    }

    /// Roundoff of state `i` that its rate makes in a time.
    fn roundoff(&self, i: usize, time: f64) -> f64 {
        f64::EPSILON * self.terms[i] * time / (1.0 + time * self.own[i])
    }

    /// Error of a step below which nothing can be asked for, one per state: `part` is what a step may err by
    /// relative to the range.
    pub(crate) fn step(&self, seen: &Observation, part: f64) -> Vec<f64> {
        let (step, alive) = (seen.mean_step(), self.alive(seen));
        let least = |i: usize| (STEP_UNITS * self.roundoff(i, step)).max(part * FADING * alive * self.widest[i]);
        (0..self.widest.len()).map(least).collect()
    }

    /// The floors where a return takes `return_time` and closes within `tolerance` relative to the range.
    pub(crate) fn floor(&self, seen: &Observation, return_time: f64, tolerance: f64) -> Floor {
        let n = self.widest.len();
        let alive = self.alive(seen);
        let noise: Vec<f64> = (0..n).map(|i| RETURN_UNITS * self.roundoff(i, return_time)).collect();
        let range = (0..n).map(|i| (noise[i] / tolerance).max(FADING * alive * self.widest[i])).collect();
        let died = (0..n).map(|i| noise[i].max(DIED_OUT * alive * self.widest[i])).collect();
        Floor { noise, range, died }
    }

    /// Largest part that any state has kept of its widest range: all decay together where a motion goes to rest, and
    /// none of them has died out beside the others then.
    fn alive(&self, seen: &Observation) -> f64 {
        let kept = |(i, widest): (usize, &f64)| if *widest > 0.0 { seen.range(i) / widest } else { 0.0 };
        self.widest.iter().enumerate().map(kept).fold(0.0, f64::max).min(1.0)
    }
}
