//! The cycle behind the seam of `follow`.

use std::sync::Arc;

use armilla_collocation::{
    Collocated, DEGREES, Defects, ErrorEstimate, Failure as NewtonFailure, Fault, LinearClosing, MeshSettings, Metric,
    NewtonSettings, Report, Row, Scalar, System, SystemSpec, Tables, Task, Workspace, correct_with, estimate_error,
    roundoff, scales_of,
};
use armilla_follow::{Closing, Corrected, Failure, Orientation, Problem, Watch, Watched};
use armilla_linalg::{Bordered, Right, Shape};
use armilla_model::VectorField;
use armilla_record::{MeshReason, Point, Profile, Reached};

use crate::forced::forcing_periods;
use crate::measure::Measures;
use crate::point::{CyclePoint, CycleTangent};
use crate::resolution::Resolution;
use crate::rough::within_degrees;
use crate::scale::{STILL, STILL_AT_FIRST, first_metric, metric_under_forcing, natural_sizes};
use crate::spectrum::{Spectrum, SpectrumFault, SpectrumSolver};

/// Index of the fold function in the watch list: the parameter's component of the tangent.
pub const WATCH_FOLD: usize = 0;
/// Index of the doubling function: `Prod (mu + 1)`, scaled.
pub const WATCH_DOUBLING: usize = 1;
/// Index of the torus function: `Prod (|mu|^2 - 1)` over complex pairs, scaled.
pub const WATCH_TORUS: usize = 2;
/// Index of the branching function: `Prod (mu - 1)`, scaled.
pub const WATCH_BRANCHING: usize = 3;

/// The model as the cycle problem needs it.
#[derive(Clone)]
pub struct CycleSpec {
    /// The rates.
    pub field: Arc<dyn VectorField>,
    /// Values of all parameters.
    pub parameters: Vec<f64>,
    /// Index of the followed parameter.
    pub free: usize,
    /// Sizes the states are known to have, absolute, 0 where unknown: n numbers.
    pub typical: Vec<f64>,
    /// Size of the followed parameter in the metric: the width of the asked range.
    pub parameter_scale: f64,
}

/// Numerical settings of cycles.
#[derive(Clone, Copy, Debug)]
pub struct CycleSettings {
    /// Degree of a first guess; along a branch it is chosen with the mesh.
    pub degree: usize,
    /// How degree and mesh are chosen.
    pub mesh: MeshSettings,
    /// Limits of Newton's method.
    pub newton: NewtonSettings,
}

impl CycleSettings {
    /// Defaults for an accuracy.
    pub fn new(accuracy: f64) -> Self {
        let mesh = MeshSettings::new(accuracy);
        Self { degree: first_degree(accuracy), mesh, newton: NewtonSettings::default() }
    }

    /// The same with the degree fixed.
    #[must_use]
    pub fn with_degree(mut self, degree: usize) -> Self {
        self.degree = degree.clamp(DEGREES.0, DEGREES.1);
        self.mesh.degrees = (self.degree, self.degree);
        self
    }
}

/// Degree with the least work on a smooth cycle: measured on three models, six decimal digits ask for 6, nine and more
/// for 8.
fn first_degree(accuracy: f64) -> usize {
    let digits = -accuracy.log10();
    ((2.0 + 0.7 * digits).round().max(0.0) as usize).clamp(DEGREES.0, DEGREES.1)
}

/// Share of a state's range at the start of the branch below which its accuracy is no longer relative to its own range.
const LEAST_RANGE: f64 = 1e-3;
/// Length of branch over which a change of the parameter must rise above its roundoff for the branch to count as moving
/// in it: a tenth of the longest stride.
const TURNING_LENGTH: f64 = 0.005;
/// Scales of the metric fall at most to this share of the largest size seen on the branch.
const SHRINK_TO: f64 = 0.3;
/// A scale off by more than this factor is renewed.
const OUT_OF_SCALE: f64 = 1.5;
/// Readings of the states' sizes from the first cycle: on the mesh of the guess, and on its own.
const READINGS: usize = 2;

/// Why a first cycle could not be made.
#[derive(Clone, Debug, PartialEq)]
pub enum StartFault {
    /// Newton's method failed on the given profile.
    Newton(NewtonFailure),
    /// The profile has no extent: it is an equilibrium.
    NoExtent,
    /// The rates use the time, and the model states no period of its forcing.
    NoForcingPeriod,
}

