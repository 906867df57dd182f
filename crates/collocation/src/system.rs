//! The discretised cycle problem at one iterate: residual, factored Jacobian, borders' raw material.
//!
//! Row (i, k, a) for interval i, Gauss point k, state a: `Sum_j L'_j(rho_k) u_(i,j) - h_i T f(u(t_ik), p)`,
//! so a residual is an increment of the state over the interval. Blocks go to [`armilla_linalg::Cyclic`]; the
//! columns of the period and of the parameter are `-h_i f` and `-h_i T f_p`.
//! Batches run over all Gauss points at once, point i m + k, structure of arrays.
//!
//! Under a forcing the rates are taken at the real time `t = T tau`. The column of the period gains `-h_i t f_t`, and what
//! fixes the phase is not a row over the nodes but `(T - k P(p)) / T0 = 0`, k forcing periods P: see [`crate::Forced`].

use std::sync::Arc;

use armilla_linalg::{Cyclic, Shape, Singular};
use armilla_model::{Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, VectorField};

use crate::forced::Forced;
use crate::metric::Metric;
use crate::tables::Tables;

/// What a system is built from.
#[derive(Clone)]
pub struct SystemSpec {
    /// The rates.
    pub field: Arc<dyn VectorField>,
    /// Values of all parameters; the free one is overwritten by the iterate.
    pub parameters: Vec<f64>,
    /// Index of the free parameter.
    pub free: usize,
    /// Sizes of everything, for scaled norms and the phase condition.
    pub metric: Metric,
}

/// Values of all unknowns on a mesh.
#[derive(Clone, Debug, PartialEq)]
pub struct Iterate {
    /// Node values as in a profile, `(N m + 1) n`.
    pub nodes: Vec<f64>,
    /// The period.
    pub period: f64,
    /// The free parameter.
    pub parameter: f64,
}

impl Iterate {
    /// Adds `factor` times `step`.
    pub fn add(&mut self, factor: f64, step: &Row) {
        self.nodes.iter_mut().zip(&step.nodes).for_each(|(a, b)| *a += factor * b);
        self.period += factor * step.period;
        self.parameter += factor * step.parameter;
    }
}

/// A vector or a linear functional on the unknowns, with the layout of [`Iterate`].
#[derive(Clone, Debug, PartialEq)]
pub struct Row {
    /// Part over the nodes.
    pub nodes: Vec<f64>,
    /// Part over the period.
    pub period: f64,
    /// Part over the free parameter.
    pub parameter: f64,
}

impl Row {
    /// A zero row for `len` node values.
    pub fn zero(len: usize) -> Self {
        Self { nodes: vec![0.0; len], period: 0.0, parameter: 0.0 }
    }

    /// The functional applied to an iterate.
    pub fn apply(&self, at: &Iterate) -> f64 {
        dot(&self.nodes, &at.nodes) + self.period * at.period + self.parameter * at.parameter
    }
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// Why a system cannot be set up at an iterate.
#[derive(Clone, Debug, PartialEq)]
pub enum Fault {
    /// A rate or a derivative is not finite there.
    NotFinite {
        /// Scaled time in `[0, 1]`.
        time: f64,
        /// Index of the state whose rate or derivative it is.
        state: usize,
        /// All states there.
        states: Vec<f64>,
    },
    /// The linear system is singular.
    Singular(Singular),
}

impl std::fmt::Display for Fault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::NotFinite { time, state, states } => {
                write!(
                    f,
                    "rate {state} or one of its derivatives is not finite at scaled time {time}, states {states:?}"
                )
            }
            Self::Singular(singular) => singular.fmt(f),
        }
    }
}

impl std::error::Error for Fault {}

impl From<Singular> for Fault {
    fn from(singular: Singular) -> Self {
        Self::Singular(singular)
    }
}

/// A variation (v, S, q) of a cycle and the multipliers psi of the rows: what the gradient of a test function needs.
#[derive(Clone, Copy, Debug)]
pub struct Variation<'a> {
    /// Left vector over all interval rows, N R numbers.
    pub psi: &'a [f64],
    /// Variation of the nodes.
    pub nodes: &'a [f64],
    /// Variation of the period.
    pub period: f64,
    /// Variation of the free parameter.
    pub parameter: f64,
}

