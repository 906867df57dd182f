//! A smooth closed curve through samples with noise.
//!
//! For samples `(s_i, y_i)` of a function of period 1 with weights w_i the periodic cubic spline that minimises
//! `Sum w_i (y_i - g(s_i))^2 + alpha Int g''^2 ds` (Reinsch 1967, Numer. Math. 10:177): with second derivatives gamma at the
//! knots, `(R + alpha Q^T W^-1 Q) gamma = Q^T y`, `g = y - alpha W^-1 Q gamma`, all banded. alpha is chosen for each state
//! by generalised cross-validation, `Sum w (y - g)^2 / (Sum (1 - A_ii))^2` least, which needs no knowledge of the noise
//! (Craven & Wahba 1979, Numer. Math. 31:377); the leverages A_ii come from the central band of an inverse (Hutchinson &
//! de Hoog 1985, Numer. Math. 47:99). The period is closed by telling the samples three times and keeping the middle.

use armilla_record::Profile;

/// Weight of each number that a curve uses: 1 by theory, more keeps few samples from being followed into their noise (Kim & Gu
/// 2004, J. R. Stat. Soc. B 66:337, who advise 1.2 to 1.4).
const USED: f64 = 1.2;
/// Lowest cutoff tried, in waves per period; a lower one would flatten the first harmonic.
const LOWEST: f64 = 1.5;
/// Ratio of one cutoff tried to the next.
const RATIO: f64 = 1.25;
/// Cutoffs go up to so many waves per sample of one turn: the curve then goes through all samples of one turn. Higher ones
/// would string the samples of several turns together where these nearly fall on the same phases.
const HIGHEST: f64 = 1.0;

/// Samples of one period in ascending order of phase, at distinct phases in `[0, 1)`.
#[derive(Clone, Debug)]
pub(crate) struct Folded {
    /// Phases, M numbers.
    pub phases: Vec<f64>,
    /// Number of samples each stands for.
    pub weights: Vec<f64>,
    /// States, M n numbers: means of the samples that each stands for.
    pub states: Vec<f64>,
    /// Sum of the squared distances of all samples from these means, for each state.
    pub scatter: Vec<f64>,
    /// Samples of one turn.
    pub per_turn: f64,
    /// Number of states.
    pub n: usize,
}

/// A smooth closed curve.
#[derive(Clone, Debug)]
pub(crate) struct Smooth {
    /// Knots, from the last one before phase 0 to the first one at or behind phase 1.
    knots: Vec<f64>,
    /// Values and second derivatives of each state at the knots, state by state.
    values: Vec<Vec<f64>>,
    bends: Vec<Vec<f64>>,
    /// Estimated standard deviation of the noise of each state.
    pub noise: Vec<f64>,
    /// Mean over the states of the score of cross-validation, relative to the variance of each.
    pub score: f64,
    /// Cutoff of each state, in waves per period.
    pub cutoffs: Vec<f64>,
}

/// The three copies of the samples with what does not depend on alpha.
struct Tiled {
    knots: Vec<f64>,
    gaps: Vec<f64>,
    weights: Vec<f64>,
    count: usize,
}

impl Folded {
    /// The curve whose cutoffs cross-validation likes best, or smoother ones: cutoffs are divided by `calm`.
    pub(crate) fn smooth(&self, calm: f64) -> Smooth {
        let cutoffs = self.cutoffs();
        let tiled = Tiled::new(self);
        let columns: Vec<Vec<f64>> = (0..self.n).map(|a| tiled.column(self, a)).collect();
        let mut best = vec![(f64::INFINITY, LOWEST); self.n];
        for &cutoff in &cutoffs {
            let bands = tiled.factor(self.alpha(cutoff));
            let free = tiled.freedom(&bands);
            for (a, (best, column)) in best.iter_mut().zip(&columns).enumerate() {
                let fit = tiled.solve(&bands, column);
                let score = self.score(tiled.misfit(column, &fit.0) + self.scatter[a], free);
                if score < best.0 {
                    *best = (score, cutoff);
                }
            }
        }
        let chosen: Vec<f64> = best.iter().map(|(_, cutoff)| (cutoff / calm).max(LOWEST)).collect();
        self.with_cutoffs(&tiled, &columns, &chosen)
    }

    /// The curve with given cutoffs, one for each state.
    pub(crate) fn smooth_at(&self, cutoffs: &[f64]) -> Smooth {
        let tiled = Tiled::new(self);
        let columns: Vec<Vec<f64>> = (0..self.n).map(|a| tiled.column(self, a)).collect();
        self.with_cutoffs(&tiled, &columns, cutoffs)
    }