impl std::fmt::Display for StartFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Newton(failure) => failure.fmt(f),
            Self::NoExtent => write!(f, "the start does not move: it is an equilibrium, not a cycle"),
            Self::NoForcingPeriod => write!(f, "the rates use the time, but the model states no period of its forcing"),
        }
    }
}

impl std::error::Error for StartFault {}

/// Where the sizes of states that do not move come from.
pub(crate) enum Sizes<'a> {
    /// The branch this one springs from.
    Parent(&'a [f64]),
    /// The model itself; the number is the share of its size below which a state does not move.
    Natural(f64),
}

/// Cycles of one model in one parameter.
pub struct CycleProblem {
    pub(crate) spec: CycleSpec,
    pub(crate) settings: CycleSettings,
    pub(crate) system: System,
    pub(crate) metric: Metric,
    /// Largest range of each state seen on the branch.
    largest: Vec<f64>,
    pub(crate) newton: Workspace,
    defects: Defects,
    /// Solvers of multipliers, one for each degree met.
    spectra: Vec<Option<SpectrumSolver>>,
    /// Spectrum of the point it was last asked of, with that point: `watch` and `describe` ask again.
    watched: Option<(CyclePoint, Spectrum)>,
    /// Why the multipliers asked for last could not be computed.
    spectrum_fault: Option<SpectrumFault>,
    bordered: Option<Bordered>,
    /// Shape of the bordered system above.
    sized_for: Option<Shape>,
    /// Roundoff of the parameter at the last tangent.
    parameter_roundoff: f64,
    /// State of the choice of meshes.
    pub(crate) resolution: Resolution,
    work: Row,
}

impl CycleProblem {
    /// A problem whose metric is that of `profile`, with the cycle itself corrected at the parameter value `parameter`
    /// and on a mesh chosen for the accuracy.
    ///
    /// # Errors
    /// [`StartFault`].
    pub fn start(
        spec: CycleSpec,
        settings: CycleSettings,
        profile: &Profile,
        parameter: f64,
    ) -> Result<(Self, CyclePoint), StartFault> {
        let (mut problem, mut point) = Self::guessed(spec, settings, profile, parameter)?;
        problem.correct_at(&mut point, parameter).map_err(StartFault::Newton)?;
        problem.with_own_sizes(point, parameter)
    }

    /// A problem whose metric is that of a guess, with the guess, not corrected yet.
    pub(crate) fn guessed(
        spec: CycleSpec,
        settings: CycleSettings,
        profile: &Profile,
        parameter: f64,
    ) -> Result<(Self, CyclePoint), StartFault> {
        let guess = within_degrees(profile, settings.mesh.degrees);
        let problem = Self::with_metric(spec, settings, Sizes::Natural(STILL_AT_FIRST), &guess, parameter)?;
        Ok((problem, CyclePoint::from_profile(&guess, parameter)))
    }

    /// A first cycle with the sizes of states read from itself, on a mesh chosen for the accuracy.
    pub(crate) fn with_own_sizes(
        self,
        mut point: CyclePoint,
        parameter: f64,
    ) -> Result<(Self, CyclePoint), StartFault> {
        let settings = self.settings;
        let mut problem = self;
        // The given profile carries the errors of its origin, the corrected one those of its mesh, the last one next to
        // none: sizes are read anew each time, and what is no larger than the error is no motion.
        for _ in 0..READINGS {
            let still = STILL.max(problem.profile_error(&point));
            let profile = problem.profile(&point);
            problem = Self::with_metric(problem.spec, settings, Sizes::Natural(still), &profile, parameter)?;
            point = problem.first_mesh(point);
        }
        Ok((problem, point))
    }

