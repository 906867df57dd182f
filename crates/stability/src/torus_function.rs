//! A complex multiplier of a cycle as a smooth function of the cycle, and its modulus as the equation of a torus point.
//!
//! With M the linearised cycle problem closed by `v_N = rho v_0`, rho complex, w a column and v1 a row,
//! ```text
//! [ M(rho)  w ] [v]   [0]      dG/drho = chi^T v_0,   dG/dz = - psi^T (dM/dz) v,
//! [ v1      0 ] [G] = [1]      (psi, chi) the left solution, chi over the closing rows.
//! ```
//! `G(rho, z) = 0` says that rho is a multiplier; it is analytic in rho, so a few Newton steps, each O(n^3), give rho(z),
//! and `d log rho/dz = -G_z / (rho G_rho)` its exact derivative. A torus point is `log |rho| = 0`: as a [`Closing`] this
//! completes the cycle problem, and the rotation angle is no unknown of it (Govaerts 2000, Numerical Methods for
//! Bifurcations of Dynamical Equilibria, SIAM, ch. 4, for bordered functions; the complex form as in Beyn, Champneys,
//! Doedel, Govaerts, Kuznetsov & Sandstede 2002, Handbook of Dynamical Systems 2, ch. 4). Regular as long as rho is a
//! simple multiplier: not where the pair meets on the real axis.

use armilla_collocation::{Closing, Fault, Iterate, Row, System, Variation};
use armilla_linalg::{Complex, ComplexBordered, ComplexVector, Singular};

/// Right and left vectors of a complex multiplier.
#[derive(Clone, Debug, PartialEq)]
pub struct ComplexVectors {
    /// Variation of the nodes, `v_N = rho v_0`.
    pub nodes: ComplexVector,
    /// Left vector over all interval rows, of the plain transpose.
    pub psi: ComplexVector,
}

/// The multiplier nearest to a guess, with its borders.
pub(crate) struct TorusFunction {
    bordered: ComplexBordered,
    border_row: ComplexVector,
    border_column: ComplexVector,
    vectors: ComplexVectors,
    multiplier: Complex<f64>,
    /// `rho G_rho`.
    slope: Complex<f64>,
    angle_row: Row,
}

/// Rounds of inverse iteration that turn generic borders into null vectors, as for real test functions.
const REFRESHES: usize = 3;
/// Newton steps for rho at one cycle: quadratic from a guess good to a few digits.
const STEPS: usize = 12;
/// Change of log rho that is roundoff.
const SETTLED: f64 = 1e-14;
/// Change of log rho from one step to the next, or from the guess, beyond which it is another multiplier.
const FAR: f64 = 1.0;

impl TorusFunction {
    /// Borders at the system's last linearisation for the multiplier near `guess`.
    ///
    /// # Errors
    /// [`Fault`] where the bordered system is singular even with refreshed borders, or no multiplier is near.
    pub(crate) fn new(system: &System, guess: Complex<f64>) -> Result<Self, Fault> {
        let shape = system.shape();
        let mut function = Self {
            bordered: ComplexBordered::new(shape, 1),
            border_row: ComplexVector::zeros(shape.nodes_len()),
            border_column: ComplexVector::zeros(shape.core_len()),
            vectors: ComplexVectors {
                nodes: ComplexVector::zeros(shape.nodes_len()),
                psi: ComplexVector::zeros(shape.core_len()),
            },
            multiplier: guess,
            slope: Complex::new(1.0, 0.0),
            angle_row: Row::zero(shape.nodes_len()),
        };
        function.generic_borders(system);
        for _ in 0..REFRESHES {
            function.fill_borders(system);
            function.solve_at(system, guess)?;
            function.refresh(system);
        }
        function.solve(system)?;
        Ok(function)
    }

    /// The multiplier at the last linearisation that was asked of.
    pub(crate) fn multiplier(&self) -> Complex<f64> {
        self.multiplier
    }

    /// Its vectors there.
    pub(crate) fn vectors(&self) -> &ComplexVectors {
        &self.vectors
    }

    /// Derivative of its angle there.
    pub(crate) fn angle_row(&self) -> &Row {
        &self.angle_row
    }

    /// Size of the terms that log rho is summed from, as [`crate::TestFunction::size`].
    pub(crate) fn size(&self, system: &mut System) -> f64 {
        let len = self.vectors.psi.re.len();
        let (mut real, mut imaginary) = (vec![0.0; len], vec![0.0; len]);
        system.variation_sizes(&self.vectors.nodes.re, 0.0, &mut real);
        system.variation_sizes(&self.vectors.nodes.im, 0.0, &mut imaginary);
        let sum: f64 = (0..len).map(|k| self.vectors.psi.at(k).norm_sqr() * (real[k] + imaginary[k]).powi(2)).sum();
        sum.sqrt() / self.slope.norm()
    }

    /// Starting borders without special direction: an equidistributed sequence (Weyl 1916, Math. Ann. 77:313).
    fn generic_borders(&mut self, system: &System) {
        const IRRATIONAL: f64 = 0.618_033_988_749_894_8;
        let sequence = |k: usize| (k as f64 * IRRATIONAL).fract() - 0.5;
        let n = system.n();
        let scales = &system.spec().metric.scales;
        let ComplexVectors { nodes, psi } = &mut self.vectors;
        for k in 0..nodes.re.len() {
            (nodes.re[k], nodes.im[k]) = (sequence(k + 1) * scales[k % n], sequence(3 * k + 2) * scales[k % n]);
        }
        for k in 0..psi.re.len() {
            (psi.re[k], psi.im[k]) = (sequence(2 * k + 3) / scales[k % n], sequence(5 * k + 1) / scales[k % n]);
        }
        self.refresh(system);
    }

