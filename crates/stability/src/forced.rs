//! What differs for cycles under a forcing.

use armilla_model::VectorField;
use armilla_record::Profile;

use crate::problem::{CycleProblem, StartFault};

impl CycleProblem {
    /// Whether the rates use the time.
    pub fn is_forced(&self) -> bool {
        self.system.forced().is_some()
    }

    /// Whether a cycle may be one of half its period told twice: under a forcing it must last an even number of forcing
    /// periods.
    pub fn may_have_halves(&self) -> bool {
        self.system.forced().is_none_or(|forced| forced.periods % 2 == 0)
    }

    /// The shift by whole forcing periods, as a share of the period, by which `profile` lies nearest to `wanted`.
    pub(crate) fn best_of_shifts(&self, profile: &Profile, wanted: &Profile, periods: usize) -> f64 {
        let apart = |shift: f64| self.apart(profile, wanted, shift);
        let shifts = (0..periods).map(|k| k as f64 / periods as f64);
        shifts.min_by(|a, b| apart(*a).total_cmp(&apart(*b))).unwrap_or(0.0)
    }
}

/// Number of forcing periods in a period, the nearest whole one; none for a field that does not use the time.
pub(crate) fn forcing_periods(
    field: &dyn VectorField,
    (parameters, free): (&[f64], usize),
    period: f64,
) -> Result<Option<usize>, StartFault> {
    if !field.is_forced() {
        return Ok(None);
    }
    let [forcing, _] = field.forcing_period(parameters, free).ok_or(StartFault::NoForcingPeriod)?;
    Ok(Some(((period / forcing).round() as usize).max(1)))
}