    /// A problem with the metric of `profile`; `sizes` stand in for states that do not move.
    pub(crate) fn with_metric(
        spec: CycleSpec,
        settings: CycleSettings,
        sizes: Sizes<'_>,
        profile: &Profile,
        parameter: f64,
    ) -> Result<Self, StartFault> {
        let mut parameters = spec.parameters.clone();
        parameters[spec.free] = parameter;
        let (sizes, still) = match sizes {
            Sizes::Parent(sizes) => (sizes.to_vec(), STILL),
            Sizes::Natural(still) => {
                (natural_sizes(spec.field.as_ref(), &parameters, profile, (&spec.typical, still)), still)
            }
        };
        let forcing = forcing_periods(spec.field.as_ref(), (&parameters, spec.free), profile.period)?;
        let metric = if forcing.is_some() {
            metric_under_forcing(profile, (&sizes, still), spec.parameter_scale)
        } else {
            first_metric(profile, (&sizes, still), spec.parameter_scale).ok_or(StartFault::NoExtent)?
        };
        let system_spec = SystemSpec {
            field: spec.field.clone(),
            parameters: spec.parameters.clone(),
            free: spec.free,
            metric: metric.clone(),
        };
        let mut system = System::new(system_spec, profile.degree, &profile.mesh);
        system.set_forcing(forcing.unwrap_or(0));
        let defects = Defects::new(spec.field.as_ref());
        Ok(Self {
            spec,
            settings,
            system,
            largest: metric.scales.clone(),
            metric,
            newton: Workspace::default(),
            defects,
            spectra: (0..=DEGREES.1).map(|_| None).collect(),
            watched: None,
            spectrum_fault: None,
            bordered: None,
            sized_for: None,
            parameter_roundoff: 0.0,
            resolution: Resolution::default(),
            work: Row::zero(0),
        })
    }

    /// The settings in force.
    pub fn settings(&self) -> &CycleSettings {
        &self.settings
    }

    /// The metric of the branch.
    pub fn metric(&self) -> &Metric {
        &self.metric
    }

    /// A cycle as a profile.
    pub fn profile(&self, point: &CyclePoint) -> Profile {
        point.profile()
    }

    /// Values of all parameters at a point.
    pub fn parameters_at(&self, point: &CyclePoint) -> Vec<f64> {
        let mut parameters = self.spec.parameters.clone();
        parameters[self.spec.free] = point.unknowns.parameter;
        parameters
    }

    /// Multipliers of a cycle.
    ///
    /// # Errors
    /// [`SpectrumFault`].
    pub fn spectrum(&mut self, point: &CyclePoint) -> Result<Spectrum, SpectrumFault> {
        let parameters = self.parameters_at(point);
        let profile = point.profile();
        let solver = &mut self.spectra[point.degree];
        let solver = solver.get_or_insert_with(|| SpectrumSolver::new(self.spec.field.as_ref(), point.degree));
        let found = solver.spectrum(&profile, &parameters, &self.metric.scales, self.settings.mesh.accuracy);
        self.spectrum_fault = found.as_ref().err().copied();
        found
    }

    /// Why the multipliers asked for last could not be computed; none where they could.
    pub fn spectrum_fault(&self) -> Option<&SpectrumFault> {
        self.spectrum_fault.as_ref()
    }

    /// Multipliers of a cycle, computed once where they are asked for again.
    pub(crate) fn known_spectrum(&mut self, point: &CyclePoint) -> Result<Spectrum, SpectrumFault> {
        if let Some((known, spectrum)) = &self.watched
            && known.unknowns == point.unknowns
            && known.mesh == point.mesh
        {
            return Ok(spectrum.clone());
        }
        let spectrum = self.spectrum(point)?;
        self.watched = Some((point.clone(), spectrum.clone()));
        Ok(spectrum)
    }

    /// Estimated error of a cycle's profile, relative to the range of each state: what a finer mesh would remove, what
    /// Newton's method leaves, and rounding.
    pub fn profile_error(&mut self, point: &CyclePoint) -> f64 {
        self.estimate(point).error + self.left_by_newton(point)
    }

    /// Where Newton's method stops, and rounding.
    pub(crate) fn left_by_newton(&self, point: &CyclePoint) -> f64 {
        self.settings.newton.tolerance + self.rounding_of_nodes(point)
    }

    /// What rounding leaves of a profile: a state far from zero that hardly moves has few digits.
    pub(crate) fn rounding_of_nodes(&self, point: &CyclePoint) -> f64 {
        /// Units in the last place of the largest state, conditioning included.
        const UNITS: f64 = 8.0;
        let n = self.metric.scales.len();
        let scales = scales_of(&point.unknowns.nodes, &self.least_ranges());
        let values = point.unknowns.nodes.iter().enumerate();
        UNITS * f64::EPSILON * values.map(|(k, value)| value.abs() / scales[k % n]).fold(0.0, f64::max)
    }

    fn least_ranges(&self) -> Vec<f64> {
        self.metric.scales.iter().map(|scale| LEAST_RANGE * scale).collect()
    }