/// The discretised problem on one mesh. Life cycle: [`System::set_mesh`], then [`System::linearise`] at an
/// iterate; everything else refers to the last linearisation.
pub struct System {
    spec: SystemSpec,
    evaluator: Box<dyn Evaluator>,
    tables: &'static Tables,
    mesh: Vec<f64>,
    entries: Vec<(usize, usize)>,
    /// Of each entry of the Jacobian: size of the column's state over that of the row's, the units of the blocks.
    ratios: Vec<f64>,
    cyclic: Cyclic,
    states: Vec<f64>,
    rates: Vec<f64>,
    jacobian: Vec<f64>,
    free_column: Vec<f64>,
    /// The forcing; none where the rates do not use the time.
    forced: Option<Forced>,
    /// Times of the Gauss points; empty without a forcing.
    times: Vec<f64>,
    /// Column of the period per unit of h, `f + t f_t`; empty without a forcing.
    period_rates: Vec<f64>,
    residual: Vec<f64>,
    psi_points: Vec<f64>,
    variation_points: Vec<f64>,
    gradient_states: Vec<f64>,
    gradient_columns: Vec<f64>,
    covector: Vec<f64>,
    period: f64,
    nodes: Vec<f64>,
}

impl System {
    /// A system for degree `degree` (one of [`crate::DEGREES`]) on `mesh` (N+1 points ascending from 0 to 1).
    pub fn new(spec: SystemSpec, degree: usize, mesh: &[f64]) -> Self {
        let columns = [Column::Parameter(spec.free), Column::Time];
        let evaluator = spec.field.evaluator(if spec.field.is_forced() { &columns } else { &columns[..1] });
        let pattern = spec.field.pattern();
        let entries: Vec<(usize, usize)> = pattern.entries().collect();
        let shape = Shape { n: spec.field.n_states(), inner: 0, intervals: 1 };
        let mut system = Self {
            spec,
            evaluator,
            tables: Tables::of(degree),
            mesh: Vec::new(),
            ratios: vec![1.0; entries.len()],
            entries,
            cyclic: Cyclic::new(shape),
            states: Vec::new(),
            rates: Vec::new(),
            jacobian: Vec::new(),
            free_column: Vec::new(),
            forced: None,
            times: Vec::new(),
            period_rates: Vec::new(),
            residual: Vec::new(),
            psi_points: Vec::new(),
            variation_points: Vec::new(),
            gradient_states: Vec::new(),
            gradient_columns: Vec::new(),
            covector: vec![0.0; shape.n],
            period: 0.0,
            nodes: Vec::new(),
        };
        system.set_mesh(degree, mesh);
        system
    }

    /// Moves to another mesh and degree.
    pub fn set_mesh(&mut self, degree: usize, mesh: &[f64]) {
        let n = self.n();
        let intervals = mesh.len() - 1;
        let same_size = self.mesh.len() == mesh.len() && self.tables.degree == degree;
        self.tables = Tables::of(degree);
        self.mesh.clear();
        self.mesh.extend_from_slice(mesh);
        if same_size {
            return;
        }
        let shape = Shape { n, inner: (self.tables.degree - 1) * n, intervals };
        self.cyclic = Cyclic::new(shape);
        let points = intervals * self.tables.degree;
        self.states.resize(n * points, 0.0);
        self.rates.resize(n * points, 0.0);
        self.jacobian.resize(self.entries.len() * points, 0.0);
        let columns = if self.spec.field.is_forced() { 2 } else { 1 };
        self.free_column.resize(columns * n * points, 0.0);
        self.residual.resize(shape.core_len(), 0.0);
        self.psi_points.resize(n * points, 0.0);
        self.variation_points.resize(n * points, 0.0);
        self.gradient_states.resize(n * points, 0.0);
        self.gradient_columns.resize(columns * points, 0.0);
    }

