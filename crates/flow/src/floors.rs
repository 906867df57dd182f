//! Below what the motion of a state is none: roundoff of its rate, errors of the others, or the rest of what died out.
//!
//! Motion is judged relative to the range of each state, so that nothing depends on units. A state that dies out
//! beside others that move has a range that goes to zero, or to the roundoff that the others feed into it: judged by
//! that alone it would hold up every verdict and shrink every step. Three floors keep it from that. Roundoff: the
//! terms of a rate, taken at their largest over a window, err by units in the last place, and what they do to the
//! state adds up over a return, or as long as the state remembers it. Coupling: in the same way the errors allowed in
//! the other states move this one, however little of their motion reaches it otherwise (on a plane of symmetry it
//! cancels). Dying out: a range is small beside the widest ever seen of this state, while other states keep theirs.
//!
//! A state remembers for the time `1/(|J_ii| + sum over j of sqrt|J_ij J_ji|)`, which no change of units changes: a
//! disturbance then has decayed, or has gone over into another state. What one state does to another lasts as long as
//! both remember it.

use std::collections::HashMap;

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
/// Part of what the errors allowed in the other states do to a state in a step that its own error may be.
const STEP_SHARE: f64 = 0.1;
/// Part of what the ranges of the other states could move a state by in a return (were there no cancelling) that gaps
/// are judged against at least.
const REACH: f64 = 1e-3;
/// A range below this part of the same is cancelled so well that the errors of the other states show in it.
const CANCELLED: f64 = 1e-6;
/// Times that errors are passed on from state to state: chains of dead states are short.
const LINKS: usize = 4;

/// What one state does to the rate of another.
#[derive(Clone, Copy, Debug)]
struct Coupling {
    row: usize,
    column: usize,
    /// Index of the coupling the other way.
    mirror: Option<usize>,
    /// |J_ij| now, and the largest over the last window.
    now: f64,
    most: f64,
    /// What one unit of the other state adds up to in a step, the largest over the last window.
    step: f64,
}