    /// Local errors of a cycle, measured by its defect.
    pub(crate) fn estimate(&mut self, point: &CyclePoint) -> ErrorEstimate {
        let least = self.least_ranges();
        let (tables, mesh, nodes) = (point.tables(), &point.mesh, &point.unknowns.nodes);
        let parameters = self.parameters_at(point);
        let cycle = Collocated { mesh, nodes, period: point.unknowns.period, parameters: &parameters };
        let local = self.defects.local_errors(tables, cycle, &scales_of(nodes, &least));
        estimate_error(tables, mesh, nodes, &least).measured(tables, mesh, &local)
    }

    /// A point as a row of the branch table.
    ///
    /// # Errors
    /// [`SpectrumFault`] where the multipliers fail.
    pub fn describe(&mut self, point: &CyclePoint, turns: usize, distance: f64) -> Result<Point, SpectrumFault> {
        let spectrum = self.known_spectrum(point)?;
        let profile = self.profile(point);
        let measures = Measures::of(&profile);
        let (discretisation, rounding) = (self.estimate(point).error, self.left_by_newton(point));
        let error = discretisation + rounding;
        let accuracy = self.settings.mesh.accuracy;
        let reached = match () {
            () if error <= accuracy => Reached::Accuracy,
            () if discretisation <= accuracy => Reached::RoundoffFloor,
            () if point.reached == Reached::Accuracy && self.settings.mesh.fixed.is_some() => Reached::GivenMesh,
            () if point.reached == Reached::Accuracy => Reached::Rough,
            () => point.reached,
        };
        Ok(Point {
            value: point.unknowns.parameter,
            period: point.unknowns.period,
            turns,
            distance,
            unstable_count: spectrum.unstable_count(),
            trivial_defect: spectrum.trivial_defect,
            liouville_defect: spectrum.liouville_defect,
            profile_error: error,
            maxima: measures.maxima,
            minima: measures.minima,
            means: measures.means,
            spreads: measures.spreads,
            multipliers: spectrum.multipliers,
            unresolved: spectrum.unresolved,
            intervals: profile.intervals(),
            degree: profile.degree,
            choice: point.choice,
            reached,
            eigenvalues: Vec::new(),
        })
    }

    /// Corrects with the parameter held; the phase refers to the guess itself.
    pub(crate) fn correct_at(&mut self, point: &mut CyclePoint, parameter: f64) -> Result<Report, NewtonFailure> {
        let mut row = Row::zero(point.unknowns.nodes.len());
        row.parameter = 1.0;
        let reference = point.unknowns.nodes.clone();
        let mut closing = LinearClosing { row, target: parameter };
        let report = self.newton(point, &reference, &mut closing)?;
        // The linear row meets the value up to rounding; the user asked for the value.
        point.unknowns.parameter = parameter;
        self.system.keep_time(&mut point.unknowns);
        Ok(report)
    }

    /// Newton's method on the mesh of `point`, in place.
    pub(crate) fn newton(
        &mut self,
        point: &mut CyclePoint,
        reference: &[f64],
        closing: &mut dyn armilla_collocation::Closing,
    ) -> Result<Report, NewtonFailure> {
        self.system.set_mesh(point.degree, &point.mesh);
        let task = Task { reference, closing, settings: self.settings.newton };
        correct_with(&mut self.newton, &mut self.system, &mut point.unknowns, task)
    }

    /// Lets the metric follow the cycle where its size or period has changed much, so that a stride stays a stride;
    /// true where it changed.
    fn adapt_metric(&mut self, point: &CyclePoint) -> bool {
        let profile = self.profile(point);
        let ranges = profile.node_ranges();
        self.largest.iter_mut().zip(&ranges).for_each(|(size, range)| *size = size.max(*range));
        // Scales never fall far below the largest size seen: a cycle that shrinks to an equilibrium must get there.
        // What does not move at all keeps its size: it may move off its place as a whole, as beyond a pitchfork.
        let scale = |((range, largest), now): ((&f64, &f64), &f64)| {
            if *range > STILL * largest { range.max(SHRINK_TO * largest) } else { *now }
        };
        let wanted: Vec<f64> = ranges.iter().zip(&self.largest).zip(&self.metric.scales).map(scale).collect();
        let far = |now: f64, wanted: f64| now > OUT_OF_SCALE * wanted || wanted > OUT_OF_SCALE * now;
        let changed = far(self.metric.period_scale, profile.period)
            || self.metric.scales.iter().zip(&wanted).any(|(now, wanted)| far(*now, *wanted));
        if changed {
            self.metric = Metric { scales: wanted, period_scale: profile.period, ..self.metric.clone() };
            self.system.set_metric(self.metric.clone());
        }
        changed
    }

