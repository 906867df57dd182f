//! From a located doubling onto the doubled branch.
//!
//! The doubled cycle near the threshold is the critical cycle told twice plus a small multiple of the critical
//! vector v, antiperiodic over one turn: `u + xi v` on the first turn, `u - xi v` on the second. It is corrected with
//! the amplitude along that direction held, the parameter free, so that the side on which the branch is born need
//! not be known (Keller 1977, in Applications of Bifurcation Theory, 359; Kuznetsov, Govaerts, Doedel & Dhooge 2005,
//! SIAM J. Numer. Anal. 43:1407, for the predictor).

use armilla_collocation::{Metric, Row};
use armilla_follow::{Closing, Problem};

use crate::locate::Located;
use crate::normal_form::DoublingForm;
use crate::point::{CyclePoint, CycleTangent};
use crate::problem::{CycleProblem, Sizes};

/// A branch of cycles at its birth.
pub struct Born {
    /// The problem of the branch, with its own metric.
    pub problem: CycleProblem,
    /// The critical cycle (told twice at a doubling), on the mesh of the branch: where the branch is born.
    pub birth: CyclePoint,
    /// The first cycle of the branch.
    pub point: CyclePoint,
    /// Unit direction from the birth to the first cycle: the way outwards.
    pub outwards: CycleTangent,
    /// Amplitude of the first cycle along it.
    pub amplitude: f64,
}

/// How the part of a cycle that tells one half of its period from the other changes along a branch.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SplitChange {
    /// It goes on.
    None,
    /// It has changed its sign: the branch went through its birth.
    Turned,
    /// It is gone: the step fell onto the shorter cycle told twice.
    Gone,
}

/// Why no cycle of a new branch was found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SwitchFault;

impl std::fmt::Display for SwitchFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "no cycle of the branch born there was found at any amplitude tried")
    }
}

impl std::error::Error for SwitchFault {}

/// First amplitude tried, in the branch's metric (1 is the size of the cycle): well above roundoff in xi^2, and small
/// against the cycle.
const AMPLITUDE: f64 = 0.02;
/// Largest first amplitude, where the normal form would allow more.
const LARGEST: f64 = 0.1;
/// Wanted |log mu| of the multiplier that is 1 at the birth: near enough for the normal form to hold, far enough from the
/// birth for a regular start.
const WANTED: f64 = 0.1;
/// Share of the forecast offset of the parameter by which the first cycle's may miss it. More, and the cycle may belong to a
/// branch born elsewhere; a smaller amplitude tells.
const FORECAST_HOLDS: f64 = 0.5;
/// Halvings of the amplitude before giving up.
const HALVINGS: usize = 12;
/// Largest |log mu| of the multiplier that is 1 at the birth: beyond, the first cycle is already far from it and a
/// next event may have been passed.
const NEAR_BIRTH: f64 = 0.3;

impl CycleProblem {
    /// Enters the branch born at a located doubling; its normal form, where known, predicts amplitude and side.
    ///
    /// # Errors
    /// [`SwitchFault`].
    pub fn double(&self, located: &Located, form: Option<&DoublingForm>) -> Result<Born, SwitchFault> {
        let birth_profile = self.profile(&located.point).repeated(2);
        let (value, sizes) = (located.point.unknowns.parameter, Sizes::Parent(&self.metric.scales));
        let mut settings = self.settings;
        // A number of intervals fixed by the user is per turn.
        settings.mesh.fixed = settings.mesh.fixed.map(|intervals| intervals.saturating_mul(2));
        let mut problem = CycleProblem::with_metric(self.spec.clone(), settings, sizes, &birth_profile, value)
            .map_err(|_| SwitchFault)?;
        let birth = CyclePoint::from_profile(&birth_profile, value);
        let outwards = direction(&problem, &birth, located);
        let forecast = form.and_then(|form| Forecast::new(&problem, located, form));
        // The located cycle stands on a mesh refined for its error; one for the accuracy alone has several times fewer
        // intervals. Where the branch has no cycle on it (a coarse accuracy shifts the birth), the fine one remains.
        let own = problem.own_mesh(&birth).map(|own| {
            let outwards = outwards.on_mesh(own.degree, &own.mesh);
            (own, outwards)
        });
        let fine = birth.clone();
        for (birth, outwards) in own.into_iter().chain([(birth, outwards)]) {
            let mut amplitude = forecast.as_ref().map_or(AMPLITUDE, |forecast| forecast.amplitude.min(LARGEST));
            for _ in 0..HALVINGS {
                let offset = forecast.as_ref().map_or(0.0, |forecast| forecast.offset_at(amplitude));
                let found = first_cycle(&mut problem, (&birth, &outwards), amplitude, offset);
                // A branch on the side the normal form denies is one of the discretisation.
                let sided = |point: &CyclePoint| {
                    let found = (point.unknowns.parameter - value) / offset;
                    offset == 0.0 || (found > 0.0 && (found - 1.0).abs() < FORECAST_HOLDS)
                };
                if let Some(point) = found.filter(sided) {
                    return Ok(on_own_mesh(Born { problem, birth, point, outwards, amplitude }, &fine));
                }
                amplitude *= 0.5;
            }
        }
        Err(SwitchFault)
    }