    /// Number of states.
    pub fn n(&self) -> usize {
        self.spec.field.n_states()
    }
    /// What the system was built from.
    pub fn spec(&self) -> &SystemSpec {
        &self.spec
    }
    /// Changes the metric of scaled norms and of the phase condition.
    pub fn set_metric(&mut self, metric: Metric) {
        self.spec.metric = metric;
    }
    /// Makes the cycles of this system last `periods` forcing periods each: to be said before anything else where the rates
    /// use the time.
    pub fn set_forcing(&mut self, periods: usize) {
        self.forced = self.spec.field.is_forced().then_some(Forced { periods });
    }
    /// The forcing, where there is one.
    pub fn forced(&self) -> Option<Forced> {
        self.forced
    }
    /// Basis tables.
    pub fn tables(&self) -> &'static Tables {
        self.tables
    }
    /// The mesh, N+1 points.
    pub fn mesh(&self) -> &[f64] {
        &self.mesh
    }
    /// Sizes of the linear system.
    pub fn shape(&self) -> Shape {
        self.cyclic.shape()
    }
    /// The factored core of the last linearisation.
    pub fn cyclic(&self) -> &Cyclic {
        &self.cyclic
    }
    /// Node values of the last linearisation.
    pub fn last_nodes(&self) -> &[f64] {
        &self.nodes
    }
    /// Residual of the last linearisation, N R numbers.
    pub fn residual(&self) -> &[f64] {
        &self.residual
    }

    fn points(&self) -> usize {
        (self.mesh.len() - 1) * self.tables.degree
    }

    fn h(&self, i: usize) -> f64 {
        self.mesh[i + 1] - self.mesh[i]
    }

    /// Evaluates the field at the iterate, fills residual and blocks, and factors the core.
    ///
    /// # Errors
    /// [`Fault`] where a rate is not finite or an interval's block is singular.
    pub fn linearise(&mut self, at: &Iterate) -> Result<(), Fault> {
        self.evaluate(at)?;
        self.fill_residual(at);
        self.cyclic.set_sizes(&self.spec.metric.scales);
        for (ratio, &(a, b)) in self.ratios.iter_mut().zip(&self.entries) {
            *ratio = self.cyclic.sizes()[b] / self.cyclic.sizes()[a];
        }
        for i in 0..self.mesh.len() - 1 {
            self.fill_block(i);
            self.cyclic.condense(i)?;
        }
        self.cyclic.join();
        Ok(())
    }

    fn evaluate(&mut self, at: &Iterate) -> Result<(), Fault> {
        let points = self.points();
        self.spec.parameters[self.spec.free] = at.parameter;
        self.period = at.period;
        self.nodes.clear();
        self.nodes.extend_from_slice(&at.nodes);
        to_points(self.tables, self.spec.metric.scales.len(), &at.nodes, &mut self.states);
        if self.spec.field.is_forced() {
            self.set_times();
        }
        let batch = Batch { len: points, time: &self.times, states: &self.states, parameters: &self.spec.parameters };
        let out =
            Linearisation { rates: &mut self.rates, jacobian: &mut self.jacobian, columns: &mut self.free_column };
        self.evaluator.linearise(batch, out);
        if self.spec.field.is_forced() {
            self.set_period_rates();
        }
        self.find_not_finite()
    }

    fn set_times(&mut self) {
        self.times.clear();
        for pair in self.mesh.windows(2) {
            let (from, h) = (pair[0], pair[1] - pair[0]);
            self.times.extend(self.tables.points.iter().map(|c| self.period * (from + h * c)));
        }
    }

    /// `f + t f_t`: what the period moves, the times with it.
    fn set_period_rates(&mut self) {
        let points = self.points();
        self.period_rates.clear();
        let slopes = &self.free_column[self.n() * points..];
        self.period_rates.extend(
            self.rates.iter().zip(slopes).enumerate().map(|(k, (rate, slope))| rate + self.times[k % points] * slope),
        );
    }

    fn find_not_finite(&self) -> Result<(), Fault> {
        let points = self.points();
        let bad = |values: &[f64]| values.iter().position(|value| !value.is_finite());
        let found = bad(&self.rates)
            .or_else(|| bad(&self.free_column))
            .map(|place| (place / points % self.n(), place % points))
            .or_else(|| bad(&self.jacobian).map(|place| (self.entries[place / points].0, place % points)));
        let Some((state, point)) = found else { return Ok(()) };
        let (i, k) = (point / self.tables.degree, point % self.tables.degree);
        let time = self.mesh[i] + self.h(i) * self.tables.points[k];
        let states = (0..self.n()).map(|a| self.states[a * points + point]).collect();
        Err(Fault::NotFinite { time, state, states })
    }

    fn fill_residual(&mut self, at: &Iterate) {
        let (n, m, points) = (self.n(), self.tables.degree, self.points());
        let size = m + 1;
        for i in 0..self.mesh.len() - 1 {
            let step = self.h(i) * at.period;
            let nodes = &at.nodes[i * m * n..(i * m + size) * n];
            for k in 0..m {
                let row = &mut self.residual[(i * m + k) * n..(i * m + k + 1) * n];
                row.fill(0.0);
                // Differences from the first node: slopes of a constant vanish, and its rounding with them.
                let (first, others) = nodes.split_at(n);
                for (node, &slope) in others.chunks_exact(n).zip(&self.tables.slope[k * size + 1..(k + 1) * size]) {
                    for (r, (u, from)) in row.iter_mut().zip(node.iter().zip(first)) {
                        *r += slope * (u - from);
                    }
                }
                for (a, r) in row.iter_mut().enumerate() {
                    *r -= step * self.rates[a * points + i * m + k];
                }
            }
        }
    }

    fn fill_block(&mut self, i: usize) {
        let (n, m, points) = (self.n(), self.tables.degree, self.points());
        let step = self.h(i) * self.period;
        let (size, inner, width) = (m + 1, (m - 1) * n, (m + 1) * n);
        // Column of node j in the block's order [w | u_left | u_right].
        let column = |j: usize| match j {
            0 => inner,
            j if j == m => inner + n,
            j => (j - 1) * n,
        };
        let block = self.cyclic.block_mut(i);
        block.fill(0.0);
        for k in 0..m {
            let values = &self.tables.value[k * size..(k + 1) * size];
            let slopes = &self.tables.slope[k * size..(k + 1) * size];
            for (entry, &(a, b)) in self.entries.iter().enumerate() {
                let factor = -step * self.jacobian[entry * points + i * m + k] * self.ratios[entry];
                let row = &mut block[(k * n + a) * width..(k * n + a + 1) * width];
                for (j, value) in values.iter().enumerate() {
                    row[column(j) + b] += factor * value;
                }
            }
            for a in 0..n {
                let row = &mut block[(k * n + a) * width..(k * n + a + 1) * width];
                for (j, slope) in slopes.iter().enumerate() {
                    row[column(j) + a] += slope;
                }
            }
        }
    }

    /// Writes the size of the terms each interval row is summed from: its rounding is that times the unit of the last
    /// place. `Sum_j |L'_j (u_j - u_0)| + h T (|f| + Sum_b |A_ab u_b|)`, the last because the rate is taken at a rounded
    /// state.
    pub fn row_sizes(&self, out: &mut [f64]) {
        let (n, m, points) = (self.n(), self.tables.degree, self.points());
        let size = m + 1;
        for point in 0..points {
            let (i, k) = (point / m, point % m);
            let slopes = &self.tables.slope[k * size..(k + 1) * size];
            for a in 0..n {
                let value = |j: usize| self.nodes[(i * m + j) * n + a];
                let terms: f64 =
                    slopes.iter().enumerate().map(|(j, slope)| (slope * (value(j) - value(0))).abs()).sum();
                out[point * n + a] = terms + (self.h(i) * self.period * self.rates[a * points + point]).abs();
            }
        }
        self.add_jacobian_sizes(&self.states, out);
        self.add_time_sizes(out);
    }

    /// Adds `h T |t f_t|` to all rows under a forcing: the rate is taken at a rounded time.
    fn add_time_sizes(&self, out: &mut [f64]) {
        let (n, m, points) = (self.n(), self.tables.degree, self.points());
        for (point, time) in self.times.iter().enumerate() {
            let step = self.h(point / m) * self.period * time;
            for a in 0..n {
                out[point * n + a] += (step * self.free_column[(n + a) * points + point]).abs();
            }
        }
    }

    /// Adds `h T Sum_b |A_ab v_b|` to all rows, v given at the Gauss points.
    fn add_jacobian_sizes(&self, values: &[f64], out: &mut [f64]) {
        let (n, m, points) = (self.n(), self.tables.degree, self.points());
        for (entry, &(a, b)) in self.entries.iter().enumerate() {
            for point in 0..points {
                let step = self.h(point / m) * self.period;
                let term = self.jacobian[entry * points + point] * values[b * points + point];
                out[point * n + a] += (step * term).abs();
            }
        }
    }

    /// The same for the rows of a variation (v, S), `Sum_j |L'_j v_j| + h T Sum_b |A_ab v_b| + h |S f|`, at the last
    /// linearisation.
    pub fn variation_sizes(&mut self, nodes: &[f64], period: f64, out: &mut [f64]) {
        let (n, m, points) = (self.n(), self.tables.degree, self.points());
        let size = m + 1;
        to_points(self.tables, n, nodes, &mut self.variation_points);
        for point in 0..points {
            let (i, k) = (point / m, point % m);
            let slopes = &self.tables.slope[k * size..(k + 1) * size];
            for a in 0..n {
                let terms: f64 =
                    slopes.iter().enumerate().map(|(j, slope)| (slope * nodes[(i * m + j) * n + a]).abs()).sum();
                out[point * n + a] = terms + (self.h(i) * period * self.rates[a * points + point]).abs();
            }
        }
        self.add_jacobian_sizes(&self.variation_points, out);
    }

    /// Writes the column of the period, `-h_i f`, or `-h_i (f + t f_t)` under a forcing, over all interval rows.
    pub fn period_column(&self, out: &mut [f64]) {
        self.spread(if self.forced.is_some() { &self.period_rates } else { &self.rates }, 1.0, out);
    }

    /// Writes the column of the free parameter, `-h_i T f_p`.
    pub fn parameter_column(&self, out: &mut [f64]) {
        self.spread(&self.free_column, self.period, out);
    }

    /// `out[row (i,k,a)] = -h_i factor values[a][i m + k]`.
    fn spread(&self, values: &[f64], factor: f64, out: &mut [f64]) {
        let (n, m, points) = (self.n(), self.tables.degree, self.points());
        for i in 0..self.mesh.len() - 1 {
            let step = -self.h(i) * factor;
            for point in i * m..(i + 1) * m {
                for a in 0..n {
                    out[point * n + a] = step * values[a * points + point];
                }
            }
        }
    }

    /// The phase row `Int <u, W r'> dt` over the nodes, r the reference on the same mesh, W = 1/scale^2; zero under a
    /// forcing, whose row has its entries in [`System::phase_corner`] alone.
    pub fn phase_row(&self, reference: &[f64], out: &mut [f64]) {
        let (n, m) = (self.n(), self.tables.degree);
        let size = m + 1;
        out.fill(0.0);
        if self.forced.is_some() {
            return;
        }
        for i in 0..self.mesh.len() - 1 {
            let nodes = &reference[i * m * n..(i * m + size) * n];
            for k in 0..m {
                let (values, slopes) =
                    (&self.tables.value[k * size..(k + 1) * size], &self.tables.slope[k * size..(k + 1) * size]);
                for a in 0..n {
                    let slope: f64 =
                        slopes.iter().zip(nodes.chunks_exact(n)).map(|(weight, node)| weight * node[a]).sum();
                    let factor = self.tables.weights[k] * slope / self.spec.metric.scales[a].powi(2);
                    for (j, value) in values.iter().enumerate() {
                        out[(i * m + j) * n + a] += factor * value;
                    }
                }
            }
        }
    }

    /// Part of a variation along the columns of the evaluator at all Gauss points: the parameter, and under a forcing the
    /// time `S tau`, which the period moves. Empty where there is none.
    fn along_columns(&self, variation: Variation<'_>) -> Vec<f64> {
        let points = self.points();
        if variation.parameter == 0.0 && (self.forced.is_none() || variation.period == 0.0) {
            return Vec::new();
        }
        let mut along = vec![variation.parameter; points];
        if self.spec.field.is_forced() {
            along.extend(self.times.iter().map(|time| variation.period * time / self.period));
        }
        along
    }

    /// Row of `-d/dz (psi^T M_z (v, S, q))` at the last linearisation, M (v, S, q) being the rows
    /// `Sum L'_j v_j - h T A v - h S f - h T q f_p`: the exact derivative of a bordered test function (Govaerts 2000, SIAM,
    /// sec. 4.3) by one reverse sweep of the field.
    pub fn variation_gradient(&mut self, variation: Variation<'_>, out: &mut Row) {
        let (n, m, points) = (self.n(), self.tables.degree, self.points());
        to_points(self.tables, n, variation.nodes, &mut self.variation_points);
        for point in 0..points {
            for a in 0..n {
                self.psi_points[a * points + point] = variation.psi[point * n + a];
            }
        }
        let batch = Batch { len: points, time: &self.times, states: &self.states, parameters: &self.spec.parameters };
        let along = self.along_columns(variation);
        let direction = Direction { states: &self.variation_points, columns: &along };
        let gradient = Gradient { states: &mut self.gradient_states, columns: &mut self.gradient_columns };
        self.evaluator.second_gradient(batch, &self.psi_points, direction, gradient);
        out.nodes.fill(0.0);
        (out.period, out.parameter) = (0.0, 0.0);
        let size = m + 1;
        for point in 0..points {
            let (i, k) = (point / m, point % m);
            let h = self.mesh[i + 1] - self.mesh[i];
            let covector = &mut self.covector;
            for (a, value) in covector.iter_mut().enumerate() {
                *value = h * self.period * self.gradient_states[a * points + point];
            }
            out.parameter += h * self.period * self.gradient_columns[point];
            if self.forced.is_some() {
                // The times move with the period: `h T tau d/dt (psi^T A v)`.
                out.period += h * self.times[point] * self.gradient_columns[points + point];
            }
            for (entry, &(a, b)) in self.entries.iter().enumerate() {
                let product = h * self.psi_points[a * points + point] * self.jacobian[entry * points + point];
                covector[b] += variation.period * product;
                out.period += product * self.variation_points[b * points + point];
            }
            for a in 0..n {
                let psi = self.psi_points[a * points + point];
                let product = h * psi * self.free_column[a * points + point];
                out.parameter += variation.period * product;
                out.period += variation.parameter * product;
                if self.forced.is_some() {
                    // From the rate and from its factor T: `h S tau f_t` each.
                    let share = self.times[point] / self.period;
                    let by_time = h * psi * self.free_column[(n + a) * points + point];
                    out.period += 2.0 * variation.period * share * by_time;
                }
            }
            for j in 0..size {
                let value = self.tables.value[k * size + j];
                let target = &mut out.nodes[(i * m + j) * n..(i * m + j + 1) * n];
                target.iter_mut().zip(covector.iter()).for_each(|(t, c)| *t += value * c);
            }
        }
    }
}

