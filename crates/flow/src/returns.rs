//! Whether a sequence of returns closes, after how many, and how fast it gets there.
//!
//! With r_i the i-th return, `D_i = r_(i+k) - r_i` is the step of the k-th return map. A cycle of k returns
//! has D -> 0; near it `D_(i+k) = rho D_i` with rho the slowest multiplier, so what is left to go is
//! `D rho/(1 - rho)`. A slow approach is told from a slow decay of the oscillation itself by measuring D
//! against the range of the orbit now, and a chance near-return from a cycle by demanding that many
//! returns in a row close and do not open again.

use crate::section::Return;

/// The smallest k that closes, or the best there was.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Closing {
    /// The k-th return closes.
    Closed { returns: usize, contraction: Option<f64> },
    /// It would, but slowly; going to `state` at the time of the last return saves the wait.
    Leap { state: Vec<f64> },
    /// Nothing closes.
    Open,
}

/// The nearest return seen.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NearReturn {
    /// After how many returns.
    pub returns: usize,
    /// How near, relative to the range of each state, in the worst state.
    pub distance: f64,
    /// When it began.
    pub time: f64,
}

/// Largest number of returns of a cycle that is looked for.
pub(crate) const MOST_RETURNS: usize = 64;
/// Returns in a row that must close, and at least as many as the cycle has.
const IN_A_ROW: usize = 8;
/// Below this part of the tolerance a distance is integration error and no longer shrinks.
const NOISE: f64 = 0.01;
/// A cycle of k returns is told from one of fewer by returns this many times farther apart than what is left
/// to go, and by the square root of the tolerance at least: just before a doubling every second return closes
/// to the noise long before every return does.
const APART: f64 = 100.0;
/// A leap is tried when waiting would take more returns than this.
const PATIENCE: f64 = 40.0;
/// A leap needs the ratio rho of successive steps steady within this part of 1 - rho, and the steps this
/// parallel: it then lands within about a fifth of the distance that was left. An alternating approach
/// (rho < 0) is left to twice as many returns, where it does not alternate: extrapolated by itself it
/// would lead into the middle of a doubled cycle.
const STEADY: f64 = 0.2;
const PARALLEL: f64 = 0.99;
/// A leap goes no farther than this (relative to the range): as far as the middle of the motion. The return
/// map need not be linear over that distance: the next leap starts from much nearer.
const LEAP_WITHIN: f64 = 1.0;

/// The returns so far with the scale of each state.
pub(crate) struct Sequence<'a> {
    pub(crate) returns: &'a [Return],
    /// Range of each state; a state that does not move has scale infinity.
    pub(crate) scale: &'a [f64],
    /// Roundoff of each state: what two returns differ by less than this is no difference.
    pub(crate) noise: &'a [f64],
}

