//! Newton's method on the bordered cycle problem.
//!
//! Unknowns (u, T, p); equations: collocation, closure u(1) = u(0), the integral phase condition relative to a
//! reference on the same mesh (under a forcing, its period instead), and one [`Closing`]. Full steps; the contraction of the first two corrections is
//! reported, since stride control lives on it (Deuflhard 2004, Newton Methods for Nonlinear Problems, sec. 5.1).

use armilla_linalg::{Bordered, Right, Shape};

use crate::system::{Fault, Iterate, Row, System};

/// The one equation that picks a point from a branch.
pub trait Closing {
    /// Writes the row of the equation's derivative at the linearised iterate and returns its residual.
    ///
    /// # Errors
    /// [`Fault`] where the row cannot be formed.
    fn fill(&mut self, system: &mut System, at: &Iterate, row: &mut Row) -> Result<f64, Fault>;
}

/// A closing with a constant row: `row . z = target`.
#[derive(Clone, Debug)]
pub struct LinearClosing {
    /// The row.
    pub row: Row,
    /// What its product with the unknowns is to be.
    pub target: f64,
}

impl Closing for LinearClosing {
    fn fill(&mut self, _system: &mut System, at: &Iterate, row: &mut Row) -> Result<f64, Fault> {
        // Not `clone_from`: derived, it would allocate a new row in every iteration.
        row.nodes.copy_from_slice(&self.row.nodes);
        (row.period, row.parameter) = (self.row.period, self.row.parameter);
        Ok(self.row.apply(at) - self.target)
    }
}

/// Limits of the iteration.
#[derive(Clone, Copy, Debug)]
pub struct NewtonSettings {
    /// Most iterations; default 10. Fewer make following timid, more waste work on lost points.
    pub most: usize,
    /// Scaled size of the error after the last correction at which the iteration is done; default 1e-13, about
    /// the roundoff of a well-conditioned cycle.
    pub tolerance: f64,
    /// Scaled size of a correction below which stagnation is taken for the roundoff floor; default 1e-9.
    pub floor: f64,
    /// Largest accepted first correction, scaled; default 2: more than the size of the cycle is another cycle.
    pub longest: f64,
}

impl Default for NewtonSettings {
    fn default() -> Self {
        Self { most: 10, tolerance: 1e-13, floor: 1e-9, longest: 2.0 }
    }
}

/// How an iteration went.
#[derive(Clone, Debug, Default)]
pub struct Report {
    /// Number of corrections applied.
    pub iterations: usize,
    /// Scaled sizes of the corrections.
    pub corrections: Vec<f64>,
    /// Residual of the closing before each correction.
    pub closing_residuals: Vec<f64>,
    /// Scaled size below which a correction may be roundoff.
    pub floor: f64,
}

impl Report {
    /// |second correction| / |first|, 0 where one was enough or the second is roundoff, which no shorter step makes smaller.
    pub fn contraction(&self) -> f64 {
        match self.corrections[..] {
            [first, second, ..] if first > 0.0 && second > self.floor => second / first,
            _ => 0.0,
        }
    }
}

/// Why no cycle was found.
#[derive(Clone, Debug, PartialEq)]
pub enum Failure {
    /// The corrections do not shrink.
    Diverged {
        /// Corrections made.
        iterations: usize,
        /// Scaled size of the last.
        correction: f64,
    },
    /// The period became negative or zero.
    NegativePeriod,
    /// The system could not be set up.
    Fault(Fault),
}

impl std::fmt::Display for Failure {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Diverged { iterations, correction } => {
                write!(f, "newton's method does not converge: correction {iterations} has scaled size {correction:.1e}")
            }
            Self::NegativePeriod => write!(f, "newton's method left the region of positive periods"),
            Self::Fault(fault) => fault.fmt(f),
        }
    }
}

impl std::error::Error for Failure {}

impl From<Fault> for Failure {
    fn from(fault: Fault) -> Self {
        Self::Fault(fault)
    }
}

/// Workspace of the iteration; sized on first use and whenever the mesh changes.
#[derive(Default)]
pub struct Workspace {
    bordered: Option<Bordered>,
    core: Vec<f64>,
    /// What everything here is sized for.
    shape: Option<Shape>,
    pub(crate) step: Option<Row>,
    row: Option<Row>,
    pub(crate) phase: Vec<f64>,
    gap: Vec<f64>,
}

/// Corrects `at` in place. `reference` are the node values of the phase condition, on the system's mesh.
///
/// # Errors
/// [`Failure`]; `at` is then the last iterate.
pub fn correct(
    system: &mut System,
    at: &mut Iterate,
    reference: &[f64],
    closing: &mut dyn Closing,
    settings: NewtonSettings,
) -> Result<Report, Failure> {
    let mut workspace = Workspace::default();
    correct_with(&mut workspace, system, at, Task { reference, closing, settings })
}

