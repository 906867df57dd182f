//! From a Hopf point onto the cycles born there.
//!
//! Predicted by the normal form of [`super::hopf`], the cycle of a small amplitude is corrected with the amplitude held and
//! the parameter free, so that the side on which the branch is born need not be known. The birth itself is the Hopf point:
//! a cycle of no extent, with period `2 pi / omega`.

use std::f64::consts::{PI, TAU};
use std::sync::Arc;

use armilla_collocation::{LinearClosing, Tables};
use armilla_follow::Problem;
use armilla_record::{Multiplier, Point, Profile};

use super::hopf::HopfForm;
use super::locate::{LocatedRest, RestEvent, Vectors};
use super::point::EquilibriumPoint;
use super::problem::{EquilibriumProblem, EquilibriumSpec};
use crate::point::{CyclePoint, CycleTangent};
use crate::problem::{CycleProblem, CycleSettings, CycleSpec, Sizes};
use crate::switch::{Born, SwitchFault};

/// Amplitude of the first cycle, largest share of the size of a state.
const AMPLITUDE: f64 = 0.05;
/// Largest offset of the parameter on the first cycle that the normal form may foretell, over the range.
const LARGEST_OFFSET: f64 = 0.02;
/// Halvings of the amplitude.
const HALVINGS: usize = 10;
/// Intervals of the first cycle, nearly a sine.
const INTERVALS: usize = 16;
/// Change of the period from the birth to the first cycle beyond which it is another branch.
const PERIOD: f64 = 0.3;

/// A cycle of a branch at its birth from an equilibrium.
struct Sprout {
    profile: Profile,
    value: f64,
}

impl EquilibriumProblem {
    /// The branch of cycles born at a located Hopf point.
    ///
    /// # Errors
    /// [`SwitchFault`] where no first cycle is found.
    pub fn cycles(
        &self,
        hopf: &LocatedRest,
        form: Option<&HopfForm>,
        settings: CycleSettings,
    ) -> Result<Born, SwitchFault> {
        let Vectors::Complex { q, .. } = &hopf.vectors else { return Err(SwitchFault) };
        let moduli = q.moduli().into_iter().zip(&self.metric.scales).map(|(q, scale)| q / scale);
        let largest = moduli.fold(0.0, f64::max);
        // Turned so that the fastest state starts at its largest.
        let mut amplitude = AMPLITUDE;
        if let Some(form) = form {
            let length = q.product(q).0.sqrt();
            let offset = form.offset(0.5 * amplitude * length / largest).abs();
            let allowed = LARGEST_OFFSET * self.spec.parameter_scale;
            if offset > allowed {
                amplitude *= (allowed / offset).sqrt();
            }
        }
        for _ in 0..HALVINGS {
            let sprout = self.sprout(hopf, form, amplitude / largest, settings.degree);
            if let Some(born) = self.first_cycle(hopf, &sprout, settings) {
                return Ok(born);
            }
            amplitude *= 0.5;
        }
        Err(SwitchFault)
    }

    /// The predicted cycle `x0 + r Re(q e^(i t))` with its second harmonic and its offsets.
    fn sprout(&self, hopf: &LocatedRest, form: Option<&HopfForm>, r: f64, degree: usize) -> Sprout {
        let Vectors::Complex { q, .. } = &hopf.vectors else { unreachable!("asked of Hopf points only") };
        let n = q.re.len();
        let modulus = 0.5 * r * q.product(q).0.sqrt();
        let (offset, detuning) = form.map_or((0.0, 0.0), |form| (form.offset(modulus), form.detuning(modulus)));
        let omega = hopf.frequency.0 + detuning;
        let omega = if omega > 0.5 * hopf.frequency.0 { omega } else { hopf.frequency.0 };
        let mesh = (0..=INTERVALS).map(|i| i as f64 / INTERVALS as f64).collect();
        let mut profile = Profile { n_states: n, degree, period: TAU / omega, mesh, values: Vec::new() };
        for time in profile.node_times() {
            let (sine, cosine) = (TAU * time).sin_cos();
            let (sine2, cosine2) = (2.0 * TAU * time).sin_cos();
            for i in 0..n {
                let mut value = hopf.point.state[i]
                    + match form {
                        // In the phase of the normal form's own q.
                        Some(form) => 2.0 * modulus * (form.q.re[i] * cosine - form.q.im[i] * sine),
                        None => r * (q.re[i] * cosine - q.im[i] * sine),
                    };
                if let Some(form) = form {
                    let bent = form.h11[i] + form.h20.re[i] * cosine2 - form.h20.im[i] * sine2;
                    value += modulus * modulus * bent + offset * form.shift[i];
                }
                profile.values.push(value);
            }
        }
        Sprout { profile, value: hopf.point.parameter + offset }
    }

