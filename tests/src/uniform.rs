//! Cycles and thresholds on fixed uniform meshes, by the collocation crate directly.

use armilla_collocation::{
    Closing, Iterate, LinearClosing, Metric, NewtonSettings, Report, Row, System, SystemSpec, correct,
};
use armilla_record::{Multiplier, Profile};
use armilla_stability::{CriticalKind, SpectrumSolver, TestFunction};

use crate::Case;

/// N+1 equidistant points from 0 to 1.
pub fn uniform_mesh(intervals: usize) -> Vec<f64> {
    (0..=intervals).map(|i| i as f64 / intervals as f64).collect()
}

/// A profile on another uniform mesh, by evaluation.
pub(crate) fn resample(profile: &Profile, degree: usize, intervals: usize) -> Profile {
    if profile.degree == degree && profile.intervals() == intervals {
        return profile.clone();
    }
    let mesh = uniform_mesh(intervals);
    let mut out = Profile { n_states: profile.n_states, degree, period: profile.period, mesh, values: Vec::new() };
    let mut evaluator = profile.evaluator();
    let mut state = vec![0.0; profile.n_states];
    for time in out.node_times() {
        evaluator.at(time, &mut state);
        out.values.extend(&state);
    }
    out
}

/// Agreement with Liouville wanted of multipliers here: the mesh of the cycle is to be the only source of error.
const TIGHT: f64 = 1e-13;

/// A discretised cycle on a uniform mesh.
pub struct Uniform {
    /// The system.
    pub system: System,
    /// Its solution, or the guess.
    pub at: Iterate,
    degree: usize,
    parameters: Vec<f64>,
}

impl Uniform {
    /// The guess `profile` at the parameter value `value` on `intervals` pieces of degree `degree`.
    pub fn new(case: &Case, profile: &Profile, value: f64, (degree, intervals): (usize, usize)) -> Self {
        let guess = resample(profile, degree, intervals);
        let spec = case.spec();
        let scales =
            profile.extremes().into_iter().map(|(low, high)| if high > low { high - low } else { 1.0 }).collect();
        let metric = Metric { scales, period_scale: profile.period, parameter_scale: spec.parameter_scale };
        let parameters = case.parameters(value);
        let spec = SystemSpec { field: spec.field, parameters: parameters.clone(), free: spec.free, metric };
        let system = System::new(spec, degree, &guess.mesh);
        let at = Iterate { nodes: guess.values, period: guess.period, parameter: value };
        Self { system, at, degree, parameters }
    }

    /// Newton's method with the parameter held.
    ///
    /// # Panics
    /// Where it fails.
    pub fn hold_parameter(&mut self) -> Report {
        let mut row = Row::zero(self.at.nodes.len());
        row.parameter = 1.0;
        let target = self.at.parameter;
        self.close(&mut LinearClosing { row, target })
    }

    /// Newton's method on the augmented system of a threshold.
    ///
    /// # Panics
    /// Where it fails.
    pub fn threshold(&mut self, kind: CriticalKind) -> Report {
        self.system.linearise(&self.at).expect("a regular guess");
        let mut function = TestFunction::new(kind, &self.system, &self.at).expect("regular borders");
        self.close(&mut function)
    }

    fn close(&mut self, closing: &mut dyn Closing) -> Report {
        let reference = self.at.nodes.clone();
        correct(&mut self.system, &mut self.at, &reference, closing, NewtonSettings::default())
            .unwrap_or_else(|fault| panic!("{fault}"))
    }

    /// The solution as a profile.
    pub fn profile(&self) -> Profile {
        Profile {
            n_states: self.system.n(),
            degree: self.degree,
            period: self.at.period,
            mesh: self.system.mesh().to_vec(),
            values: self.at.nodes.clone(),
        }
    }

    /// Its multipliers.
    ///
    /// # Panics
    /// Where they fail.
    pub fn multipliers(&self) -> Vec<Multiplier> {
        let spec = self.system.spec();
        let mut parameters = self.parameters.clone();
        parameters[spec.free] = self.at.parameter;
        let mut solver = SpectrumSolver::new(spec.field.as_ref(), self.degree);
        solver.spectrum(&self.profile(), &parameters, &spec.metric.scales, TIGHT).expect("multipliers").multipliers
    }
}