    fn with_cutoffs(&self, tiled: &Tiled, columns: &[Vec<f64>], cutoffs: &[f64]) -> Smooth {
        let keep = tiled.count - 1..2 * tiled.count + 1;
        let mut smooth = Smooth {
            knots: tiled.knots[keep.clone()].to_vec(),
            values: Vec::new(),
            bends: Vec::new(),
            noise: Vec::new(),
            score: 0.0,
            cutoffs: cutoffs.to_vec(),
        };
        for (a, (column, cutoff)) in columns.iter().zip(cutoffs).enumerate() {
            let bands = tiled.factor(self.alpha(*cutoff));
            let free = tiled.freedom(&bands);
            let (values, bends) = tiled.solve(&bands, column);
            let misfit = tiled.misfit(column, &values) + self.scatter[a];
            smooth.noise.push((misfit / (free + self.merged()).max(f64::MIN_POSITIVE)).sqrt());
            let variance = self.variance(a);
            if variance > 0.0 {
                smooth.score += self.score(misfit, free) / variance / self.n as f64;
            }
            smooth.values.push(values[keep.clone()].to_vec());
            smooth.bends.push(bends[keep.clone()].to_vec());
        }
        smooth
    }

    /// Score of cross-validation of a misfit, per sample, where the curve leaves `free` of the means; infinite where it uses
    /// up too many.
    fn score(&self, misfit: f64, free: f64) -> f64 {
        let used = self.phases.len() as f64 - free;
        let left = self.total() - USED * used;
        if left > 0.0 { self.total() * misfit / (left * left) } else { f64::INFINITY }
    }

    fn total(&self) -> f64 {
        self.weights.iter().sum()
    }

    /// Samples that do not count by themselves.
    fn merged(&self) -> f64 {
        self.total() - self.phases.len() as f64
    }

    /// Weight of the bending at which waves of the cutoff lose half their size.
    fn alpha(&self, cutoff: f64) -> f64 {
        self.total() * (std::f64::consts::TAU * cutoff).powi(-4)
    }

    fn cutoffs(&self) -> Vec<f64> {
        let most = (HIGHEST * self.per_turn).max(RATIO * LOWEST);
        std::iter::successors(Some(LOWEST), |cutoff| Some(cutoff * RATIO)).take_while(|cutoff| *cutoff < most).collect()
    }

    fn variance(&self, a: usize) -> f64 {
        let values = || self.states.iter().skip(a).step_by(self.n).zip(&self.weights);
        let mean = values().map(|(x, w)| w * x).sum::<f64>() / self.total();
        values().map(|(x, w)| w * (x - mean).powi(2)).sum::<f64>() / self.total()
    }
}

/// `L D L^T` of a symmetric matrix with two diagonals beside the main one.
struct Bands {
    alpha: f64,
    diagonal: Vec<f64>,
    first: Vec<f64>,
    second: Vec<f64>,
}

impl Tiled {
    fn new(folded: &Folded) -> Self {
        let count = folded.phases.len();
        let knots: Vec<f64> = (-1..2).flat_map(|tile| folded.phases.iter().map(move |s| s + f64::from(tile))).collect();
        let gaps = knots.windows(2).map(|pair| pair[1] - pair[0]).collect();
        Self { gaps, weights: folded.weights.repeat(3), knots, count }
    }

    fn column(&self, folded: &Folded, a: usize) -> Vec<f64> {
        let one: Vec<f64> = folded.states.iter().skip(a).step_by(folded.n).copied().collect();
        one.repeat(3)
    }

    /// Column j of Q at the three knots around the inner knot j + 1.
    fn q(&self, j: usize) -> [f64; 3] {
        let (left, right) = (1.0 / self.gaps[j], 1.0 / self.gaps[j + 1]);
        [left, -left - right, right]
    }

