//! A periodic solution as a piecewise polynomial.
//!
//! On each of N mesh intervals `[t_i, t_(i+1)]` of scaled time `[0, 1]` every state is a polynomial of
//! degree m, stored by its values at the m+1 Chebyshev–Lobatto nodes `t_i + h_i (1 - cos(j pi/m))/2`,
//! j = 0..m; neighbouring intervals share the end node. Memory: `values[node * n + state]` with
//! `node = i*m + j`, so N m + 1 nodes in the order of time, the last one standing for time 1.
//! Evaluation is barycentric (Berrut & Trefethen 2004, SIAM Rev. 46:501): stable for every m.

use std::f64::consts::PI;

use serde::{Deserialize, Serialize};

/// Where the m+1 interpolation nodes of one interval sit in `[0, 1]`.
///
/// Chebyshev–Lobatto points, ascending, the first 0 and the last 1 exactly.
pub fn nodes(degree: usize) -> Vec<f64> {
    (0..=degree)
        .map(|j| match j {
            0 => 0.0,
            j if j == degree => 1.0,
            // sin^2 keeps full relative accuracy near 0, where 1 - cos cancels.
            j => (0.5 * PI * j as f64 / degree as f64).sin().powi(2),
        })
        .collect()
}

/// The barycentric weights that belong to [`nodes`]: alternating signs, halved at both ends.
pub fn barycentric_weights(degree: usize) -> Vec<f64> {
    (0..=degree)
        .map(|j| {
            let sign = if j % 2 == 0 { 1.0 } else { -1.0 };
            if j == 0 || j == degree { 0.5 * sign } else { sign }
        })
        .collect()
}

/// Fills `out[j]` with the j-th Lagrange polynomial on [`nodes`] at `s` in `[0, 1]`.
pub fn lagrange_at(nodes: &[f64], weights: &[f64], s: f64, out: &mut [f64]) {
    if let Some(hit) = nodes.iter().position(|&node| node == s) {
        out.fill(0.0);
        out[hit] = 1.0;
        return;
    }
    let mut sum = 0.0;
    for ((value, &node), &weight) in out.iter_mut().zip(nodes).zip(weights) {
        *value = weight / (s - node);
        sum += *value;
    }
    out.iter_mut().for_each(|value| *value /= sum);
}

/// A cycle (or any piecewise polynomial over one period); see the module text for the layout.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Profile {
    /// Number of states n.
    pub n_states: usize,
    /// Polynomial degree m on each interval, also the number of Gauss points.
    pub degree: usize,
    /// Length of one turn of the profile in the model's time unit.
    pub period: f64,
    /// The N+1 mesh points, ascending from 0 to 1.
    pub mesh: Vec<f64>,
    /// Node values, `(N m + 1) * n` numbers.
    pub values: Vec<f64>,
}

/// Why a set of numbers is no profile.
#[derive(Clone, Debug, PartialEq)]
pub enum ProfileFault {
    /// The mesh does not ascend strictly from 0 to 1.
    Mesh,
    /// There are `found` node values where `wanted` belong.
    Length {
        /// How many values there are.
        found: usize,
        /// How many the mesh and the degree ask for.
        wanted: usize,
    },
    /// A value or the period is not finite, or the period is not positive.
    NotFinite,
}

impl std::fmt::Display for ProfileFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Mesh => write!(f, "the mesh must ascend strictly from 0 to 1"),
            Self::Length { found, wanted } => {
                write!(f, "a profile of this mesh and degree has {wanted} node values, found {found}")
            }
            Self::NotFinite => write!(f, "every node value must be finite and the period positive"),
        }
    }
}

impl std::error::Error for ProfileFault {}

impl Profile {
    /// Number of mesh intervals N.
    pub fn intervals(&self) -> usize {
        self.mesh.len().saturating_sub(1)
    }

