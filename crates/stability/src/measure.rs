//! A cycle reduced to the measures a table shows.

use armilla_record::{Profile, node_quadrature};

/// Measures of each state over one period.
#[derive(Clone, Debug, PartialEq)]
pub struct Measures {
    /// Largest values.
    pub maxima: Vec<f64>,
    /// Smallest values.
    pub minima: Vec<f64>,
    /// Means.
    pub means: Vec<f64>,
    /// Root mean squares about the means.
    pub spreads: Vec<f64>,
}

impl Measures {
    /// Measures of a profile.
    pub fn of(profile: &Profile) -> Self {
        let (minima, maxima) = profile.extremes().into_iter().unzip();
        let means = profile.means();
        let weights = node_quadrature(profile.degree);
        let mut squares = vec![0.0; profile.n_states];
        for (i, pair) in profile.mesh.windows(2).enumerate() {
            let h = pair[1] - pair[0];
            for (j, weight) in weights.iter().enumerate() {
                let node = profile.node(i * profile.degree + j);
                for ((square, value), mean) in squares.iter_mut().zip(node).zip(&means) {
                    *square += h * weight * (value - mean).powi(2);
                }
            }
        }
        // Clenshaw-Curtis weights are positive: no square can come out negative.
        let spreads = squares.into_iter().map(f64::sqrt).collect();
        Self { maxima, minima, means, spreads }
    }

    /// Largest range of any state over its scale.
    pub fn amplitude(&self, scales: &[f64]) -> f64 {
        let ranges = self.maxima.iter().zip(&self.minima).map(|(high, low)| high - low);
        ranges.zip(scales).map(|(range, scale)| range / scale).fold(0.0, f64::max)
    }
}