impl System {
    /// `D^2 f[u, v]` at all Gauss points of the last linearisation for variations given at the nodes; `out` has N m n
    /// numbers, point by point.
    pub fn quadratic(&mut self, u: &[f64], v: &[f64], out: &mut [f64]) {
        let (n, len) = (self.n(), self.points());
        to_points(self.tables, n, u, &mut self.psi_points);
        to_points(self.tables, n, v, &mut self.variation_points);
        let at = Batch { len, time: &self.times, states: &self.states, parameters: &self.spec.parameters };
        let u = Direction { states: &self.psi_points, columns: &[] };
        let v = Direction { states: &self.variation_points, columns: &[] };
        self.evaluator.second(at, u, v, &mut self.gradient_states);
        by_point(n, &self.gradient_states, out);
    }

    /// `D^3 f[v, v, v]` at all Gauss points, as [`System::quadratic`].
    ///
    /// # Errors
    /// [`NotProvided`] by a field without third derivatives.
    pub fn cubic(&mut self, v: &[f64], out: &mut [f64]) -> Result<(), NotProvided> {
        let (n, len) = (self.n(), self.points());
        to_points(self.tables, n, v, &mut self.variation_points);
        let at = Batch { len, time: &self.times, states: &self.states, parameters: &self.spec.parameters };
        let v = Direction { states: &self.variation_points, columns: &[] };
        self.evaluator.third(at, [v, v, v], &mut self.gradient_states)?;
        by_point(n, &self.gradient_states, out);
        Ok(())
    }