/// Units in the last place of the largest state over its scale at which stagnation is taken for roundoff in any case: a
/// state far from zero that hardly moves cannot be had to more digits. A conditioning of a hundred is allowed for.
const FLOOR_UNITS: f64 = 100.0;

impl NewtonSettings {
    /// The same with a floor that allows for the rounding of these node values.
    #[must_use]
    pub fn for_nodes(self, system: &System, nodes: &[f64]) -> Self {
        let floor = FLOOR_UNITS * f64::EPSILON * system.spec().metric.largest(nodes);
        Self { floor: self.floor.max(floor), ..self }
    }
}

/// What [`correct_with`] is to do.
pub struct Task<'a> {
    /// Node values of the phase condition.
    pub reference: &'a [f64],
    /// The closing equation.
    pub closing: &'a mut dyn Closing,
    /// Limits.
    pub settings: NewtonSettings,
}

/// [`correct`] with a workspace that is kept from call to call: no allocation once sized, but for the report.
///
/// # Errors
/// [`Failure`]; `at` is then the last iterate.
pub fn correct_with(
    workspace: &mut Workspace,
    system: &mut System,
    at: &mut Iterate,
    task: Task<'_>,
) -> Result<Report, Failure> {
    let settings = task.settings.for_nodes(system, &at.nodes);
    workspace.fit(system);
    system.phase_row(task.reference, &mut workspace.phase);
    let mut report = Report { floor: settings.floor, ..Report::default() };
    report.corrections.reserve(settings.most);
    report.closing_residuals.reserve(settings.most);
    for iteration in 1..=settings.most {
        let residual = workspace.step(system, at, task.reference, task.closing)?;
        let size = workspace.size(system);
        report.closing_residuals.push(residual);
        report.corrections.push(size);
        report.iterations = iteration;
        let before = iteration.checked_sub(2).map(|k| report.corrections[k]);
        match judge(size, before, settings) {
            Verdict::Lost => return Err(Failure::Diverged { iterations: iteration, correction: size }),
            Verdict::Floor => return Ok(report),
            Verdict::Go | Verdict::Last => {}
        }
        at.add(1.0, workspace.step.as_ref().expect("fitted above"));
        system.keep_time(at);
        if !(at.period > 0.0) {
            return Err(Failure::NegativePeriod);
        }
        if matches!(judge(size, before, settings), Verdict::Last) {
            return Ok(report);
        }
    }
    let correction = report.corrections.last().copied().unwrap_or(f64::NAN);
    Err(Failure::Diverged { iterations: settings.most, correction })
}

/// One Newton correction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Iteration {
    /// Its scaled size.
    pub correction: f64,
    /// Residual of the closing before it.
    pub closing_residual: f64,
}

/// What is to become of a correction.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Verdict {
    /// Apply and go on.
    Go,
    /// Apply: the error left is below the tolerance.
    Last,
    /// Do not apply: the correction is roundoff.
    Floor,
    /// Give up.
    Lost,
}

/// Least c for which the next correction is trusted to be `c size^2`. A first correction often goes where the equations
/// are nearly straight and says too little: on planted cycles it left 20 times the tolerance. Larger costs an iteration
/// more often.
const CURVATURE: f64 = 10.0;

/// Judges a correction by its scaled size and that of the one before; for callers with a loop of their own.
pub fn judge(size: f64, before: Option<f64>, settings: NewtonSettings) -> Verdict {
    /// A correction that shrinks by less than this is no convergence.
    const SLOWEST: f64 = 0.9;
    if !size.is_finite() {
        return Verdict::Lost;
    }
    if size <= settings.tolerance {
        return Verdict::Last;
    }
    match before {
        None if size > settings.longest => Verdict::Lost,
        None => Verdict::Go,
        Some(before) if size > SLOWEST * before => {
            if size <= settings.floor {
                Verdict::Floor
            } else {
                Verdict::Lost
            }
        }
        // Quadratic convergence: the next correction would be about c size^2, c being at least what was seen.
        Some(before) if (size / before.powi(2)).max(CURVATURE) * size.powi(2) <= settings.tolerance => Verdict::Last,
        Some(_) => Verdict::Go,
    }
}

/// Which unknown scalar a sensitivity is asked of.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Scalar {
    /// The period.
    Period,
    /// The free parameter.
    Parameter,
}

/// Estimated absolute roundoff of a scalar of the bordered cycle problem with borders (period, parameter) and (phase,
/// closing): the sensitivity of the scalar to each row, one transposed solve, times the rounding of that row, added as
/// independent errors. `closing` is the size of the closing's terms. `bordered` must have been prepared with the
/// system's last factors.
pub fn roundoff(bordered: &mut Bordered, system: &System, scalar: Scalar, closing: f64) -> f64 {
    let asked = if scalar == Scalar::Period { [1.0, 0.0] } else { [0.0, 1.0] };
    roundoff_of(bordered, system, (&[], asked), closing)
}