    /// `fine` carried to a mesh that holds it to the accuracy with less work, if there is one. Each round the estimate comes
    /// from a better mesh, the values from the fine one.
    pub(crate) fn own_mesh(&mut self, fine: &CyclePoint) -> Option<CyclePoint> {
        const ROUNDS: usize = 8;
        let mut own: Option<CyclePoint> = None;
        for _ in 0..ROUNDS {
            let Some((degree, mesh)) = self.grid_for(own.as_ref().unwrap_or(fine)) else { break };
            own = Some(fine.on_mesh(degree, &mesh));
        }
        let accuracy = self.settings.mesh.accuracy;
        let suits = |own: &CyclePoint| own.unknowns.nodes.len() < fine.unknowns.nodes.len();
        own.filter(suits).filter(|own| self.profile_error(own) <= accuracy)
    }

    /// Size of the part of a cycle that changes sign from one half of the period to the other, in the metric: 0 for a
    /// cycle that is a shorter one told twice.
    pub fn split(&self, point: &CyclePoint) -> f64 {
        let nodes = self.split_nodes(point);
        self.metric.nodes_inner(point.tables(), &point.mesh, &nodes, &nodes).sqrt()
    }

    /// What became of the part that tells one half of the period from the other between two neighbouring points.
    pub fn split_between(&self, before: &CyclePoint, after: &CyclePoint) -> SplitChange {
        if !self.may_have_halves() {
            return SplitChange::None;
        }
        /// Share of the part that no step leaves of it but by chance; Newton's method leaves far less where it has met the
        /// shorter cycle told twice.
        const GONE: f64 = 1e-3;
        /// Multiple of the accuracy of profiles, relative to them, that cannot be told from nothing.
        const UNTOLD: f64 = 10.0;
        let before = before.on_mesh(after.degree, &after.mesh);
        let (a, b) = (self.split_nodes(&before), self.split_nodes(after));
        let inner = |x: &[f64], y: &[f64]| self.metric.nodes_inner(after.tables(), &after.mesh, x, y);
        let least = UNTOLD * self.settings.mesh.accuracy;
        match () {
            () if inner(&b, &b).sqrt() < (GONE * inner(&a, &a).sqrt()).max(least) => SplitChange::Gone,
            () if inner(&a, &b) < 0.0 => SplitChange::Turned,
            () => SplitChange::None,
        }
    }

    /// Whether a branch went through an equilibrium between two neighbouring points: the motion about its mean has
    /// changed its sign.
    pub fn passed_equilibrium(&self, before: &CyclePoint, after: &CyclePoint) -> bool {
        // Under a forcing a motion may turn into its opposite, as where the amplitude of the forcing changes sign.
        if self.is_forced() {
            return false;
        }
        let before = before.on_mesh(after.degree, &after.mesh);
        let (a, b) = (self.motion_nodes(&before), self.motion_nodes(after));
        self.metric.nodes_inner(after.tables(), &after.mesh, &a, &b) < 0.0
    }