    fn first_cycle(&self, hopf: &LocatedRest, sprout: &Sprout, settings: CycleSettings) -> Option<Born> {
        let spec = CycleSpec {
            field: self.spec.field.clone(),
            parameters: self.spec.parameters.clone(),
            free: self.spec.free,
            typical: self.spec.typical.clone(),
            parameter_scale: self.spec.parameter_scale,
        };
        // A state that the cycle does not move keeps the size it has at rest.
        let (sizes, value) = (Sizes::Parent(&self.metric.scales), sprout.value);
        let mut problem = CycleProblem::with_metric(spec, settings, sizes, &sprout.profile, value).ok()?;
        let guess = CyclePoint::from_profile(&sprout.profile, value);
        let birth = still(hopf, &guess);
        let outwards = direction(&problem, &birth, &guess);
        let amplitude = problem.motion(&guess);
        let mut point = guess.clone();
        // Counted from the birth, which has no extent to tell a phase by: the guess does.
        let row = problem.arclength_row(&outwards, &guess);
        let target = row.apply(&birth.unknowns) + amplitude;
        let mut closing = LinearClosing { row, target };
        problem.newton(&mut point, &guess.unknowns.nodes, &mut closing).ok()?;
        let period = hopf.period()?.0;
        let motion = problem.motion(&point);
        let is_near = motion > 0.5 * amplitude
            && motion < 2.0 * amplitude
            && (point.unknowns.period / period).ln().abs() < PERIOD
            && problem.distance(&birth, &point) < 4.0 * amplitude;
        is_near.then(|| on_own_mesh(Born { problem, birth, point, outwards, amplitude }))
    }
}

impl CycleProblem {
    /// The Hopf point that a small cycle shrinks to, near a parameter value and a period, with its normal form. None where
    /// Newton's method on the defining system finds none.
    pub fn hopf_near(
        &self,
        cycle: &CyclePoint,
        parameter: f64,
        period: f64,
    ) -> Option<(EquilibriumProblem, LocatedRest, Option<HopfForm>)> {
        let spec = EquilibriumSpec {
            field: self.spec.field.clone(),
            parameters: self.spec.parameters.clone(),
            free: self.spec.free,
            typical: self.metric.scales.clone(),
            parameter_scale: self.spec.parameter_scale,
        };
        let mut problem = EquilibriumProblem::new(spec);
        let near = EquilibriumPoint { state: self.profile(cycle).means(), parameter };
        // The mean of a cycle is not at rest: on the branch of equilibria first, where that works.
        let mut settled = near.clone();
        let guess = if problem.correct_at(&mut settled, parameter).is_ok() { settled } else { near };
        problem.measure(&guess);
        let located = problem.solve(RestEvent::Hopf, guess, TAU / period)?;
        let form = problem.hopf_form(&located);
        Some((problem, located, form))
    }
}

/// The birth as a cycle of no extent on the mesh of `like`.
fn still(hopf: &LocatedRest, like: &CyclePoint) -> CyclePoint {
    let n = hopf.point.state.len();
    let mut birth = like.clone();
    birth.unknowns.nodes.iter_mut().enumerate().for_each(|(k, value)| *value = hopf.point.state[k % n]);
    birth.unknowns.period = hopf.period().map_or(like.unknowns.period, |period| period.0);
    birth.unknowns.parameter = hopf.point.parameter;
    birth
}

/// Unit direction from the birth along the motion of a cycle about its mean.
fn direction(problem: &CycleProblem, birth: &CyclePoint, cycle: &CyclePoint) -> CycleTangent {
    let means = problem.profile(cycle).means();
    let nodes = cycle.unknowns.nodes.iter().enumerate().map(|(k, value)| value - means[k % means.len()]).collect();
    let mut row = armilla_collocation::Row { nodes, period: 0.0, parameter: 0.0 };
    let length = problem.metric.inner(Tables::of(birth.degree), &birth.mesh, &row, &row).sqrt();
    row.nodes.iter_mut().for_each(|value| *value /= length);
    CycleTangent { degree: birth.degree, mesh: Arc::clone(&birth.mesh), row }
}

/// The start of the branch on a mesh and in a metric of its own.
fn on_own_mesh(mut born: Born) -> Born {
    if let Some((point, mut tangents)) = born.problem.renew(&born.point, &[&born.outwards]) {
        born.birth = born.birth.on_mesh(point.degree, &point.mesh);
        born.point = point;
        born.outwards = tangents.pop().expect("renew returns as many tangents as it gets");
        born.amplitude = born.problem.motion(&born.point);
    }
    born
}

/// The birth of a branch of cycles as a row of its table: multipliers `exp(lambda T)` of the equilibrium.
pub fn birth_row(problem: &mut EquilibriumProblem, hopf: &LocatedRest) -> Option<Point> {
    let rest = problem.describe(&hopf.point, 0.0).ok()?;
    let (omega, period) = (hopf.frequency.0, hopf.period()?.0);
    let mut exponents = rest.eigenvalues;
    // The critical pair: one of the two is the trivial multiplier, the other is 1 too.
    for sign in [1.0, -1.0] {
        let off = |value: &armilla_record::Eigenvalue| value.re.abs() + (value.im - sign * omega).abs();
        let nearest = (0..exponents.len()).min_by(|a, b| off(&exponents[*a]).total_cmp(&off(&exponents[*b])))?;
        exponents.remove(nearest);
    }
    let mut multipliers: Vec<Multiplier> = exponents
        .iter()
        .map(|value| {
            let turned = (value.im * period).rem_euclid(TAU);
            let angle = if turned > PI { turned - TAU } else { turned };
            Multiplier { log_modulus: value.re * period, angle: if value.im == 0.0 { 0.0 } else { angle } }
        })
        .collect();
    multipliers.push(Multiplier { log_modulus: 0.0, angle: 0.0 });
    multipliers.sort_by(|a, b| b.log_modulus.total_cmp(&a.log_modulus));
    let profile_error = hopf.state_error;
    Some(Point { period, turns: 1, eigenvalues: Vec::new(), multipliers, profile_error, ..rest })
}