/// [`roundoff`] of a linear functional of the unknowns: its part over the nodes (empty for none), and over period and
/// parameter.
fn roundoff_of(bordered: &mut Bordered, system: &System, (nodes, scalars): (&[f64], [f64; 2]), closing: f64) -> f64 {
    let (mut psi, mut chi) = (vec![0.0; system.shape().core_len()], [0.0; 2]);
    bordered.solve_transposed(system.cyclic(), nodes, &scalars, &mut psi, &mut chi);
    let mut sizes = vec![0.0; psi.len()];
    system.row_sizes(&mut sizes);
    let sum: f64 = psi.iter().zip(&sizes).map(|(psi, size)| (psi * size).powi(2)).sum();
    f64::EPSILON * (sum + (closing * chi[1]).powi(2)).sqrt()
}

impl Workspace {
    /// [`roundoff`] after [`correct_with`] has converged on the system's mesh; 0 before any correction.
    pub fn roundoff(&mut self, system: &System, scalar: Scalar, closing: f64) -> f64 {
        self.bordered.as_mut().map_or(0.0, |bordered| roundoff(bordered, system, scalar, closing))
    }

    /// Roundoff of a linear functional of the unknowns, as [`Workspace::roundoff`].
    pub fn roundoff_along(&mut self, system: &System, row: &Row, closing: f64) -> f64 {
        let asked = (&row.nodes[..], [row.period, row.parameter]);
        self.bordered.as_mut().map_or(0.0, |bordered| roundoff_of(bordered, system, asked, closing))
    }

    /// One Newton iteration with a full step, applied to `at` whatever its size; no allocation once sized. For callers
    /// with a loop of their own; [`correct_with`] judges and stops.
    ///
    /// # Errors
    /// [`Fault`]; `at` is then unchanged.
    pub fn iterate(
        &mut self,
        system: &mut System,
        at: &mut Iterate,
        reference: &[f64],
        closing: &mut dyn Closing,
    ) -> Result<Iteration, Fault> {
        self.fit(system);
        system.phase_row(reference, &mut self.phase);
        let closing_residual = self.step(system, at, reference, closing)?;
        let step = self.step.as_ref().expect("fitted above");
        at.add(1.0, step);
        system.keep_time(at);
        Ok(Iteration { correction: self.size(system), closing_residual })
    }

    /// Scaled size of the last step.
    pub(crate) fn size(&self, system: &System) -> f64 {
        let step = self.step.as_ref().expect("fitted before");
        system.spec().metric.inner(system.tables(), system.mesh(), step, step).sqrt()
    }

    pub(crate) fn fit(&mut self, system: &System) {
        let shape = system.shape();
        let len = shape.nodes_len();
        if self.shape == Some(shape) {
            return;
        }
        self.shape = Some(shape);
        self.bordered = Some(Bordered::new(shape, 2));
        self.core = vec![0.0; shape.core_len()];
        self.step = Some(Row::zero(len));
        self.row = Some(Row::zero(len));
        self.phase = vec![0.0; len];
        self.gap = vec![0.0; shape.n];
    }

    /// Linearises at the iterate and leaves the Newton correction in `self.step`; returns the closing's residual.
    pub(crate) fn step(
        &mut self,
        system: &mut System,
        at: &Iterate,
        reference: &[f64],
        closing: &mut dyn Closing,
    ) -> Result<f64, Fault> {
        system.linearise(at)?;
        let row = self.row.as_mut().expect("fitted before");
        let residual = closing.fill(system, at, row)?;
        let bordered = self.bordered.as_mut().expect("fitted before");
        system.period_column(bordered.column_mut(0));
        system.parameter_column(bordered.column_mut(1));
        bordered.row_mut(0).copy_from_slice(&self.phase);
        bordered.row_mut(1).copy_from_slice(&row.nodes);
        let [by_period, by_parameter] = system.phase_corner();
        bordered.corner_mut().copy_from_slice(&[by_period, by_parameter, row.period, row.parameter]);
        self.core.iter_mut().zip(system.residual()).for_each(|(c, r)| *c = -r);
        let n = system.n();
        let len = at.nodes.len();
        let step = self.step.as_mut().expect("fitted before");
        // The iterate closes exactly unless the caller's guess does not; then the step repairs it.
        for (a, value) in self.gap.iter_mut().enumerate() {
            *value = at.nodes[a] - at.nodes[len - n + a];
        }
        let phase = system.phase_gap(at, (&self.phase, reference));
        let mut scalars = [0.0; 2];
        let right = Right { core: &self.core, closing: &self.gap, border: &[phase, -residual] };
        bordered.prepare_and_solve(system.cyclic(), 1.0, right, (&mut step.nodes, &mut scalars))?;
        (step.period, step.parameter) = (scalars[0], scalars[1]);
        Ok(residual)
    }
}
