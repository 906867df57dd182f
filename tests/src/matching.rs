//! A computed cycle against the true one, whatever the phase of either.

use armilla_record::Profile;

/// A cycle as a function of scaled time, of period 1: writes the states.
pub type Curve = Box<dyn Fn(f64, &mut [f64])>;

/// Samples of the true curve for the first guess of the phase.
const SAMPLES: usize = 2000;
/// Places at which a guess is judged.
const PLACES: usize = 100;
/// Places looked at in an interval of the mesh; the polynomial's error has no more than degree + 1 <= 9 bumps.
const PARTS: usize = 10;
/// Step of the difference quotient along the curve: its error only slows the iteration down.
const STEP: f64 = 1e-6;

/// Largest error of a profile over all states and times, each state relative to its true range (to 1 where that is 0),
/// at the phase of least squares.
///
/// The least possible error over all phases is at most this and not much less, so the number is on the safe side.
pub fn profile_error(profile: &Profile, truth: &Curve) -> f64 {
    let samples = sampled(profile.n_states, truth);
    let scales = scales(&samples, profile.n_states);
    let places = places(profile);
    let mut matching = Matching { truth, scales, wanted: vec![0.0; profile.n_states] };
    let found = evaluated(profile, &places);
    let mut shift = matching.refined(&places, &found, coarse(profile, &samples, &matching.scales));
    // Newton's method for the phase; three more steps than it ever takes.
    for _ in 0..8 {
        shift -= matching.step(&places, &found, shift);
    }
    matching.largest(&places, &found, shift)
}

fn sampled(n: usize, truth: &Curve) -> Vec<f64> {
    let mut samples = vec![0.0; n * SAMPLES];
    for (k, state) in samples.chunks_exact_mut(n).enumerate() {
        truth(k as f64 / SAMPLES as f64, state);
    }
    samples
}

fn scales(samples: &[f64], n: usize) -> Vec<f64> {
    (0..n)
        .map(|j| {
            let values = samples.iter().skip(j).step_by(n);
            let (low, high) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |a, v| (a.0.min(*v), a.1.max(*v)));
            if high > low { high - low } else { 1.0 }
        })
        .collect()
}

/// Scaled times inside every interval of the mesh.
fn places(profile: &Profile) -> Vec<f64> {
    let inside = |pair: &[f64]| {
        let (start, length) = (pair[0], pair[1] - pair[0]);
        (0..PARTS).map(move |part| start + length * part as f64 / PARTS as f64).collect::<Vec<_>>()
    };
    profile.mesh.windows(2).flat_map(inside).collect()
}

fn evaluated(profile: &Profile, places: &[f64]) -> Vec<f64> {
    let mut evaluator = profile.evaluator();
    let mut values = vec![0.0; places.len() * profile.n_states];
    for (place, state) in places.iter().zip(values.chunks_exact_mut(profile.n_states)) {
        evaluator.at(*place, state);
    }
    values
}

/// The phase, a multiple of 1/[`SAMPLES`], with the least sum of squares.
fn coarse(profile: &Profile, samples: &[f64], scales: &[f64]) -> f64 {
    let n = profile.n_states;
    let places: Vec<f64> = (0..PLACES).map(|k| k as f64 / PLACES as f64).collect();
    let found = evaluated(profile, &places);
    let misfit = |shift: usize| {
        let mut sum = 0.0;
        for (k, state) in found.chunks_exact(n).enumerate() {
            let at = (k * SAMPLES / PLACES + shift) % SAMPLES;
            sum += squares(state, &samples[at * n..(at + 1) * n], scales);
        }
        sum
    };
    let best = (0..SAMPLES).min_by(|a, b| misfit(*a).total_cmp(&misfit(*b))).unwrap_or(0);
    best as f64 / SAMPLES as f64
}

fn squares(a: &[f64], b: &[f64], scales: &[f64]) -> f64 {
    a.iter().zip(b).zip(scales).map(|((a, b), scale)| ((a - b) / scale).powi(2)).sum()
}