impl Sequence<'_> {
    /// Way from one return to another in one state, relative to its scale, less the noise.
    fn way(&self, i: usize, k: usize, state: usize) -> f64 {
        let way = self.returns[i + k].state[state] - self.returns[i].state[state];
        (way - way.clamp(-self.noise[state], self.noise[state])) / self.scale[state]
    }

    /// Distance between two returns, worst state.
    fn distance(&self, i: usize, k: usize) -> f64 {
        (0..self.scale.len()).map(|state| self.way(i, k, state).abs()).fold(0.0, f64::max)
    }

    /// Ratio of the step from `i + k` to the step from `i`, both over `k` returns, and their cosine.
    fn ratio(&self, i: usize, k: usize) -> (f64, f64) {
        let (mut inner, mut first, mut second) = (0.0, 0.0, 0.0);
        for state in 0..self.scale.len() {
            let (a, b) = (self.way(i, k, state), self.way(i + k, k, state));
            inner += a * b;
            first += a * a;
            second += b * b;
        }
        (inner / first, inner / (first * second).sqrt())
    }

    /// Number of closings over `k` returns that are looked at.
    fn window(k: usize) -> usize {
        IN_A_ROW.max(k)
    }

    /// Looks for the smallest k whose returns close to `tolerance`.
    pub(crate) fn closing(&self, tolerance: f64) -> Closing {
        for k in 1..=MOST_RETURNS {
            if self.returns.len() < Self::window(k) + 2 * k {
                break;
            }
            if let Some(closed) = self.closed(k, tolerance) {
                return closed;
            }
        }
        (1..=MOST_RETURNS).find_map(|k| self.leap(k, tolerance)).unwrap_or(Closing::Open)
    }

    fn closed(&self, k: usize, tolerance: f64) -> Option<Closing> {
        let last = self.returns.len() - 1 - k;
        let first = last + 1 - Self::window(k);
        let distances = || (first..=last).map(|i| self.distance(i, k));
        if distances().any(|distance| distance > tolerance) {
            return None;
        }
        // Halves, so that a rotating approach is not mistaken for one that opens again.
        let half = Self::window(k) / 2;
        let worst = |from: usize, to: usize| (from..=to).map(|i| self.distance(i, k)).fold(0.0, f64::max);
        let (begin, end) = (worst(first, last - half), worst(last + 1 - half, last));
        let rho = self.ratio(last - k, k).0;
        let is_noise = end <= NOISE * tolerance;
        let left = if is_noise { end } else { end * rho.abs() / (1.0 - rho) };
        // What opens after a step of none has no ratio.
        if !is_noise && (end > begin || rho.is_nan() || rho.abs() >= 1.0 || left > tolerance) {
            return None;
        }
        let apart = (APART * left.max(end)).max(tolerance.sqrt());
        let mut parts = (1..k).filter(|part| k.is_multiple_of(*part));
        if parts.any(|part| (last..last + k - part).all(|i| self.distance(i, part) <= apart)) {
            return None;
        }
        Some(Closing::Closed { returns: k, contraction: (!is_noise).then_some(rho) })
    }

    /// The limit of a geometric approach, where that is what the last returns show.
    fn leap(&self, k: usize, tolerance: f64) -> Option<Closing> {
        let count = Self::window(k);
        if self.returns.len() < count + 2 * k {
            return None;
        }
        let last = self.returns.len() - 1;
        let begin = last + 1 - 2 * k - count;
        let ratios = || (begin..=last - 2 * k).map(|i| self.ratio(i, k));
        let rho = self.ratio(last - 2 * k, k).0;
        let distance = self.distance(last - k, k);
        let steady = ratios().all(|(ratio, cosine)| (ratio - rho).abs() <= STEADY * (1.0 - rho) && cosine >= PARALLEL);
        let left = distance * rho / (1.0 - rho);
        let wait = (left / tolerance).ln() / -rho.ln() * k as f64;
        let near = distance.max(left) <= LEAP_WITHIN;
        if !(0.0..1.0).contains(&rho) || !steady || !near || wait <= PATIENCE {
            return None;
        }
        let (a, b) = (&self.returns[last - k].state, &self.returns[last].state);
        let factor = rho / (1.0 - rho);
        Some(Closing::Leap { state: a.iter().zip(b).map(|(a, b)| b + factor * (b - a)).collect() })
    }

    /// Length of the ways from every return to the `k`-th after it, together, in units of the extent of all
    /// returns. A drift to one point goes once along the extent, to k points far apart on k short ways; a closed
    /// curve is gone round many times, or covered many times over by k pieces.
    pub(crate) fn laps(&self, k: usize) -> f64 {
        let count = self.returns.len();
        let path: f64 = (0..count.saturating_sub(k)).map(|i| self.distance(i, k)).sum();
        let extent = (0..count).map(|i| self.distance(0, i)).fold(0.0, f64::max);
        if extent > 0.0 { path / extent } else { 0.0 }
    }

    /// The nearest return among the last ones.
    pub(crate) fn nearest(&self) -> Option<NearReturn> {
        let count = self.returns.len();
        let begin = count.saturating_sub(4 * MOST_RETURNS);
        let pairs = (begin..count).flat_map(|i| (1..=MOST_RETURNS.min(count - 1 - i)).map(move |k| (i, k)));
        pairs
            .map(|(i, k)| NearReturn { returns: k, distance: self.distance(i, k), time: self.returns[i].time })
            .min_by(|a, b| a.distance.total_cmp(&b.distance))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sequence(count: usize, map: impl Fn(f64) -> f64) -> Vec<Return> {
        let mut x = 0.37;
        (0..count)
            .map(|i| {
                x = map(x);
                Return { time: i as f64, state: vec![x] }
            })
            .collect()
    }

    fn closing(returns: &[Return]) -> Closing {
        Sequence { returns, scale: &[1.0], noise: &[0.0] }.closing(1e-9)
    }

    /// Known cycles of the logistic map x -> r x (1 - x): one turn at 2.8, two at 3.2, four at 3.5, three at
    /// 3.83, none at 4 (May 1976, Nature 261:459).
    #[test]
    fn the_logistic_map_closes_where_it_should() {
        for (r, turns) in [(2.8, 1), (3.2, 2), (3.5, 4), (3.83, 3)] {
            let returns = sequence(600, |x| r * x * (1.0 - x));
            let Closing::Closed { returns: k, .. } = closing(&returns) else { panic!("{r} does not close") };
            assert_eq!(k, turns, "r = {r}");
        }
        let returns = sequence(4000, |x| 4.0 * x * (1.0 - x));
        assert_eq!(closing(&returns), Closing::Open);
    }

    /// A planted limit 1 approached with multipliers 0.995 and -0.995 (exact geometric sequences).
    #[test]
    fn a_slow_approach_leaps_to_its_limit() {
        for rho in [0.995, -0.995] {
            let returns = sequence(700, |x| 1.0 + rho * (x - 1.0));
            let Closing::Leap { state } = closing(&returns) else { panic!("{rho}: {:?}", closing(&returns)) };
            assert!((state[0] - 1.0).abs() < 1e-9, "{state:?}");
        }
    }

    /// A rotation by an irrational angle comes back near but never closes.
    #[test]
    fn a_rotation_does_not_close() {
        let returns: Vec<Return> = (0..3000)
            .map(|i| Return { time: i as f64, state: vec![(i as f64 * 2.399).cos(), (i as f64 * 2.399).sin()] })
            .collect();
        assert_eq!(Sequence { returns: &returns, scale: &[2.0, 2.0], noise: &[0.0; 2] }.closing(1e-9), Closing::Open);
    }
}