    /// `D^3 f[u, v, w]` at all Gauss points, as [`System::quadratic`].
    ///
    /// # Errors
    /// [`NotProvided`] by a field without third derivatives.
    pub fn trilinear(&mut self, [u, v, w]: [&[f64]; 3], out: &mut [f64]) -> Result<(), NotProvided> {
        let (n, len) = (self.n(), self.points());
        to_points(self.tables, n, u, &mut self.psi_points);
        to_points(self.tables, n, v, &mut self.variation_points);
        // Asked at located events only, so the third direction may have storage of its own.
        let mut third = vec![0.0; n * len];
        to_points(self.tables, n, w, &mut third);
        let at = Batch { len, time: &self.times, states: &self.states, parameters: &self.spec.parameters };
        let along = |states| Direction { states, columns: &[] };
        let directions = [along(&self.psi_points[..]), along(&self.variation_points[..]), along(&third[..])];
        self.evaluator.third(at, directions, &mut self.gradient_states)?;
        by_point(n, &self.gradient_states, out);
        Ok(())
    }

    /// `A v` at all Gauss points, as [`System::quadratic`].
    pub fn linear(&mut self, v: &[f64], out: &mut [f64]) {
        let (n, len) = (self.n(), self.points());
        to_points(self.tables, n, v, &mut self.variation_points);
        out.fill(0.0);
        for (entry, &(a, b)) in self.entries.iter().enumerate() {
            for point in 0..len {
                out[point * n + a] += self.jacobian[entry * len + point] * self.variation_points[b * len + point];
            }
        }
    }

