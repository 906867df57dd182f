//! Cycles under a forcing of known period.
//!
//! The rates use the time and repeat after P(p), a formula of the parameters. A cycle closes after k whole forcing
//! periods; its phase is that of the forcing, and its period is no unknown: the row that fixes the phase of a free cycle is
//! replaced by `(T - k P(p)) / T0 = 0`, T0 the size of the period. With it everything else stays as it is: null vectors
//! have no part in the period, the adjoint of the flow direction is zero, and no multiplier is trivial.

use crate::system::{Iterate, System};

/// A forcing as the cycle's equations see it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Forced {
    /// Forcing periods k after which the cycles close.
    pub periods: usize,
}

impl System {
    /// Period of the cycles and its first two derivatives in the free parameter, for a value of that; none without a
    /// forcing.
    pub fn forced_period(&self, parameter: f64) -> Option<[f64; 3]> {
        let forced = self.forced()?;
        let spec = self.spec();
        let mut parameters = spec.parameters.clone();
        parameters[spec.free] = parameter;
        let period = spec.field.forcing_period(&parameters, spec.free)?;
        Some(period.map(|number| forced.periods as f64 * number))
    }

    /// Entries of the row that fixes the phase in the columns of the period and of the parameter at the last
    /// linearisation: zero for a free cycle.
    pub fn phase_corner(&self) -> [f64; 2] {
        let spec = self.spec();
        match self.forced_period(spec.parameters[spec.free]) {
            Some([_, slope, _]) => [1.0, -slope].map(|entry| entry / spec.metric.period_scale),
            None => [0.0; 2],
        }
    }

    /// Derivative of the second entry of [`System::phase_corner`] in the parameter, with the sign turned: `k P''/T0`.
    pub fn phase_bend(&self) -> f64 {
        let spec = self.spec();
        let period = self.forced_period(spec.parameters[spec.free]);
        period.map_or(0.0, |[_, _, bend]| bend / spec.metric.period_scale)
    }

    /// What the row that fixes the phase lacks at an iterate: `Int <r - u, W r'> dt` for the phase row and the reference r,
    /// `(k P(p) - T) / T0` under a forcing.
    pub fn phase_gap(&self, at: &Iterate, (row, reference): (&[f64], &[f64])) -> f64 {
        match self.forced_period(at.parameter) {
            Some([period, ..]) => (period - at.period) / self.spec().metric.period_scale,
            None => row.iter().zip(at.nodes.iter().zip(reference)).map(|(p, (u, r))| p * (r - u)).sum(),
        }
    }

    /// Gives an iterate the period that the forcing has at its parameter: no rounding of a correction is left in it.
    pub fn keep_time(&self, at: &mut Iterate) {
        if let Some([period, ..]) = self.forced_period(at.parameter) {
            at.period = period;
        }
    }
}
