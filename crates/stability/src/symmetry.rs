//! Linear symmetries of order two: signed permutations S of the states with `S f(x) = f(S x)`, and cycles that have them.
//! Under a forcing `S f(t, x) = f(t', S x)`, t' = t + T/2 where the image is reached half a period later.
//!
//! A cycle is symmetric if half a period later it is its own image, `u(t + T/2) = S u(t)`, or if every state of it is,
//! `S u(t) = u(t)`. Candidates are read off the cycle: state i may go to state j with a sign where the one's course is the
//! other's; pairings of that kind are completed to involutions one state after another, and each is tried on the rates at
//! random states, where the cycle does not decide. Cost O(n^2) in samples of the cycle; of states that cannot be told from
//! each other (all at rest, say) at most [`CANDIDATES`] pairings are tried.
//!
//! On a symmetric cycle the multipliers of u(t + T/2) = S u(t) are squares, mu = nu^2, of those nu of the half-period map
//! followed by S; `nu = -1` breaks the symmetry with mu = 1, and mu = -1 does not occur generically (methods as in
//! Golubitsky, Stewart & Schaeffer 1988, Singularities and Groups in Bifurcation Theory 2; from memory).

use armilla_model::{Batch, VectorField};

use crate::point::CyclePoint;
use crate::problem::CycleProblem;

/// A signed permutation of order two that a cycle is symmetric under.
#[derive(Clone, Debug, PartialEq)]
pub struct Symmetry {
    /// State i of `S u` is `sign * u[index]`.
    pub image: Vec<(usize, f64)>,
    /// Whether the image is reached half a period later; else every state is its own image.
    pub half_period: bool,
}

/// How a direction behaves under a symmetry of its cycle.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Parity {
    /// The half-period multiplier nu (or, where every state is its own image, the sign under S) of a direction with mu = 1.
    pub multiplier: f64,
    /// Size of what is left of the direction after it.
    pub residue: f64,
}

/// Pairings tried at most: states that cannot be told from each other have exponentially many.
const CANDIDATES: usize = 64;
/// States up to which all signed involutions are tried: six have 1383.
const MOST_STATES: usize = 6;
/// Samples of a cycle over its period, for courses to be compared.
const SAMPLES: usize = 64;
/// Relative difference of two courses beyond which they are not the same: cycles are known much better.
const ALIKE: f64 = 1e-6;
/// Random states at which the rates are tried.
const TRIALS: usize = 8;
/// Relative difference of rates that is roundoff.
const ROUNDOFF: f64 = 1e-10;

impl Symmetry {
    /// The cycle that a cycle is carried to, at the same parameter value.
    pub fn image_of(&self, cycle: &CyclePoint) -> CyclePoint {
        let mut image = cycle.clone();
        let n = self.image.len();
        for (out, x) in image.unknowns.nodes.chunks_exact_mut(n).zip(cycle.unknowns.nodes.chunks_exact(n)) {
            self.apply(x, out);
        }
        image
    }

    /// State i of `S x`.
    fn apply(&self, x: &[f64], out: &mut [f64]) {
        for (out, (index, sign)) in out.iter_mut().zip(&self.image) {
            *out = sign * x[*index];
        }
    }
}

impl CycleProblem {
    /// The first symmetry a cycle is found to have: half a period later before state by state.
    pub fn symmetry(&self, point: &CyclePoint) -> Option<Symmetry> {
        self.symmetries(point).next()
    }

    /// Signed permutations of order two that carry solutions of the model into solutions, whether they leave any cycle as it
    /// is or not. Up to `MOST_STATES` states all are tried, beyond that only the change of every sign.
    pub fn mirrors(&self, point: &CyclePoint) -> Vec<Symmetry> {
        let n = self.metric.scales.len();
        let candidates = if n <= MOST_STATES {
            Pairing::all(&vec![vec![[true; 2]; n]; n], usize::MAX)
        } else {
            vec![(0..n).map(|i| (i, -1.0)).collect()]
        };
        let (parameters, states_of) = (self.parameters_at(point), self.box_of_states(point));
        let symmetries = candidates.into_iter().map(|image| Symmetry { image, half_period: false });
        let period = point.unknowns.period;
        symmetries.filter(|s| is_equivariant(self.spec.field.as_ref(), (&parameters, period), &states_of, s)).collect()
    }

    /// Means and sizes of the states.
    fn box_of_states(&self, point: &CyclePoint) -> Vec<(f64, f64)> {
        self.profile(point).means().into_iter().zip(self.metric.scales.iter().copied()).collect()
    }