    /// Values of node data at all Gauss points, as [`System::quadratic`].
    pub fn values(&mut self, v: &[f64], out: &mut [f64]) {
        let n = self.n();
        to_points(self.tables, n, v, &mut self.variation_points);
        by_point(n, &self.variation_points, out);
    }

    /// Rates at all Gauss points, as [`System::quadratic`].
    pub fn rates(&self, out: &mut [f64]) {
        by_point(self.n(), &self.rates, out);
    }

    /// Derivatives of the rates in the free parameter at all Gauss points, as [`System::quadratic`]; under a forcing with
    /// what the change of its period does, `f_p + (f + t f_t) T_p / T`.
    pub fn parameter_rates(&self, out: &mut [f64]) {
        by_point(self.n(), &self.free_column[..self.rates.len()], out);
        let Some([_, slope, _]) = self.forced_period(self.spec.parameters[self.spec.free]) else { return };
        let (n, points) = (self.n(), self.points());
        for point in 0..points {
            for a in 0..n {
                out[point * n + a] += slope / self.period * self.period_rates[a * points + point];
            }
        }
    }

    /// `Sum_i h_i Sum_k x_ik . y_ik`: with x a left vector of the rows (adjoint values times Gauss weights) it is the
    /// integral of the adjoint with y over scaled time.
    pub fn pair(&self, x: &[f64], y: &[f64]) -> f64 {
        let rows = self.n() * self.tables.degree;
        x.chunks_exact(rows).zip(y.chunks_exact(rows)).enumerate().map(|(i, (x, y))| self.h(i) * dot(x, y)).sum()
    }