    /// Borders from the last vectors, of unit length: conjugates, since products are bilinear.
    fn refresh(&mut self, system: &System) {
        let metric = &system.spec().metric;
        let (tables, mesh) = (system.tables(), system.mesh());
        let ComplexVectors { nodes, psi } = &self.vectors;
        let square = metric.nodes_inner(tables, mesh, &nodes.re, &nodes.re)
            + metric.nodes_inner(tables, mesh, &nodes.im, &nodes.im);
        let length = square.sqrt();
        let mut row = Row::zero(nodes.re.len());
        for (part, sign, target) in
            [(&nodes.re, 1.0, &mut self.border_row.re), (&nodes.im, -1.0, &mut self.border_row.im)]
        {
            let direction = Row { nodes: part.clone(), period: 0.0, parameter: 0.0 };
            metric.functional(tables, mesh, &direction, &mut row);
            target.iter_mut().zip(&row.nodes).for_each(|(target, value)| *target = sign * value / length);
        }
        // The column lives where the equations live: rows are increments of states.
        let n = system.n();
        let scale = |k: usize| metric.scales[k % n].powi(2);
        let size = (0..psi.re.len()).map(|k| psi.at(k).norm_sqr() * scale(k)).sum::<f64>().sqrt();
        for k in 0..psi.re.len() {
            self.border_column.re[k] = psi.re[k] * scale(k) / size;
            self.border_column.im[k] = -psi.im[k] * scale(k) / size;
        }
    }

    fn fill_borders(&mut self, system: &System) {
        self.bordered.column_mut(0).clone_from(&self.border_column);
        self.bordered.row_mut(0).clone_from(&self.border_row);
        self.bordered.reduce(system.cyclic());
    }

    /// Both bordered solves with `rho`; returns G and its derivative in rho.
    fn solve_at(&mut self, system: &System, rho: Complex<f64>) -> Result<[Complex<f64>; 2], Fault> {
        let one = [Complex::new(1.0, 0.0)];
        let n = system.n();
        self.bordered.close(system.cyclic(), rho)?;
        let (mut value, mut ignored) = ([Complex::default()], [Complex::default()]);
        let mut closing = vec![Complex::default(); n];
        self.bordered.solve(system.cyclic(), (None, &one), &mut self.vectors.nodes, &mut value);
        let left = (&mut self.vectors.psi, &mut closing[..]);
        self.bordered.solve_transposed(system.cyclic(), &one, left, &mut ignored);
        let slope = closing.iter().enumerate().map(|(a, chi)| chi * self.vectors.nodes.at(a)).sum();
        Ok([value[0], slope])
    }

    /// The multiplier at the system's last linearisation, from that of the last one.
    pub(crate) fn solve(&mut self, system: &System) -> Result<(), Fault> {
        let lost = || Fault::Singular(Singular { interval: system.shape().intervals });
        self.fill_borders(system);
        let mut rho = self.multiplier;
        let mut last = f64::INFINITY;
        for _ in 0..STEPS {
            let [value, slope] = self.solve_at(system, rho)?;
            let change = value / (slope * rho);
            self.slope = rho * slope;
            if !(change.norm() <= FAR) || !(self.slope.norm() > 0.0) {
                return Err(lost());
            }
            rho *= (-change).exp();
            let size = change.norm();
            // At the roundoff of the solves it stops shrinking.
            if size <= SETTLED || size >= last && size < SETTLED.sqrt() {
                self.multiplier = rho;
                return Ok(());
            }
            last = size;
        }
        Err(lost())
    }

    /// Derivative of log rho at the last solution, real part and imaginary part.
    fn gradient(&mut self, system: &mut System, modulus: &mut Row) {
        let len = modulus.nodes.len();
        let ComplexVectors { nodes, psi } = &self.vectors;
        // -G_z / (rho G_rho), G_z bilinear in psi and v.
        let factor = -self.slope.inv();
        modulus.nodes.fill(0.0);
        (modulus.period, modulus.parameter) = (0.0, 0.0);
        self.angle_row = Row::zero(len);
        let mut part = Row::zero(len);
        let unit = Complex::new(0.0, 1.0);
        for (psi, nodes, phase) in [
            (&psi.re, &nodes.re, Complex::new(1.0, 0.0)),
            (&psi.im, &nodes.im, Complex::new(-1.0, 0.0)),
            (&psi.re, &nodes.im, unit),
            (&psi.im, &nodes.re, unit),
        ] {
            system.variation_gradient(Variation { psi, nodes, period: 0.0, parameter: 0.0 }, &mut part);
            let weight = factor * phase;
            add(modulus, weight.re, &part);
            add(&mut self.angle_row, weight.im, &part);
        }
    }
}

fn add(to: &mut Row, factor: f64, what: &Row) {
    to.nodes.iter_mut().zip(&what.nodes).for_each(|(to, value)| *to += factor * value);
    to.period += factor * what.period;
    to.parameter += factor * what.parameter;
}

impl Closing for TorusFunction {
    fn fill(&mut self, system: &mut System, _at: &Iterate, row: &mut Row) -> Result<f64, Fault> {
        self.solve(system)?;
        self.gradient(system, row);
        Ok(self.multiplier.norm().ln())
    }
}