    /// Factors `R + alpha Q^T W^-1 Q`.
    fn factor(&self, alpha: f64) -> Bands {
        let size = self.knots.len() - 2;
        let (mut diagonal, mut first, mut second) = (vec![0.0; size], vec![0.0; size], vec![0.0; size]);
        for j in 0..size {
            let (q, gaps) = (self.q(j), [self.gaps[j], self.gaps[j + 1]]);
            let over = |k: usize| alpha / self.weights[j + k];
            diagonal[j] = (gaps[0] + gaps[1]) / 3.0 + (0..3).map(|k| over(k) * q[k] * q[k]).sum::<f64>();
            if j + 1 < size {
                let next = self.q(j + 1);
                first[j] = gaps[1] / 6.0 + over(1) * q[1] * next[0] + over(2) * q[2] * next[1];
            }
            if j + 2 < size {
                second[j] = over(2) * q[2] * self.q(j + 2)[0];
            }
        }
        // In place: entries become those of L.
        for j in 0..size {
            let d = diagonal[j];
            let (e, f) = (first[j] / d, second[j] / d);
            if j + 1 < size {
                diagonal[j + 1] -= e * first[j];
                first[j + 1] -= e * second[j];
            }
            if j + 2 < size {
                diagonal[j + 2] -= f * second[j];
            }
            (first[j], second[j]) = (e, f);
        }
        Bands { alpha, diagonal, first, second }
    }

    /// Values and second derivatives at all knots.
    fn solve(&self, bands: &Bands, y: &[f64]) -> (Vec<f64>, Vec<f64>) {
        let size = bands.diagonal.len();
        let mut inner: Vec<f64> = (0..size).map(|j| (0..3).map(|k| self.q(j)[k] * y[j + k]).sum()).collect();
        for j in 0..size {
            if j + 1 < size {
                inner[j + 1] -= bands.first[j] * inner[j];
            }
            if j + 2 < size {
                inner[j + 2] -= bands.second[j] * inner[j];
            }
        }
        for j in (0..size).rev() {
            inner[j] /= bands.diagonal[j];
            for (away, factor) in [(1, bands.first[j]), (2, bands.second[j])] {
                if j + away < size {
                    inner[j] -= factor * inner[j + away];
                }
            }
        }
        let mut values = y.to_vec();
        for (j, bend) in inner.iter().enumerate() {
            for (k, q) in self.q(j).into_iter().enumerate() {
                values[j + k] -= bands.alpha / self.weights[j + k] * q * bend;
            }
        }
        let bends = std::iter::once(0.0).chain(inner).chain([0.0]).collect();
        (values, bends)
    }

    /// `Sum (1 - A_ii)` over the middle copy: what the fit leaves free.
    fn freedom(&self, bands: &Bands) -> f64 {
        let size = bands.diagonal.len();
        // Central band of the inverse, from the end.
        let (mut main, mut one, mut two) = (vec![0.0; size + 2], vec![0.0; size + 2], vec![0.0; size + 2]);
        for j in (0..size).rev() {
            let (e, f) = (bands.first[j], bands.second[j]);
            two[j] = -e * one[j + 1] - f * main[j + 2];
            one[j] = -e * main[j + 1] - f * one[j + 1];
            main[j] = 1.0 / bands.diagonal[j] - e * one[j] - f * two[j];
        }
        (self.count..2 * self.count)
            .map(|i| {
                // Row i of Q meets the columns i - 2, i - 1, i.
                let [a, b, c] = [self.q(i - 2)[2], self.q(i - 1)[1], self.q(i)[0]];
                let j = i - 2;
                let squares = a * a * main[j] + b * b * main[j + 1] + c * c * main[j + 2];
                let products = a * b * one[j] + b * c * one[j + 1] + a * c * two[j];
                bands.alpha / self.weights[i] * (squares + 2.0 * products)
            })
            .sum()
    }

    /// `Sum w (y - g)^2` over the middle copy.
    fn misfit(&self, y: &[f64], g: &[f64]) -> f64 {
        (self.count..2 * self.count).map(|i| self.weights[i] * (y[i] - g[i]).powi(2)).sum()
    }
}

impl Smooth {
    /// State at a phase.
    pub(crate) fn at(&self, phase: f64, state: &mut [f64]) {
        let phase = phase - phase.floor();
        let right = self.knots.partition_point(|knot| *knot <= phase).clamp(1, self.knots.len() - 1);
        let h = self.knots[right] - self.knots[right - 1];
        let b = (phase - self.knots[right - 1]) / h;
        let a = 1.0 - b;
        for ((value, values), bends) in state.iter_mut().zip(&self.values).zip(&self.bends) {
            let bend = (a.powi(3) - a) * bends[right - 1] + (b.powi(3) - b) * bends[right];
            *value = a * values[right - 1] + b * values[right] + h * h / 6.0 * bend;
        }
    }