    /// Number of stored nodes, N m + 1.
    pub fn n_nodes(&self) -> usize {
        self.intervals() * self.degree + 1
    }

    /// The states at node `node`.
    pub fn node(&self, node: usize) -> &[f64] {
        &self.values[node * self.n_states..(node + 1) * self.n_states]
    }

    /// Scaled times of all nodes.
    pub fn node_times(&self) -> Vec<f64> {
        let local = nodes(self.degree);
        let mut times = Vec::with_capacity(self.n_nodes());
        for pair in self.mesh.windows(2) {
            let h = pair[1] - pair[0];
            times.extend(local[..self.degree].iter().map(|s| pair[0] + h * s));
        }
        times.push(1.0);
        times
    }

    /// Checks shapes and finiteness.
    ///
    /// # Errors
    /// The first [`ProfileFault`] met.
    pub fn validate(&self) -> Result<(), ProfileFault> {
        let ascending = self.mesh.windows(2).all(|pair| pair[1] > pair[0]);
        let ends = self.mesh.first() == Some(&0.0) && self.mesh.last() == Some(&1.0);
        if self.mesh.len() < 2 || !ascending || !ends || self.degree == 0 || self.n_states == 0 {
            return Err(ProfileFault::Mesh);
        }
        let wanted = self.n_nodes() * self.n_states;
        if self.values.len() != wanted {
            return Err(ProfileFault::Length { found: self.values.len(), wanted });
        }
        let finite = self.values.iter().all(|value| value.is_finite());
        if !finite || !self.period.is_finite() || self.period <= 0.0 {
            return Err(ProfileFault::NotFinite);
        }
        Ok(())
    }

    /// An evaluator that may be asked many times.
    pub fn evaluator(&self) -> Evaluator<'_> {
        Evaluator {
            profile: self,
            nodes: nodes(self.degree),
            weights: barycentric_weights(self.degree),
            basis: vec![0.0; self.degree + 1],
        }
    }

    /// The states at scaled time `time` (taken modulo 1). For many times use [`Profile::evaluator`].
    pub fn at(&self, time: f64) -> Vec<f64> {
        let mut out = vec![0.0; self.n_states];
        self.evaluator().at(time, &mut out);
        out
    }

    /// Smallest and largest value of each state, of the polynomials, not only of the nodes.
    ///
    /// Extremes are bracketed by the nodes and refined by golden section on the piece: the error is
    /// that of the profile itself plus about 1e-15 of the range (values near an extreme are flat).
    pub fn extremes(&self) -> Vec<(f64, f64)> {
        (0..self.n_states).map(|state| (self.extreme(state, -1.0), self.extreme(state, 1.0))).collect()
    }

    /// Range of each state over the nodes: some percent short of that of the polynomials, and much cheaper.
    pub fn node_ranges(&self) -> Vec<f64> {
        let range = |state: usize| {
            let values = || self.values.iter().skip(state).step_by(self.n_states).copied();
            values().fold(f64::NEG_INFINITY, f64::max) - values().fold(f64::INFINITY, f64::min)
        };
        (0..self.n_states).map(range).collect()
    }

    fn extreme(&self, state: usize, sign: f64) -> f64 {
        let n = self.n_states;
        let times = self.node_times();
        let count = times.len() - 1;
        let at_node = |k: usize| sign * self.values[k * n + state];
        let mut evaluator = self.evaluator();
        let mut buffer = vec![0.0; n];
        let best_node = (0..count).map(at_node).fold(f64::NEG_INFINITY, f64::max);
        let (low, _high) = (0..count).map(at_node).fold((f64::INFINITY, 0.0), |a, v| (a.0.min(v), 0.0));
        let slack = 0.02 * (best_node - low);
        let mut best = best_node;
        for k in 0..count {
            let (before, here, after) = (at_node((k + count - 1) % count), at_node(k), at_node((k + 1) % count));
            // Only a local node maximum close enough to the best can hide the true one.
            if here < before || here < after || here < best_node - slack {
                continue;
            }
            let left = if k == 0 { times[count - 1] - 1.0 } else { times[k - 1] };
            let mut value = |t: f64| {
                evaluator.at(t, &mut buffer);
                sign * buffer[state]
            };
            best = best.max(golden_maximum(left, times[k + 1], &mut value));
        }
        sign * best
    }

    /// Mean of each state over the period: Clenshaw–Curtis weights on the nodes, exact for the
    /// piecewise polynomial.
    pub fn means(&self) -> Vec<f64> {
        let weights = node_quadrature(self.degree);
        let n = self.n_states;
        let mut means = vec![0.0; n];
        for (i, pair) in self.mesh.windows(2).enumerate() {
            let h = pair[1] - pair[0];
            for (j, &weight) in weights.iter().enumerate() {
                let node = self.node(i * self.degree + j);
                means.iter_mut().zip(node).for_each(|(mean, value)| *mean += h * weight * value);
            }
        }
        means
    }

    /// The same cycle told as `turns` copies of itself: mesh repeated, period multiplied.
    pub fn repeated(&self, turns: usize) -> Profile {
        let scale = 1.0 / turns as f64;
        let mut mesh = Vec::with_capacity(self.intervals() * turns + 1);
        let mut values = Vec::with_capacity(self.values.len() * turns);
        let without_last = self.values.len() - self.n_states;
        for turn in 0..turns {
            mesh.extend(self.mesh[..self.intervals()].iter().map(|t| (turn as f64 + t) * scale));
            values.extend_from_slice(&self.values[..without_last]);
        }
        mesh.push(1.0);
        values.extend_from_slice(&self.values[without_last..]);
        Profile { n_states: self.n_states, degree: self.degree, period: self.period * turns as f64, mesh, values }
    }
}