    /// `Int <x, y> dt` over scaled time by Gauss quadrature.
    pub fn integral(&self, x: &[f64], y: &[f64]) -> f64 {
        let (n, m) = (self.n(), self.tables.degree);
        x.chunks_exact(n)
            .zip(y.chunks_exact(n))
            .enumerate()
            .map(|(point, (x, y))| self.h(point / m) * self.tables.weights[point % m] * dot(x, y))
            .sum()
    }

    /// Multiplies values at Gauss points by `factor` and the length of their interval: a right side of the interval rows.
    pub fn weigh_rows(&self, factor: f64, values: &mut [f64]) {
        let rows = self.n() * self.tables.degree;
        for (i, values) in values.chunks_exact_mut(rows).enumerate() {
            let weight = factor * self.h(i);
            values.iter_mut().for_each(|value| *value *= weight);
        }
    }
}

fn by_point(n: usize, from: &[f64], out: &mut [f64]) {
    let points = from.len() / n;
    for point in 0..points {
        for a in 0..n {
            out[point * n + a] = from[a * points + point];
        }
    }
}

/// Values of node data at all Gauss points, `out[a * points + i m + k]`.
fn to_points(tables: &Tables, n: usize, nodes: &[f64], out: &mut [f64]) {
    let (m, size) = (tables.degree, tables.degree + 1);
    let points = out.len() / n;
    for i in 0..points / m {
        let local = &nodes[i * m * n..(i * m + size) * n];
        for k in 0..m {
            let values = &tables.value[k * size..(k + 1) * size];
            for a in 0..n {
                let sum: f64 = values.iter().enumerate().map(|(j, value)| value * local[j * n + a]).sum();
                out[a * points + i * m + k] = sum;
            }
        }
    }
}
