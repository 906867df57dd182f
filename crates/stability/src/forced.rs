//! What differs for cycles under a forcing.

use armilla_collocation::{Failure, Report};
use armilla_model::VectorField;
use armilla_record::Profile;

use crate::point::CyclePoint;
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

    /// Forcing periods that a cycle lasts, whatever branch it is of; 1 without a forcing.
    pub(crate) fn periods_of(&self, point: &CyclePoint) -> usize {
        let parameters = self.parameters_at(point);
        let of = (&parameters[..], self.spec.free);
        forcing_periods(self.spec.field.as_ref(), of, point.unknowns.period).ok().flatten().unwrap_or(1)
    }

    /// Corrects a cycle of another branch at a parameter value: it may last another number of forcing periods.
    pub(crate) fn correct_foreign(&mut self, point: &mut CyclePoint, parameter: f64) -> Result<Report, Failure> {
        let own = self.system.forced();
        self.system.set_forcing(self.periods_of(point));
        let report = self.correct_at(point, parameter);
        self.system.set_forcing(own.map_or(0, |forced| forced.periods));
        report
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
    let [forcing, ..] = field.forcing_period(parameters, free).ok_or(StartFault::NoForcingPeriod)?;
    Ok(Some(((period / forcing).round() as usize).max(1)))
}