    /// Sets the metric to that of a cycle, forgetting what was seen elsewhere on the branch: before a second walk from
    /// the same start.
    pub fn anchor(&mut self, point: &CyclePoint) {
        let extremes = self.profile(point).extremes();
        // What never moves keeps its size.
        let scale =
            |((low, high), now): ((f64, f64), &f64)| if high - low > LEAST_RANGE * now { high - low } else { *now };
        self.largest = extremes.into_iter().zip(&self.metric.scales).map(scale).collect();
        self.metric =
            Metric { scales: self.largest.clone(), period_scale: point.unknowns.period, ..self.metric.clone() };
        self.system.set_metric(self.metric.clone());
    }

    /// Estimated roundoff of the parameter, as a standard deviation, where the last tangent was computed.
    pub fn parameter_roundoff(&self) -> f64 {
        self.parameter_roundoff + f64::EPSILON * self.metric.parameter_scale
    }

    /// Parameter component of a unit tangent below which its sign is roundoff: that of the parameter at the last tangent,
    /// over [`TURNING_LENGTH`].
    fn turning_noise(&self) -> f64 {
        (self.parameter_roundoff / self.metric.parameter_scale / TURNING_LENGTH).max(1e3 * f64::EPSILON)
    }

    /// The same direction with length 1 in the present metric.
    pub(crate) fn normalised(&self, mut tangent: CycleTangent) -> CycleTangent {
        let length = self.metric.inner(Tables::of(tangent.degree), &tangent.mesh, &tangent.row, &tangent.row).sqrt();
        tangent.row.nodes.iter_mut().for_each(|value| *value /= length);
        tangent.row.period /= length;
        tangent.row.parameter /= length;
        tangent
    }

    /// The functional `x -> <direction, x>` on the mesh of `point`.
    pub(crate) fn arclength_row(&mut self, direction: &CycleTangent, point: &CyclePoint) -> Row {
        let direction = direction.on_mesh(point.degree, &point.mesh);
        let mut row = Row::zero(direction.row.nodes.len());
        self.metric.functional(point.tables(), &point.mesh, &direction.row, &mut row);
        row
    }

    fn follow_failure(failure: NewtonFailure) -> Failure<Fault> {
        match failure {
            NewtonFailure::Fault(fault @ Fault::NotFinite { .. }) => Failure::Outside(fault),
            _ => Failure::NotConverged,
        }
    }
}

impl Problem for CycleProblem {
    type Point = CyclePoint;
    type Tangent = CycleTangent;
    type Error = Fault;

    fn advance(&self, point: &CyclePoint, tangent: &CycleTangent, stride: f64) -> CyclePoint {
        let mut ahead = point.clone();
        let tangent = tangent.on_mesh(point.degree, &point.mesh);
        ahead.unknowns.add(stride, &tangent.row);
        ahead
    }

    fn correct(
        &mut self,
        prediction: &CyclePoint,
        closing: Closing<'_, CyclePoint, CycleTangent>,
    ) -> Result<Corrected<CyclePoint>, Failure<Fault>> {
        let mut point = CyclePoint { choice: MeshReason::Kept, ..prediction.clone() };
        let report = match closing {
            Closing::Parameter(value) => self.correct_at(&mut point, value),
            Closing::Arclength { from, tangent: direction, stride: amount }
            | Closing::Component { from, direction, amount } => {
                let from = from.on_mesh(prediction.degree, &prediction.mesh);
                let row = self.arclength_row(direction, prediction);
                let target = row.apply(&from.unknowns) + amount;
                let mut closing = LinearClosing { row, target };
                self.newton(&mut point, &from.unknowns.nodes, &mut closing)
            }
        }
        .map_err(Self::follow_failure)?;
        if let Closing::Arclength { stride, .. } = closing {
            // A correction longer than the step itself does not come from the neighbourhood of the prediction.
            if !(self.distance(&point, prediction) <= stride) {
                return Err(Failure::Jumped);
            }
        }
        Ok(Corrected { point, contraction: report.contraction(), iterations: report.iterations })
    }

