//! A test model with its parameters, and ways onto a first cycle.

use std::f64::consts::TAU;
use std::path::PathBuf;

use armilla_flow::{SettleOptions, Verdict, settle};
use armilla_model::Model;
use armilla_record::Profile;
use armilla_stability::{CyclePoint, CycleProblem, CycleSettings, CycleSpec};

/// A test model with the values of its parameters and the one that is followed.
pub struct Case {
    /// The model.
    pub model: Model,
    parameters: Vec<f64>,
    free: usize,
    width: f64,
}

/// Settings for an accuracy.
pub fn settings(accuracy: f64) -> CycleSettings {
    CycleSettings::new(accuracy)
}

/// Where a test model lies.
pub(crate) fn model_path(name: &str) -> PathBuf {
    [env!("CARGO_MANIFEST_DIR"), "models", &format!("{name}.model.ron")].iter().collect()
}

impl Case {
    /// `models/NAME.model.ron`, followed in `follow` over a range of width `width`.
    ///
    /// # Panics
    /// Where there is no such model or parameter.
    pub fn new(name: &str, follow: &str, width: f64) -> Self {
        let model = Model::read(model_path(name)).unwrap_or_else(|fault| panic!("{fault}"));
        let free = model.parameter_index(follow).unwrap_or_else(|| panic!("no parameter {follow}"));
        Self { parameters: model.values(), free, width, model }
    }

    /// The same with another value of a parameter.
    ///
    /// # Panics
    /// Where there is no such parameter.
    #[must_use]
    pub fn with(mut self, name: &str, value: f64) -> Self {
        let index = self.model.parameter_index(name).unwrap_or_else(|| panic!("no parameter {name}"));
        self.parameters[index] = value;
        self
    }

    /// Value of a parameter.
    ///
    /// # Panics
    /// Where there is no such parameter.
    pub fn value(&self, name: &str) -> f64 {
        self.parameters[self.model.parameter_index(name).unwrap_or_else(|| panic!("no parameter {name}"))]
    }

    /// Values of all parameters, the followed one being `at`.
    pub fn parameters(&self, at: f64) -> Vec<f64> {
        let mut parameters = self.parameters.clone();
        parameters[self.free] = at;
        parameters
    }

    /// As the cycle problem wants it.
    pub fn spec(&self) -> CycleSpec {
        CycleSpec {
            field: self.model.field(),
            parameters: self.parameters.clone(),
            free: self.free,
            typical: self.model.begin().iter().map(|value| value.abs()).collect(),
            parameter_scale: self.width,
        }
    }

    /// The cycle at `at`, corrected from `profile` on a mesh chosen by `settings`, or of its fixed number of intervals.
    ///
    /// # Panics
    /// Where that fails.
    pub fn start(&self, profile: &Profile, settings: CycleSettings, at: f64) -> (CycleProblem, CyclePoint) {
        let intervals = settings.mesh.fixed.unwrap_or(profile.intervals());
        let profile = crate::uniform::resample(profile, settings.degree, intervals);
        CycleProblem::start(self.spec(), settings, &profile, at).unwrap_or_else(|fault| panic!("{fault}"))
    }

    /// A circle in the first two states, the others at rest: a guess.
    pub fn circle(&self, radius: f64, period: f64) -> Profile {
        let (n, intervals) = (self.model.states().len(), 40);
        let mut profile =
            Profile { n_states: n, degree: 6, period, mesh: crate::uniform_mesh(intervals), values: Vec::new() };
        for time in profile.node_times() {
            let (sine, cosine) = (TAU * time).sin_cos();
            let mut state = vec![0.0; n];
            (state[0], state[1]) = (radius * cosine, radius * sine);
            profile.values.extend(state);
        }
        profile
    }

    /// The cycle the motion settles on at `at`, from the model's own start: a guess.
    ///
    /// # Panics
    /// Where it settles on no cycle.
    pub fn settled(&self, at: f64) -> Profile {
        let field = self.model.field();
        let settled = settle(field.as_ref(), &self.parameters(at), &self.model.begin(), &SettleOptions::default());
        match settled.unwrap_or_else(|fault| panic!("{fault}")).verdict {
            Verdict::Cycle(cycle) => cycle.profile(6, 40 * cycle.turns.max(1)),
            _ => panic!("the model does not settle on a cycle"),
        }
    }
}