    /// Size of the motion about the mean, in the metric.
    pub fn motion(&self, point: &CyclePoint) -> f64 {
        let nodes = self.motion_nodes(point);
        self.metric.nodes_inner(point.tables(), &point.mesh, &nodes, &nodes).sqrt()
    }

    fn motion_nodes(&self, point: &CyclePoint) -> Vec<f64> {
        let profile = self.profile(point);
        let means = profile.means();
        profile.values.iter().enumerate().map(|(k, value)| value - means[k % profile.n_states]).collect()
    }

    fn split_nodes(&self, point: &CyclePoint) -> Vec<f64> {
        self.shift_nodes(point, 2)
    }
}

/// What the normal form says of the first cycle, in the metric of the branch.
struct Forecast {
    /// Amplitude at which the critical multiplier has moved to [`WANTED`].
    amplitude: f64,
    /// Offset of the parameter there.
    offset: f64,
}

impl Forecast {
    fn new(problem: &CycleProblem, located: &Located, form: &DoublingForm) -> Option<Self> {
        let n = problem.system.n();
        let tables = located.point.tables();
        let (v, mesh) = (&located.vectors.nodes, &located.point.mesh);
        let period = located.point.unknowns.period;
        // Lengths of v in the metric, which is the same over one turn and two, and in the norm of the normal form.
        let length = problem.metric.nodes_inner(tables, mesh, v, v).sqrt();
        let plain = Metric { scales: vec![1.0; n], ..problem.metric.clone() };
        let norm = (plain.nodes_inner(tables, mesh, v, v) * n as f64 * period).sqrt();
        let xi = form.amplitude_at(WANTED, period);
        let (amplitude, offset) = (xi * length / norm, form.offset(xi));
        (amplitude.is_finite() && offset.is_finite() && amplitude > 0.0).then_some(Self { amplitude, offset })
    }

    fn offset_at(&self, amplitude: f64) -> f64 {
        self.offset * (amplitude / self.amplitude).powi(2)
    }
}

/// The critical vector over two turns, of unit length.
fn direction(problem: &CycleProblem, birth: &CyclePoint, located: &Located) -> CycleTangent {
    let n = problem.system.n();
    let v = &located.vectors.nodes;
    let mut nodes = v[..v.len() - n].to_vec();
    nodes.extend(v.iter().map(|value| -value));
    let mut row = Row { nodes, period: 0.0, parameter: 0.0 };
    let length = problem.metric.inner(birth.tables(), &birth.mesh, &row, &row).sqrt();
    row.nodes.iter_mut().for_each(|value| *value /= length);
    CycleTangent { degree: birth.degree, mesh: birth.mesh.clone(), row }
}

/// The start of the branch on a mesh and in a metric of its own; amplitudes are measured in the new metric then, and the
/// birth, whose states may hardly move, has its errors measured anew.
fn on_own_mesh(mut doubled: Born, fine: &CyclePoint) -> Born {
    let renewed = doubled.problem.renew(&doubled.point, &[&doubled.outwards]);
    if let Some((point, mut tangents)) = renewed {
        doubled.point = point;
        doubled.outwards = tangents.pop().expect("renew returns as many tangents as it gets");
        doubled.amplitude = doubled.problem.split(&doubled.point);
        doubled.birth = doubled.problem.own_mesh(fine).unwrap_or_else(|| fine.clone());
    }
    doubled
}

fn first_cycle(
    problem: &mut CycleProblem,
    (birth, outwards): (&CyclePoint, &CycleTangent),
    amplitude: f64,
    offset: f64,
) -> Option<CyclePoint> {
    let mut prediction = problem.advance(birth, outwards, amplitude);
    prediction.unknowns.parameter += offset;
    let closing = Closing::Component { from: birth, direction: outwards, amount: amplitude };
    let point = problem.correct(&prediction, closing).ok()?.point;
    // The split must be what was asked, or Newton's method fell back onto the undoubled cycle or off elsewhere.
    let split = problem.split(&point);
    if !(split > 0.5 * amplitude && split < 2.0 * amplitude) || problem.distance(birth, &point) > 10.0 * amplitude {
        return None;
    }
    let near = problem.spectrum(&point).ok()?.nearest_to_one()?;
    (near.abs() < NEAR_BIRTH).then_some(point)
}
