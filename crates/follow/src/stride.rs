//! Choice of the next stride.
//!
//! Two rules, the shorter wins. Contraction of the corrector (Deuflhard, Fiedler & Kunkel 1987, SIAM J. Numer.
//! Anal. 24:912): `new = old sqrt(g(wanted) / g(found))`, `g(x) = sqrt(1 + 4x) - 1`. Curvature from the last
//! tangents (den Heijer & Rheinboldt 1981, SIAM J. Numer. Anal. 18:925): `k = 2 |sin(alpha/2)| / stride`,
//! extrapolated one step, `new = sqrt(2 e / k)`.

use crate::settings::Settings;

/// Bounds of one change of stride.
const SHRINK: f64 = 1.0 / 3.0;
/// See [`SHRINK`].
const GROW: f64 = 3.0;

/// Remembers the curvature of the last step.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct StrideControl {
    last: Option<(f64, f64)>,
}

/// What a finished step tells.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Finished {
    /// Stride of the step.
    pub stride: f64,
    /// Cosine between the tangents at its ends.
    pub cosine: f64,
    /// Contraction of its corrector.
    pub contraction: f64,
}

impl StrideControl {
    /// The stride after a finished step.
    pub(crate) fn next(&mut self, step: Finished, settings: &Settings) -> f64 {
        let by_corrector = step.stride * (growth(settings.contraction) / growth(step.contraction)).sqrt();
        // 2 |sin(alpha/2)| = sqrt(2 - 2 cos alpha).
        let curvature = (2.0 - 2.0 * step.cosine.min(1.0)).sqrt() / step.stride;
        let ahead = match self.last {
            Some((before, stride)) => curvature + step.stride / (step.stride + stride) * (curvature - before),
            None => curvature,
        };
        self.last = Some((curvature, step.stride));
        let least = 2.0 * settings.prediction_error / settings.longest.powi(2);
        let by_curvature = (2.0 * settings.prediction_error / ahead.max(0.5 * curvature).max(least)).sqrt();
        let bounded = by_corrector.min(by_curvature).clamp(SHRINK * step.stride, GROW * step.stride);
        bounded.clamp(settings.shortest, settings.longest)
    }
}

fn growth(x: f64) -> f64 {
    // A corrector that needed no second step would ask for an infinite stride; the bound GROW acts first.
    const LEAST: f64 = 1e-6;
    (1.0 + 4.0 * x.max(LEAST)).sqrt() - 1.0
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: on a circle of radius 1 the prediction error of a tangent step s is s^2/2 to leading order.
    #[test]
    fn on_a_circle_the_prediction_error_settles_at_the_wanted_one() {
        let settings = Settings { prediction_error: 1e-3, longest: 1.0, ..Settings::new((0.0, 1.0)) };
        let mut control = StrideControl::default();
        let mut stride = 0.01;
        for _ in 0..10 {
            stride = control.next(Finished { stride, cosine: stride.cos(), contraction: 1e-3 }, &settings);
        }
        assert!((0.5 * stride * stride / 1e-3 - 1.0).abs() < 1e-2, "{stride}");
    }

    #[test]
    fn a_slow_corrector_shortens_the_stride() {
        let settings = Settings::new((0.0, 1.0));
        let next = StrideControl::default().next(Finished { stride: 0.02, cosine: 1.0, contraction: 0.8 }, &settings);
        assert!(next < 0.02, "{next}");
    }
}