struct Matching<'a> {
    truth: &'a Curve,
    scales: Vec<f64>,
    wanted: Vec<f64>,
}

impl Matching<'_> {
    fn misfit(&mut self, places: &[f64], found: &[f64], shift: f64) -> f64 {
        let mut sum = 0.0;
        for (place, state) in places.iter().zip(found.chunks_exact(self.scales.len())) {
            (self.truth)(place + shift, &mut self.wanted);
            sum += squares(state, &self.wanted, &self.scales);
        }
        sum
    }

    /// Golden section about a coarse phase: where a cycle jumps, Newton's method needs a start within the jump's width.
    fn refined(&mut self, places: &[f64], found: &[f64], coarse: f64) -> f64 {
        const RATIO: f64 = 0.618_033_988_749_894_8;
        let thinned = places.len().div_ceil(1500);
        let n = self.scales.len();
        let places: Vec<f64> = places.iter().step_by(thinned).copied().collect();
        let found: Vec<f64> = found.chunks_exact(n).step_by(thinned).flatten().copied().collect();
        let (mut low, mut high) = (coarse - 2.0 / SAMPLES as f64, coarse + 2.0 / SAMPLES as f64);
        // From 2e-3 to 1e-7.
        for _ in 0..21 {
            let (left, right) = (high - RATIO * (high - low), low + RATIO * (high - low));
            if self.misfit(&places, &found, left) < self.misfit(&places, &found, right) {
                high = right;
            } else {
                low = left;
            }
        }
        0.5 * (low + high)
    }

    /// Gauss and Newton's correction of the phase.
    fn step(&mut self, places: &[f64], found: &[f64], shift: f64) -> f64 {
        let n = self.scales.len();
        let (mut before, mut after) = (vec![0.0; n], vec![0.0; n]);
        let (mut along, mut length) = (0.0, 0.0);
        for (place, state) in places.iter().zip(found.chunks_exact(n)) {
            (self.truth)(place + shift, &mut self.wanted);
            (self.truth)(place + shift - STEP, &mut before);
            (self.truth)(place + shift + STEP, &mut after);
            for j in 0..n {
                let slope = (after[j] - before[j]) / (2.0 * STEP * self.scales[j]);
                along += slope * (self.wanted[j] - state[j]) / self.scales[j];
                length += slope * slope;
            }
        }
        along / length
    }

    fn largest(&mut self, places: &[f64], found: &[f64], shift: f64) -> f64 {
        let mut largest = 0.0f64;
        for (place, state) in places.iter().zip(found.chunks_exact(self.scales.len())) {
            (self.truth)(place + shift, &mut self.wanted);
            for ((found, wanted), scale) in state.iter().zip(&self.wanted).zip(&self.scales) {
                largest = largest.max((found - wanted).abs() / scale);
            }
        }
        largest
    }
}

#[cfg(test)]
mod tests {
    use std::f64::consts::TAU;

    use super::*;

    /// A planted error of 3e-7 on a circle of range 2, with a phase of its own.
    #[test]
    fn a_planted_error_is_measured_whatever_the_phase() {
        let mut profile =
            Profile { n_states: 2, degree: 8, period: 1.0, mesh: crate::uniform_mesh(40), values: Vec::new() };
        for time in profile.node_times() {
            let (sine, cosine) = (TAU * (time + 0.3137)).sin_cos();
            // A third harmonic is no shift.
            profile.values.extend([cosine + 3e-7 * (3.0 * TAU * time).cos(), sine]);
        }
        let circle: Curve = Box::new(|time, state| {
            let (sine, cosine) = (TAU * time).sin_cos();
            state.copy_from_slice(&[cosine, sine]);
        });
        let found = profile_error(&profile, &circle);
        assert!((found / 1.5e-7 - 1.0).abs() < 1e-2, "{found:e}");
    }
}