    /// All symmetries found.
    fn symmetries(&self, point: &CyclePoint) -> impl Iterator<Item = Symmetry> {
        let parameters = self.parameters_at(point);
        let found = [true, false].into_iter().flat_map(move |half_period| {
            let alike = self.courses(point, if half_period { 0.5 } else { 0.0 });
            let candidates =
                Pairing::all(&alike, CANDIDATES).into_iter().map(move |image| Symmetry { image, half_period });
            candidates.collect::<Vec<_>>()
        });
        let field = self.spec.field.clone();
        let (box_of_states, period) = (self.box_of_states(point), point.unknowns.period);
        found.filter(move |symmetry| is_equivariant(field.as_ref(), (&parameters, period), &box_of_states, symmetry))
    }

    /// The symmetry of a cycle that a direction with mu = 1 breaks.
    pub fn broken_symmetry(&self, point: &CyclePoint, nodes: &[f64]) -> Option<(Symmetry, Parity)> {
        self.symmetries(point).find_map(|symmetry| {
            let parity = self.parity(point, nodes, &symmetry);
            // A direction that keeps the symmetry has +1; no other values are possible at mu = 1.
            (parity.multiplier < 0.0).then_some((symmetry, parity))
        })
    }

    /// nu from the direction itself: `v(t + T/2) = nu S v(t)`.
    fn parity(&self, point: &CyclePoint, nodes: &[f64], symmetry: &Symmetry) -> Parity {
        let mut profile = self.profile(point);
        profile.values = nodes.to_vec();
        let mut evaluator = profile.evaluator();
        let n = profile.n_states;
        let shift = if symmetry.half_period { 0.5 } else { 0.0 };
        let (mut now, mut later, mut image) = (vec![0.0; n], vec![0.0; n], vec![0.0; n]);
        let mut pairs = Vec::with_capacity(SAMPLES * n);
        for k in 0..SAMPLES {
            let time = k as f64 / SAMPLES as f64;
            evaluator.at(time, &mut now);
            evaluator.at(time + shift, &mut later);
            symmetry.apply(&now, &mut image);
            let scaled = later.iter().zip(&image).zip(&self.metric.scales);
            pairs.extend(scaled.map(|((later, image), scale)| (later / scale, image / scale)));
        }
        let square: f64 = pairs.iter().map(|(_, image)| image * image).sum();
        let multiplier = pairs.iter().map(|(later, image)| later * image).sum::<f64>() / square;
        let rest: f64 = pairs.iter().map(|(later, image)| (later - multiplier * image).powi(2)).sum();
        Parity { multiplier, residue: (rest / square).sqrt() }
    }

    /// For states i and j whether the course of i, a share of the period later, is that of j (first), or its negative.
    fn courses(&self, point: &CyclePoint, shift: f64) -> Vec<Vec<[bool; 2]>> {
        let profile = self.profile(point);
        let n = profile.n_states;
        let mut evaluator = profile.evaluator();
        let (mut now, mut later) = (vec![0.0; n], vec![0.0; n]);
        let mut apart = vec![vec![[0.0f64; 2]; n]; n];
        for k in 0..SAMPLES {
            let time = k as f64 / SAMPLES as f64;
            evaluator.at(time, &mut now);
            evaluator.at(time + shift, &mut later);
            for (i, row) in apart.iter_mut().enumerate() {
                for (j, [same, opposite]) in row.iter_mut().enumerate() {
                    let scale = self.metric.scales[i].max(self.metric.scales[j]);
                    *same = same.max((later[i] - now[j]).abs() / scale);
                    *opposite = opposite.max((later[i] + now[j]).abs() / scale);
                }
            }
        }
        apart.into_iter().map(|row| row.into_iter().map(|pair| pair.map(|apart| apart < ALIKE)).collect()).collect()
    }
}

/// A signed permutation under construction.
struct Pairing<'a> {
    alike: &'a [Vec<[bool; 2]>],
    image: Vec<Option<(usize, f64)>>,
    found: Vec<Vec<(usize, f64)>>,
    most: usize,
}

impl<'a> Pairing<'a> {
    /// All involutions but the identity that the courses allow, up to `most`.
    fn all(alike: &'a [Vec<[bool; 2]>], most: usize) -> Vec<Vec<(usize, f64)>> {
        let mut pairing = Pairing { alike, image: vec![None; alike.len()], found: Vec::new(), most };
        pairing.complete(0);
        pairing.found
    }

