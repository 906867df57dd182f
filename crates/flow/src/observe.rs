//! What an orbit does over a stretch of time: ranges and means of its states.

use crate::integrator::Integrator;

/// Ranges and means over a stretch of an orbit.
#[derive(Clone, Debug)]
pub(crate) struct Observation {
    pub(crate) low: Vec<f64>,
    pub(crate) high: Vec<f64>,
    integral: Vec<f64>,
    pub(crate) time: f64,
    point: Vec<f64>,
}

/// Places of a step and their weights in the integral (Boole's rule).
const PLACES: [(f64, f64); 5] =
    [(0.0, 7.0 / 90.0), (0.25, 32.0 / 90.0), (0.5, 12.0 / 90.0), (0.75, 32.0 / 90.0), (1.0, 7.0 / 90.0)];

impl Observation {
    pub(crate) fn new(n: usize) -> Self {
        Self {
            low: vec![f64::INFINITY; n],
            high: vec![f64::NEG_INFINITY; n],
            integral: vec![0.0; n],
            time: 0.0,
            point: vec![0.0; n],
        }
    }

    /// Takes in the last step of `integrator`.
    pub(crate) fn add(&mut self, integrator: &Integrator<'_>) {
        let h = integrator.time() - integrator.previous_time();
        for (theta, weight) in PLACES {
            integrator.dense(theta, &mut self.point);
            for (i, &value) in self.point.iter().enumerate() {
                self.low[i] = self.low[i].min(value);
                self.high[i] = self.high[i].max(value);
                self.integral[i] += h * weight * value;
            }
        }
        self.time += h;
    }

    pub(crate) fn range(&self, i: usize) -> f64 {
        (self.high[i] - self.low[i]).max(0.0)
    }

    pub(crate) fn magnitude(&self, i: usize) -> f64 {
        self.low[i].abs().max(self.high[i].abs())
    }

    pub(crate) fn mean(&self, i: usize) -> f64 {
        self.integral[i] / self.time
    }

    /// The state with the largest range relative to its largest absolute value, of those above their `least` range.
    pub(crate) fn liveliest(&self, least: &[f64]) -> usize {
        let ranges: Vec<(f64, f64)> = self.low.iter().copied().zip(self.high.iter().copied()).collect();
        liveliest(&ranges, least)
    }
}

/// Index of the largest relative range (max - min)/max(|max|, |min|); the first of equals. States whose range is
/// not above their `least`, which have died out beside others, do not count unless all have.
pub(crate) fn liveliest(ranges: &[(f64, f64)], least: &[f64]) -> usize {
    let relative = |i: usize| {
        let (low, high) = ranges[i];
        let size = low.abs().max(high.abs());
        if size > 0.0 { (high - low) / size } else { 0.0 }
    };
    let lives = |i: usize| ranges[i].1 - ranges[i].0 > least[i];
    let better = |best: usize, i: usize| if relative(i) > relative(best) { i } else { best };
    let all = 0..ranges.len();
    all.clone().filter(|i| lives(*i)).reduce(better).or(all.reduce(better)).unwrap_or(0)
}

/// Sizes with zeros replaced by the largest of them, or by `fallback` where all are zero.
pub(crate) fn filled(mut sizes: Vec<f64>, fallback: f64) -> Vec<f64> {
    let largest = sizes.iter().copied().fold(0.0, f64::max);
    let fill = if largest > 0.0 { largest } else { fallback };
    sizes.iter_mut().filter(|size| **size == 0.0).for_each(|size| *size = fill);
    sizes
}