    fn tangent(
        &mut self,
        point: &CyclePoint,
        orientation: Orientation<'_, CycleTangent>,
    ) -> Result<CycleTangent, Failure<Fault>> {
        let len = point.unknowns.nodes.len();
        let row = match orientation {
            Orientation::Along(old) => self.arclength_row(old, point),
            Orientation::Parameter(sign) => Row { parameter: sign, ..Row::zero(len) },
        };
        self.system.set_mesh(point.degree, &point.mesh);
        self.system.linearise(&point.unknowns).map_err(|fault| Self::follow_failure(fault.into()))?;
        let shape = self.system.shape();
        if self.sized_for != Some(shape) {
            self.sized_for = Some(shape);
            self.bordered = Some(Bordered::new(shape, 2));
            self.work = Row::zero(len);
        }
        let bordered = self.bordered.as_mut().expect("made above");
        self.system.period_column(bordered.column_mut(0));
        self.system.parameter_column(bordered.column_mut(1));
        self.system.phase_row(&point.unknowns.nodes, bordered.row_mut(0));
        bordered.row_mut(1).copy_from_slice(&row.nodes);
        let [by_period, by_parameter] = self.system.phase_corner();
        bordered.corner_mut().copy_from_slice(&[by_period, by_parameter, row.period, row.parameter]);
        bordered.prepare(self.system.cyclic(), 1.0).map_err(|_| Failure::NotConverged)?;
        let mut scalars = [0.0; 2];
        let right = Right { core: &[], closing: &[], border: &[0.0, 1.0] };
        bordered.solve(self.system.cyclic(), right, &mut self.work.nodes, &mut scalars);
        let tangent = Row { nodes: self.work.nodes.clone(), period: scalars[0], parameter: scalars[1] };
        self.parameter_roundoff = roundoff(bordered, &self.system, Scalar::Parameter, 0.0);
        let tangent = self.normalised(CycleTangent { degree: point.degree, mesh: point.mesh.clone(), row: tangent });
        if tangent.row.nodes.iter().all(|value| value.is_finite()) { Ok(tangent) } else { Err(Failure::NotConverged) }
    }

    fn inner(&self, a: &CycleTangent, b: &CycleTangent) -> f64 {
        let b = b.on_mesh(a.degree, &a.mesh);
        self.metric.inner(Tables::of(a.degree), &a.mesh, &a.row, &b.row)
    }

    fn distance(&self, a: &CyclePoint, b: &CyclePoint) -> f64 {
        let b = b.on_mesh(a.degree, &a.mesh);
        let difference = Row {
            nodes: a.unknowns.nodes.iter().zip(&b.unknowns.nodes).map(|(a, b)| a - b).collect(),
            period: a.unknowns.period - b.unknowns.period,
            parameter: a.unknowns.parameter - b.unknowns.parameter,
        };
        self.metric.inner(a.tables(), &a.mesh, &difference, &difference).sqrt()
    }

    fn met_again(&self, point: &CyclePoint, first: &CyclePoint, within: f64) -> Option<CyclePoint> {
        self.shifted_towards(point, first, within)
    }

    fn parameter(&self, point: &CyclePoint) -> f64 {
        point.unknowns.parameter
    }

    fn watch(&mut self, point: &CyclePoint, tangent: &CycleTangent) -> Result<Watch, Failure<Fault>> {
        let spectrum = self.known_spectrum(point).map_err(|_| Failure::NotConverged)?;
        let value = |value: f64| Watched { value, slope: None };
        let turning = tangent.row.parameter / self.metric.parameter_scale;
        let noise = self.turning_noise();
        let watch = Watch {
            values: vec![
                // Below roundoff the sign is noise: the parameter stands still there and does not turn back.
                value(if turning.abs() < noise { 0.0 } else { turning }),
                value(spectrum.doubling_product()),
                value(spectrum.torus_product()),
                value(spectrum.branching_product()),
            ],
            unstable_count: spectrum.unstable_count(),
        };
        Ok(watch)
    }

    fn renew(&mut self, point: &CyclePoint, tangents: &[&CycleTangent]) -> Option<(CyclePoint, Vec<CycleTangent>)> {
        let adapted = self.adapt_metric(point).then(|| {
            let tangents = tangents.iter().map(|tangent| self.normalised((*tangent).clone())).collect();
            (point.clone(), tangents)
        });
        self.renew_mesh(point, tangents, adapted)
    }
}