/// Golden-section search for the largest value of `f` on `[a, b]`.
fn golden_maximum(mut a: f64, mut b: f64, f: &mut impl FnMut(f64) -> f64) -> f64 {
    const RATIO: f64 = 0.618_033_988_749_894_8;
    // Values are flat near a maximum: half the digits of the place give all digits of the value, and 0.618^36 = 3e-8.
    const STEPS: usize = 36;
    let (mut c, mut d) = (b - RATIO * (b - a), a + RATIO * (b - a));
    let (mut fc, mut fd) = (f(c), f(d));
    for _ in 0..STEPS {
        if fc > fd {
            (b, d, fd) = (d, c, fc);
            c = b - RATIO * (b - a);
            fc = f(c);
        } else {
            (a, c, fc) = (c, d, fd);
            d = a + RATIO * (b - a);
            fd = f(d);
        }
    }
    fc.max(fd)
}

/// Quadrature weights on [`nodes`] over `[0, 1]` (Clenshaw & Curtis 1960, Numer. Math. 2:197).
pub fn node_quadrature(degree: usize) -> Vec<f64> {
    if degree == 1 {
        return vec![0.5, 0.5];
    }
    let m = degree as f64;
    (0..=degree)
        .map(|j| {
            let end = if j == 0 || j == degree { 0.5 } else { 1.0 };
            let mut sum = 0.0;
            for k in 0..=degree / 2 {
                let half = if k == 0 || 2 * k == degree { 0.5 } else { 1.0 };
                let angle = 2.0 * PI * (j * k) as f64 / m;
                sum += half * angle.cos() / (1.0 - 4.0 * (k * k) as f64);
            }
            2.0 * end * sum / m
        })
        .collect()
}

/// Evaluates one profile at many times without allocating.
#[derive(Clone, Debug)]
pub struct Evaluator<'a> {
    profile: &'a Profile,
    nodes: Vec<f64>,
    weights: Vec<f64>,
    basis: Vec<f64>,
}