/// What floors are made of.
#[derive(Clone, Debug)]
pub(crate) struct Floors {
    couplings: Vec<Coupling>,
    /// Sum over j of |J_ij x_j|, now and the largest over the last window.
    terms: Vec<[f64; 2]>,
    /// How fast a state forgets, likewise.
    forgets: Vec<[f64; 2]>,
    /// Roundoff of a step, the largest over the last window.
    step_roundoff: Vec<f64>,
    /// Widest range of each state in any window, the first steps included.
    widest: Vec<f64>,
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
    pub(crate) fn new(integrator: &Integrator<'_>) -> Self {
        let n = integrator.state().len();
        let entries = || integrator.rates.entries().map(|(row, column, _)| (row, column));
        let places: HashMap<(usize, usize), usize> = entries().enumerate().map(|(k, place)| (place, k)).collect();
        let coupling = |(row, column): (usize, usize)| {
            let mirror = places.get(&(column, row)).copied();
            Coupling { row, column, mirror, now: 0.0, most: 0.0, step: 0.0 }
        };
        Self {
            couplings: entries().map(coupling).collect(),
            terms: vec![[0.0; 2]; n],
            forgets: vec![[0.0; 2]; n],
            step_roundoff: vec![0.0; n],
            widest: vec![0.0; n],
            is_new_window: true,
        }
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
            self.couplings.iter_mut().for_each(|coupling| (coupling.most, coupling.step) = (0.0, 0.0));
            self.terms.iter_mut().chain(&mut self.forgets).for_each(|both| both[1] = 0.0);
            self.step_roundoff.fill(0.0);
        }
        self.terms.iter_mut().chain(&mut self.forgets).for_each(|both| both[0] = 0.0);
        let (state, step) = (integrator.state(), integrator.time() - integrator.previous_time());
        for (coupling, (.., value)) in self.couplings.iter_mut().zip(integrator.rates.entries()) {
            // A derivative that is not finite here says nothing.
            coupling.now = if value.is_finite() { value.abs() } else { 0.0 };
            coupling.most = coupling.most.max(coupling.now);
            self.terms[coupling.row][0] += coupling.now * state[coupling.column].abs();
        }
        for coupling in &self.couplings {
            let back = coupling.mirror.map_or(0.0, |mirror| self.couplings[mirror].now);
            self.forgets[coupling.row][0] += (coupling.now * back).sqrt();
        }
        for both in self.terms.iter_mut().chain(&mut self.forgets) {
            both[1] = both[1].max(both[0]);
        }
        for coupling in &mut self.couplings {
            let forgets = self.forgets[coupling.row][0] + self.forgets[coupling.column][0];
            coupling.step = coupling.step.max(adds_up(coupling.now, step, forgets));
        }
        for (i, most) in self.step_roundoff.iter_mut().enumerate() {
            *most = most.max(f64::EPSILON * adds_up(self.terms[i][0], step, self.forgets[i][0]));
        }
    }

    /// Takes in the ranges of a window.
    pub(crate) fn widen(&mut self, seen: &Observation) {
        self.widest.iter_mut().enumerate().for_each(|(i, widest)| *widest = widest.max(seen.range(i)));
    }

    /// Error of a step below which nothing can be asked for, one per state: `part` is what a step may err by
    /// relative to the range.
    pub(crate) fn step(&self, seen: &Observation, part: f64) -> Vec<f64> {
        let n = self.widest.len();
        let alive = self.alive(seen);
        let ranges: Vec<f64> = (0..n).map(|i| seen.range(i).max(FADING * alive * self.widest[i])).collect();
        let mut passed_on = ranges.clone();
        for _ in 0..LINKS {
            let reach = self.reach(&passed_on, |coupling| coupling.step);
            passed_on = (0..n).map(|i| ranges[i].max(STEP_SHARE * reach[i])).collect();
        }
        (0..n).map(|i| (part * passed_on[i]).max(STEP_UNITS * self.step_roundoff[i])).collect()
    }

    /// The floors where a return takes `return_time`, closes within `tolerance` relative to the range, and errs by
    /// `part`.
    pub(crate) fn floor(&self, seen: &Observation, return_time: f64, (tolerance, part): (f64, f64)) -> Floor {
        let n = self.widest.len();
        let alive = self.alive(seen);
        let forgets = |coupling: &Coupling| self.forgets[coupling.row][1] + self.forgets[coupling.column][1];
        let gain = |coupling: &Coupling| adds_up(coupling.most, return_time, forgets(coupling));
        let ranges: Vec<f64> = (0..n).map(|i| seen.range(i)).collect();
        let mut reach = self.reach(&ranges, gain);
        let cancelled = |i: usize, reach: &[f64]| ranges[i] <= CANCELLED * reach[i];
        for _ in 1..LINKS {
            let passed_on: Vec<f64> = (0..n).map(|i| if cancelled(i, &reach) { reach[i] } else { ranges[i] }).collect();
            reach = self.reach(&passed_on, gain);
        }
        let noise = |i: usize| {
            let roundoff = f64::EPSILON * adds_up(self.terms[i][1], return_time, self.forgets[i][1]);
            let passed_on = if cancelled(i, &reach) { part * reach[i] } else { 0.0 };
            passed_on.max(RETURN_UNITS * roundoff)
        };
        let noise: Vec<f64> = (0..n).map(noise).collect();
        let range = |i: usize| (noise[i] / tolerance).max(REACH * reach[i]).max(FADING * alive * self.widest[i]);
        let died = |i: usize| noise[i].max(DIED_OUT * alive * self.widest[i]);
        Floor { range: (0..n).map(range).collect(), died: (0..n).map(died).collect(), noise }
    }

    /// What motions as wide as `ranges` could move each state by, were there no cancelling.
    fn reach(&self, ranges: &[f64], gain: impl Fn(&Coupling) -> f64) -> Vec<f64> {
        let mut reach = vec![0.0; ranges.len()];
        for coupling in self.couplings.iter().filter(|coupling| coupling.row != coupling.column) {
            reach[coupling.row] += gain(coupling) * ranges[coupling.column];
        }
        reach
    }

    /// Largest part that any state has kept of its widest range: all decay together where a motion goes to rest, and
    /// none of them has died out beside the others then.
    fn alive(&self, seen: &Observation) -> f64 {
        let kept = |(i, widest): (usize, &f64)| if *widest > 0.0 { seen.range(i) / widest } else { 0.0 };
        self.widest.iter().enumerate().map(kept).fold(0.0, f64::max).min(1.0)
    }
}

/// What a rate adds up to in a time, or as long as the state remembers it.
fn adds_up(rate: f64, time: f64, forgets: f64) -> f64 {
    rate * time / (1.0 + time * forgets)
}
