//! How the eigenvalues nearest to the imaginary axis move along a branch.
//!
//! `d lambda = psi^H (A_p dp + B(dx, .)) v / psi^H v` along the tangent. With values and slopes at both ends of a stride the
//! cubic between them shows pairs of events that cancel inside it.

use super::local::Along;
use super::locate::RestStation;
use super::null::{ComplexNull, RealNull};
use super::problem::{EquilibriumProblem, is_neutral};
use super::systems::Complex;

/// An eigenvalue with the slope of its real part.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CriticalSlope {
    /// Real part.
    pub re: f64,
    /// Imaginary part, not negative.
    pub im: f64,
    /// Change of the real part by distance along the branch.
    pub slope: f64,
}

/// Eigenvalues looked at: further ones cross later.
const LOOKED_AT: usize = 3;

impl EquilibriumProblem {
    /// The eigenvalues nearest to the imaginary axis with the slopes of their real parts; those that have none, as a
    /// double one, are left out.
    pub fn critical_slopes(&mut self, station: &RestStation) -> Vec<CriticalSlope> {
        let Ok(spectrum) = self.spectrum(&station.point) else { return Vec::new() };
        // On the axis all along they have no side to change.
        let is_critical = |value: &armilla_linalg::Eigenvalue| value.im >= 0.0 && !is_neutral(value.re, spectrum.norm);
        let mut nearest: Vec<_> = spectrum.values.iter().filter(|value| is_critical(value)).copied().collect();
        nearest.sort_by(|a, b| a.re.abs().total_cmp(&b.re.abs()));
        nearest.truncate(LOOKED_AT);
        let slope = |value: &armilla_linalg::Eigenvalue| {
            let slope = self.slope(station, (value.re, value.im))?;
            Some(CriticalSlope { re: value.re, im: value.im, slope })
        };
        nearest.iter().filter_map(slope).collect()
    }

    fn slope(&mut self, station: &RestStation, (re, im): (f64, f64)) -> Option<f64> {
        let at = &station.point;
        self.local.linearise(at).ok()?;
        let sizes = self.border_sizes();
        let tangent = Along { states: &station.tangent.state, parameter: station.tangent.parameter };
        let jacobian = &self.local.jacobian;
        let (psi, v) = if im == 0.0 {
            let null = RealNull::find(&mut self.systems, jacobian, re, &sizes)?;
            let zero = vec![0.0; null.v.len()];
            (Complex { re: null.psi, im: zero.clone() }, Complex { re: null.v, im: zero })
        } else {
            let null = ComplexNull::find(&mut self.systems, jacobian, (re, im), &sizes)?;
            (null.psi, null.q)
        };
        let mut moved = |v: &[f64]| self.local.second(at, Along::states(v), tangent);
        let moved = Complex { re: moved(&v.re), im: moved(&v.im) };
        let (over, under) = (psi.product(&moved), psi.product(&v));
        let slope = (over.0 * under.0 + over.1 * under.1) / (under.0 * under.0 + under.1 * under.1);
        slope.is_finite().then_some(slope)
    }
}