    fn complete(&mut self, from: usize) {
        if self.found.len() >= self.most {
            return;
        }
        let Some(i) = (from..self.image.len()).find(|i| self.image[*i].is_none()) else {
            let image: Vec<(usize, f64)> = self.image.iter().flatten().copied().collect();
            let identity = image.iter().enumerate().all(|(i, (j, sign))| i == *j && *sign > 0.0);
            if !identity {
                self.found.push(image);
            }
            return;
        };
        for j in i..self.image.len() {
            for (which, sign) in [(0, 1.0), (1, -1.0)] {
                let fits = self.image[j].is_none() && self.alike[i][j][which] && self.alike[j][i][which];
                if fits {
                    self.image[i] = Some((j, sign));
                    self.image[j] = Some((i, sign));
                    self.complete(i + 1);
                    self.image[i] = None;
                    self.image[j] = None;
                }
            }
        }
    }
}

/// Whether `f(t', S x) = S f(t, x)` at random states about as far out as the cycle goes, means and sizes of the states, and at
/// random times of its period.
fn is_equivariant(
    field: &dyn VectorField,
    (parameters, period): (&[f64], f64),
    states_of: &[(f64, f64)],
    symmetry: &Symmetry,
) -> bool {
    let n = states_of.len();
    let mut states = vec![0.0; n];
    let (mut image, mut wanted) = (vec![0.0; n], vec![0.0; n]);
    let mut evaluator = field.evaluator(&[]);
    let mut rates = |time: f64, x: &[f64]| {
        let mut out = vec![0.0; n];
        evaluator.rates(Batch { len: 1, time: &[time], states: x, parameters }, &mut out);
        out
    };
    let (mut sizes, mut apart) = (vec![0.0f64; n], vec![0.0f64; n]);
    for trial in 0..TRIALS {
        for (a, ((mean, size), x)) in states_of.iter().zip(&mut states).enumerate() {
            *x = mean + size * (fraction(trial * n + a) - 0.5);
        }
        symmetry.apply(&states, &mut image);
        let time = fraction(TRIALS * n + trial) * period;
        let later = if symmetry.half_period { time + 0.5 * period } else { time };
        let (here, there) = (rates(time, &states), rates(later, &image));
        symmetry.apply(&here, &mut wanted);
        for a in 0..n {
            sizes[a] = sizes[a].max(there[a].abs()).max(wanted[a].abs());
            apart[a] = apart[a].max((there[a] - wanted[a]).abs());
            // Written so that what is not a number is no symmetry.
            if !apart[a].is_finite() {
                return false;
            }
        }
    }
    apart.iter().zip(&sizes).all(|(apart, size)| *apart <= ROUNDOFF * size)
}

/// The k-th of a fixed sequence of random numbers in the unit interval, so that every run tries the same states
/// (splitmix: Steele, Lea & Flood 2014, OOPSLA, 453).
fn fraction(k: usize) -> f64 {
    let mut z = (k as u64 + 1).wrapping_mul(0x9e37_79b9_7f4a_7c15);
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    ((z ^ (z >> 31)) >> 11) as f64 / (1u64 << 53) as f64
}

#[cfg(test)]
mod tests {
    use super::*;

    /// By hand: Lorenz's courses, x and y to their negatives, z to itself; a state at rest goes either way.
    #[test]
    fn pairings_are_involutions() {
        let no = [false; 2];
        let lorenz = vec![vec![[false, true], no, no], vec![no, [false, true], no], vec![no, no, [true, false]]];
        assert_eq!(Pairing::all(&lorenz, CANDIDATES), [vec![(0, -1.0), (1, -1.0), (2, 1.0)]]);
        let at_rest = vec![vec![[true, false], no], vec![no, [true, true]]];
        assert_eq!(Pairing::all(&at_rest, CANDIDATES), [vec![(0, 1.0), (1, -1.0)]]);
        let twins = vec![vec![[true, false]; 2]; 2];
        assert_eq!(Pairing::all(&twins, CANDIDATES), [vec![(1, 1.0), (0, 1.0)]]);
        // Signed involutions of six letters without the identity: 2^6 + 15 2^5 + 45 2^4 + 15 2^3 - 1.
        assert_eq!(Pairing::all(&vec![vec![[true, true]; 6]; 6], usize::MAX).len(), 1383);
        // Many states that cannot be told from each other do not take for ever.
        let many = vec![vec![[true, true]; 50]; 50];
        assert_eq!(Pairing::all(&many, CANDIDATES).len(), CANDIDATES);
    }
}
