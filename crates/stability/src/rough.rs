//! A first cycle from a rough guess, as from samples with noise.

use armilla_collocation::{LinearClosing, Row, Task, approach};
use armilla_record::Profile;

use crate::point::CyclePoint;
use crate::problem::{CycleProblem, CycleSettings, CycleSpec, Sizes, StartFault, within_degrees};
use crate::scale::STILL_AT_FIRST;

impl CycleProblem {
    /// [`CycleProblem::start`] from a profile that may be off by a good part of its size: Newton's method is damped until it
    /// is near. It goes to cycles whatever their stability.
    ///
    /// # Errors
    /// [`StartFault`].
    pub fn start_rough(
        spec: CycleSpec,
        settings: CycleSettings,
        profile: &Profile,
        parameter: f64,
    ) -> Result<(Self, CyclePoint), StartFault> {
        let guess = within_degrees(profile, settings.mesh.degrees);
        let mut problem = Self::with_metric(spec, settings, Sizes::Natural(STILL_AT_FIRST), &guess, parameter)?;
        let mut point = CyclePoint::from_profile(&guess, parameter);
        problem.system.set_mesh(point.degree, &point.mesh);
        let row = Row { parameter: 1.0, ..Row::zero(point.unknowns.nodes.len()) };
        let mut closing = LinearClosing { row, target: parameter };
        let reference = point.unknowns.nodes.clone();
        let task = Task { reference: &reference, closing: &mut closing, settings: settings.newton };
        approach(&mut problem.newton, &mut problem.system, &mut point.unknowns, task).map_err(StartFault::Newton)?;
        problem.correct_at(&mut point, parameter).map_err(StartFault::Newton)?;
        problem.with_own_sizes(point, parameter)
    }
}
