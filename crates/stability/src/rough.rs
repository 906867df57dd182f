//! A first cycle from a rough guess, as from samples with noise.

use armilla_collocation::{LinearClosing, Row, Task, approach};
use armilla_record::Profile;

use crate::point::CyclePoint;
use crate::problem::{CycleProblem, CycleSettings, CycleSpec, StartFault};

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
        let (mut problem, mut point) = Self::guessed(spec, settings, profile, parameter)?;
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

/// The profile itself where its degree is allowed, or the same cycle with the nearest allowed one.
pub(crate) fn within_degrees(profile: &Profile, (low, high): (usize, usize)) -> Profile {
    let degree = profile.degree.clamp(low, high);
    if degree == profile.degree {
        return profile.clone();
    }
    let mut guess = Profile { degree, values: Vec::new(), ..profile.clone() };
    let mut evaluator = profile.evaluator();
    let mut state = vec![0.0; profile.n_states];
    for time in guess.node_times() {
        evaluator.at(time, &mut state);
        guess.values.extend(&state);
    }
    guess
}