    /// The curve as a profile of a period, on a mesh of its knots.
    pub(crate) fn profile(&self, period: f64) -> Profile {
        let n = self.values.len();
        let inner = self.knots.iter().copied().filter(|knot| *knot > 0.0 && *knot < 1.0);
        let mesh: Vec<f64> = std::iter::once(0.0).chain(inner).chain([1.0]).collect();
        // Cubic pieces of one phase interval each.
        let mut profile = Profile { n_states: n, degree: 3, period, mesh, values: Vec::new() };
        let mut state = vec![0.0; n];
        for time in profile.node_times() {
            self.at(time, &mut state);
            profile.values.extend_from_slice(&state);
        }
        let last = profile.values.len() - n;
        let (begin, rest) = profile.values.split_at_mut(n);
        rest[last - n..].copy_from_slice(begin);
        profile
    }
}

#[cfg(test)]
mod tests {
    use std::f64::consts::TAU;

    use super::*;

    fn folded(count: usize, noise: impl Fn(usize) -> f64) -> Folded {
        let phases: Vec<f64> = (0..count).map(|k| (k as f64 + 0.3) / count as f64).collect();
        let wave = |s: f64| [(TAU * s).sin() + 0.3 * (3.0 * TAU * s).cos(), 2.0 + (TAU * s).cos()];
        let states = phases.iter().enumerate().flat_map(|(k, s)| wave(*s).map(|x| x + noise(k))).collect();
        Folded { weights: vec![1.0; count], phases, states, scatter: vec![0.0; 2], per_turn: count as f64, n: 2 }
    }

    /// Exact: the wave itself. Without noise the highest cutoffs are taken that leave a sixth of the numbers free: far above
    /// the third harmonic, which loses less than a thousandth.
    #[test]
    fn a_smooth_wave_is_met() {
        let smooth = folded(60, |_| 0.0).smooth(1.0);
        let mut state = [0.0; 2];
        let bound = 1e-3;
        for k in 0..500 {
            let s = k as f64 / 500.0;
            smooth.at(s, &mut state);
            let exact = (TAU * s).sin() + 0.3 * (3.0 * TAU * s).cos();
            assert!((state[0] - exact).abs() < bound, "{s}: {} {exact}", state[0]);
        }
        assert!(smooth.noise.iter().all(|noise| *noise < bound), "{:?}", smooth.noise);
    }

    /// Planted noise of standard deviation 0.1 is found, and the curve is nearer to the wave than the samples by far: a
    /// fit with d free waves leaves `sqrt((2 d + 1)/M)` of the noise.
    #[test]
    fn noise_is_measured_and_smoothed() {
        // Sums of equidistributed numbers are nearly normal (12 of them have variance 1).
        let noise = |k: usize| {
            let part =
                |j: usize| (((12 * k + j) as f64 + 0.5) * 0.754_877_666_246_692_8 * (j as f64 + 1.37)).fract() - 0.5;
            0.1 * (0..12).map(part).sum::<f64>()
        };
        let smooth = folded(400, noise).smooth(1.0);
        for found in &smooth.noise {
            assert!((found / 0.1 - 1.0).abs() < 0.15, "{:?}", smooth.noise);
        }
        let mut state = [0.0; 2];
        let mut worst = 0.0f64;
        for k in 0..200 {
            let s = k as f64 / 200.0;
            smooth.at(s, &mut state);
            worst = worst.max((state[1] - 2.0 - (TAU * s).cos()).abs());
        }
        assert!(worst < 0.06, "{worst}");
    }

    /// By hand: `Sum A_ii` counts what a fit uses. A cutoff beyond all samples uses them all, one far below a few.
    #[test]
    fn freedom_counts() {
        let folded = folded(100, |_| 0.0);
        let tiled = Tiled::new(&folded);
        assert!(tiled.freedom(&tiled.factor(folded.alpha(400.0))) < 1.0);
        let left = tiled.freedom(&tiled.factor(folded.alpha(5.0)));
        // Waves up to the cutoff are kept: 2 * 5 + 1 of 100 numbers, in the mean over a soft edge.
        assert!((left - 89.0).abs() < 3.0, "{left}");
    }

    /// The profile closes and is the curve.
    #[test]
    fn the_profile_is_the_curve() {
        let smooth = folded(50, |_| 0.0).smooth(1.0);
        let profile = smooth.profile(3.0);
        assert_eq!(profile.node(0), profile.node(profile.n_nodes() - 1));
        let (mut a, mut b) = ([0.0; 2], [0.0; 2]);
        for k in 0..100 {
            let s = k as f64 / 100.0;
            smooth.at(s, &mut a);
            profile.evaluator().at(s, &mut b);
            assert!((a[0] - b[0]).abs() + (a[1] - b[1]).abs() < 1e-12, "{s}");
        }
    }
}