impl Evaluator<'_> {
    /// Writes the states at scaled time `time` (taken modulo 1) into `out` (n numbers).
    pub fn at(&mut self, time: f64, out: &mut [f64]) {
        let wrapped = if (0.0..=1.0).contains(&time) { time } else { time.rem_euclid(1.0) };
        let last = self.profile.intervals() - 1;
        let i = self.profile.mesh.partition_point(|&t| t <= wrapped).saturating_sub(1).min(last);
        let (a, b) = (self.profile.mesh[i], self.profile.mesh[i + 1]);
        self.in_interval(i, (wrapped - a) / (b - a), out);
    }

    /// Writes the states at local place `s` in `[0, 1]` of interval `i` into `out`.
    pub fn in_interval(&mut self, i: usize, s: f64, out: &mut [f64]) {
        lagrange_at(&self.nodes, &self.weights, s, &mut self.basis);
        let (n, m) = (self.profile.n_states, self.profile.degree);
        out.fill(0.0);
        let values = &self.profile.values[i * m * n..(i * m + m + 1) * n];
        for (node, &weight) in values.chunks_exact(n).zip(&self.basis) {
            out.iter_mut().zip(node).for_each(|(sum, value)| *sum += weight * value);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn circle(intervals: usize, degree: usize) -> Profile {
        let mut profile = Profile {
            n_states: 2,
            degree,
            period: 3.0,
            mesh: (0..=intervals).map(|i| i as f64 / intervals as f64).collect(),
            values: Vec::new(),
        };
        for t in profile.node_times() {
            let (s, c) = (2.0 * PI * t).sin_cos();
            profile.values.extend([c, s + 0.25]);
        }
        profile
    }

    /// Exact: the interpolant of a circle, error (h/2)^(m+1) u^(m+1) 2^(1-m)/(m+1)! by the Chebyshev bound.
    #[test]
    fn interpolation_converges_with_order_m_plus_1() {
        for degree in 3..=6 {
            let worst = |n: usize| {
                let profile = circle(n, degree);
                (0..997)
                    .map(|k| k as f64 / 997.0)
                    .fold(0.0f64, |worst, t| worst.max((profile.at(t)[0] - (2.0 * PI * t).cos()).abs()))
            };
            let slope = (worst(16) / worst(32)).log2();
            assert!((slope - (degree as f64 + 1.0)).abs() < 0.3, "degree {degree}: {slope}");
        }
    }

    #[test]
    fn extremes_and_means_are_those_of_the_circle() {
        let profile = circle(24, 6);
        let extremes = profile.extremes();
        for (found, exact) in extremes.iter().zip([(-1.0, 1.0), (-0.75, 1.25)]) {
            assert!((found.0 - exact.0).abs() < 2e-11 && (found.1 - exact.1).abs() < 2e-11, "{found:?}");
        }
        let means = profile.means();
        assert!(means[0].abs() < 1e-12 && (means[1] - 0.25).abs() < 1e-12, "{means:?}");
    }

    /// Exact: a polynomial of degree m is integrated without error.
    #[test]
    fn node_quadrature_is_exact_to_its_degree() {
        for degree in 1..=8 {
            let (nodes, weights) = (nodes(degree), node_quadrature(degree));
            for power in 0..=degree {
                let sum: f64 = nodes.iter().zip(&weights).map(|(x, w)| w * x.powi(power as i32)).sum();
                assert!((sum - 1.0 / (power as f64 + 1.0)).abs() < 1e-14, "{degree} {power} {sum}");
            }
        }
    }

    #[test]
    fn repeating_keeps_the_curve() {
        let (once, thrice) = (circle(8, 4), circle(8, 4).repeated(3));
        thrice.validate().expect("a repeated profile is a profile");
        for t in [0.01, 0.2, 0.777] {
            assert!((once.at(t)[0] - thrice.at((1.0 + t) / 3.0)[0]).abs() < 1e-13);
        }
        assert_eq!(thrice.period, 9.0);
    }
}
