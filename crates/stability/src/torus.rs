//! Location of torus points, with the angle of rotation and the normal form.
//!
//! Newton's method on the cycle with `log |rho| = 0` ([`crate::torus_function`]), from a bracket as for other events, and
//! again on a mesh with every interval halved.
//!
//! Normal form `xi' = i omega xi + d xi |xi|^2`, `tau' = 1 + a |xi|^2`, integrals over one period T, `omega = theta/T`:
//! `v' = A v`, `v(T) = e^(i theta) v(0)`, `Int <conj v, v> = 1`, v* the adjoint with `Int <conj v*, v> = 1`;
//! `h20' - A h20 = B(v,v)`, `h20(T) = e^(2 i theta) h20(0)`; `a = Int <phi*, B(v, conj v)>`; `h11' - A h11 = B(v, conj v) -
//! a f` periodic with `Int <phi*, h11> = 0`;
//! `d = 1/2 Int <conj v*, C(v,v,conj v) + 2 B(v,h11) + B(conj v,h20) - 2 a A v> + i a omega`.
//! Source: Kuznetsov, Govaerts, Doedel & Dhooge 2005 (SIAM J. Numer. Anal. 43:1407), with the factor e^(i omega t) left in
//! the vectors, so that every system is the real core with a complex closing. Re d < 0: the torus is born on the side where
//! the cycle is unstable. Not valid where e^(i k theta) = 1 for k = 1 to 4.

use std::f64::consts::{PI, TAU};
use std::sync::Arc;

use armilla_collocation::{Failure as NewtonFailure, Fault, Report, System};
use armilla_follow::{Problem, Station};
use armilla_linalg::{Complex, ComplexBordered, ComplexVector, Singular};

use crate::locate::{HALVINGS, LocateFault, halved, to_correct};
use crate::normal_form::{Periodic, without_flow};
use crate::point::{CyclePoint, CycleTangent};
use crate::problem::{CycleProblem, WATCH_TORUS};
use crate::torus_function::{ComplexVectors, TorusFunction};

type CycleStation = Station<CyclePoint, CycleTangent>;

/// A located torus point.
#[derive(Clone, Debug)]
pub struct LocatedTorus {
    /// The critical cycle on the refined mesh.
    pub point: CyclePoint,
    /// Estimated absolute error of the parameter.
    pub error: f64,
    /// Estimated absolute error of the period.
    pub period_error: f64,
    /// Angle of the critical pair, between 0 and pi.
    pub angle: f64,
    /// Estimated absolute error of the angle.
    pub angle_error: f64,
    /// Critical vectors on the refined mesh.
    pub vectors: ComplexVectors,
    /// The same point on the mesh before, for errors of what is computed from it.
    pub coarse: (CyclePoint, ComplexVectors),
    /// How Newton's method went from the bracket.
    pub report: Report,
    /// Where between the two stations the point lies, 0 to 1.
    pub share: f64,
}

/// Coefficients of the normal form at a torus point.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TorusForm {
    /// Change of the turn's duration with the square of the amplitude.
    pub a: f64,
    /// Real and imaginary part of the cubic coefficient.
    pub d: (f64, f64),
    /// Estimated absolute error of the real part.
    pub error: f64,
}

impl LocatedTorus {
    /// The strong resonance the angle cannot be told from: the least k from 1 to 4 with `k theta` a multiple of 2 pi within
    /// the error of the angle, or within `accuracy`.
    pub fn strong_resonance(&self, accuracy: f64) -> Option<usize> {
        let within = self.angle_error.max(accuracy);
        (1..=4).find(|k| {
            let step = TAU / *k as f64;
            (self.angle - step * (self.angle / step).round()).abs() <= within
        })
    }
}

/// What Newton's method made of one guess.
struct Converged {
    report: Report,
    function: TorusFunction,
}

impl Converged {
    fn angle(&self) -> f64 {
        self.function.multiplier().arg()
    }
}

impl CycleProblem {
    /// Locates the torus point between two stations where a complex pair passes the unit circle.
    ///
    /// # Errors
    /// [`LocateFault`] with the narrowest bracket reached.
    pub fn locate_torus(&mut self, before: &CycleStation, after: &CycleStation) -> Result<LocatedTorus, LocateFault> {
        let total = after.distance - before.distance;
        let (mut low, mut high) = (before.clone(), after.clone());
        for _ in 0..HALVINGS {
            if let Some(mut located) = self.torus_from(&low, &high) {
                located.share = self.share(before, &located.point, total);
                return Ok(located);
            }
            let Some(middle) = self.between(&low, &high, 0.5) else { break };
            let same = middle.watch.values[WATCH_TORUS].value * low.watch.values[WATCH_TORUS].value > 0.0;
            if same { low = middle } else { high = middle }
        }
        Err(LocateFault { bracket: (low.point.unknowns.parameter, high.point.unknowns.parameter) })
    }

    /// Locates the torus point that a station stands on.
    pub fn locate_torus_at(&mut self, station: &CycleStation) -> Option<LocatedTorus> {
        /// Distance from the station within which the point is the one it stands on.
        const ON: f64 = 1e-7;
        let guess = self.critical_pair(station)?;
        let mut point = station.point.clone();
        let converged = self.solve_torus(&mut point, guess).ok()?;
        let near = self.distance(&station.point, &point) <= ON;
        let mut located = self.refine_torus(&point, &converged).ok().filter(|_| near)?;
        located.share = 1.0;
        Some(located)
    }

    fn torus_from(&mut self, low: &CycleStation, high: &CycleStation) -> Option<LocatedTorus> {
        let pairs = [self.critical_pair(low), self.critical_pair(high)];
        let mut point = self.secant_point(WATCH_TORUS, low, high);
        // Where the pair is real at one end the other end must do.
        for guess in self.mean_pair(pairs).into_iter().chain(pairs.into_iter().flatten()) {
            let mut found = point.clone();
            if let Ok(converged) = self.solve_torus(&mut found, guess)
                && self.is_in_bracket(&found, low, high)
                && let Ok(located) = self.refine_torus(&found, &converged)
            {
                return Some(located);
            }
            point = self.secant_point(WATCH_TORUS, low, high);
        }
        None
    }

    /// The complex multiplier nearest to the unit circle, upper half plane.
    fn critical_pair(&mut self, station: &CycleStation) -> Option<Complex<f64>> {
        let spectrum = self.known_spectrum(&station.point).ok()?;
        let pairs = spectrum.multipliers.into_iter().filter(|mu| mu.angle > 0.0 && mu.angle < PI);
        let nearest = pairs.min_by(|a, b| a.log_modulus.abs().total_cmp(&b.log_modulus.abs()))?;
        Some(Complex::from_polar(nearest.log_modulus.exp(), nearest.angle))
    }

    fn mean_pair(&self, pairs: [Option<Complex<f64>>; 2]) -> Option<Complex<f64>> {
        let [Some(low), Some(high)] = pairs else { return None };
        let (a, b) = (low.norm().ln(), high.norm().ln());
        let share = if a == b { 0.5 } else { (a / (a - b)).clamp(0.0, 1.0) };
        Some(Complex::from_polar(1.0, low.arg() + share * (high.arg() - low.arg())))
    }

    /// Solves for the torus point in place on the point's mesh, from a guess of its multiplier.
    fn solve_torus(&mut self, point: &mut CyclePoint, guess: Complex<f64>) -> Result<Converged, NewtonFailure> {
        self.system.set_mesh(point.degree, &point.mesh);
        self.system.linearise(&point.unknowns)?;
        let mut function = TorusFunction::new(&self.system, guess)?;
        let reference = point.unknowns.nodes.clone();
        let report = self.newton(point, &reference, &mut function)?;
        // The angle belongs to the cycle after the last correction.
        self.system.linearise(&point.unknowns)?;
        function.solve(&self.system)?;
        let converged = Converged { report, function };
        // The guess lies in the upper half plane: what left it has met its conjugate on the real axis.
        if converged.angle() > 0.0 { Ok(converged) } else { Err(singular(&self.system).into()) }
    }

    /// The torus point again with every interval halved, with its errors.
    fn refine_torus(&mut self, coarse: &CyclePoint, found: &Converged) -> Result<LocatedTorus, NewtonFailure> {
        let mesh: Arc<[f64]> = halved(&coarse.mesh).into();
        let mut fine = coarse.on_mesh(coarse.degree, &mesh);
        let again = self.solve_torus(&mut fine, found.function.multiplier())?;
        let size = again.function.size(&mut self.system);
        // Roundoff first: it refers to what was solved last.
        let (error, period_error) = self.rounding_of_scalars(&fine, size);
        let angle_error = self.rounding_along(again.function.angle_row(), size) + f64::EPSILON * size;
        let left = self.left_over(coarse, &fine);
        let rest = to_correct(&again.report);
        let moved = |a: f64, b: f64| left * (a - b).abs();
        let (a, b) = (&coarse.unknowns, &fine.unknowns);
        Ok(LocatedTorus {
            error: error + moved(a.parameter, b.parameter) + rest * self.metric.parameter_scale,
            period_error: period_error + moved(a.period, b.period) + rest * self.metric.period_scale,
            angle: again.angle(),
            angle_error: angle_error + moved(found.angle(), again.angle()) + rest,
            vectors: again.function.vectors().clone(),
            coarse: (coarse.clone(), found.function.vectors().clone()),
            report: found.report.clone(),
            share: 0.0,
            point: fine,
        })
    }

    /// The normal form at a located torus point; none where the field has no third derivatives or the systems fail, as in a
    /// strong resonance of order up to three.
    pub fn torus_form(&mut self, located: &LocatedTorus) -> Option<TorusForm> {
        let (point, vectors) = &located.coarse;
        let coarse = self.form_at(point, vectors, located.angle)?;
        let form = self.form_at(&located.point, &located.vectors, located.angle)?;
        // The whole difference, and what rounding does to third derivatives summed over the cycle.
        const ROUNDING: f64 = 1e-11;
        let error = (form.d.0 - coarse.d.0).abs() + ROUNDING * form.d.0.hypot(form.d.1);
        error.is_finite().then_some(TorusForm { error, ..form })
    }

    fn form_at(&mut self, point: &CyclePoint, vectors: &ComplexVectors, angle: f64) -> Option<TorusForm> {
        self.system.set_mesh(point.degree, &point.mesh);
        self.system.linearise(&point.unknowns).ok()?;
        let period = point.unknowns.period;
        let mut phase = vec![0.0; point.unknowns.nodes.len()];
        self.system.phase_row(&point.unknowns.nodes, &mut phase);
        let system = &mut self.system;
        let (v, pairing) = normalised(system, vectors, period);
        let mean = combined(&[(1.0, &quadratic(system, &v.re, &v.re)), (1.0, &quadratic(system, &v.im, &v.im))]);
        let (h11, half, phi) = Periodic::new(system, &phase)?.second_order(system, &mean, period);
        let a = 2.0 * half;
        let h11 = without_flow(system, &h11, (&phi, &point.unknowns.nodes), period);
        let h20 = second_harmonic(system, &v, Complex::from_polar(1.0, angle), period)?;
        let integrand = third_order(system, (&v, &h11, &h20), a)?;
        let d =
            paired(system, &vectors.psi, &integrand, period) / pairing * 0.5 + Complex::new(0.0, a * angle / period);
        (a.is_finite() && d.re.is_finite() && d.im.is_finite()).then_some(TorusForm { a, d: (d.re, d.im), error: 0.0 })
    }
}

fn singular(system: &System) -> Fault {
    Fault::Singular(Singular { interval: system.shape().intervals })
}

/// The critical vector scaled to `Int <conj v, v> dt = 1`, and its pairing with the left vector.
fn normalised(system: &mut System, vectors: &ComplexVectors, period: f64) -> (ComplexVector, Complex<f64>) {
    let len = system.residual().len();
    let mut at_points = ComplexVector::zeros(len);
    system.values(&vectors.nodes.re, &mut at_points.re);
    system.values(&vectors.nodes.im, &mut at_points.im);
    let square = system.integral(&at_points.re, &at_points.re) + system.integral(&at_points.im, &at_points.im);
    let factor = Complex::from(1.0 / (period * square).sqrt());
    at_points.scale(factor);
    let mut v = vectors.nodes.clone();
    v.scale(factor);
    (v, paired(system, &vectors.psi, &at_points, period))
}

/// Bilinear integral of a left vector with values at the Gauss points, over one period.
fn paired(system: &System, psi: &ComplexVector, values: &ComplexVector, period: f64) -> Complex<f64> {
    let pair = |x: &[f64], y: &[f64]| period * system.pair(x, y);
    Complex::new(
        pair(&psi.re, &values.re) - pair(&psi.im, &values.im),
        pair(&psi.re, &values.im) + pair(&psi.im, &values.re),
    )
}

/// `Sum factor * values`, entry by entry.
fn combined(terms: &[(f64, &[f64])]) -> Vec<f64> {
    let mut out = vec![0.0; terms[0].1.len()];
    for (factor, values) in terms {
        out.iter_mut().zip(*values).for_each(|(out, value)| *out += factor * value);
    }
    out
}

fn quadratic(system: &mut System, u: &[f64], v: &[f64]) -> Vec<f64> {
    let mut out = vec![0.0; system.residual().len()];
    system.quadratic(u, v, &mut out);
    out
}

/// h20 at the nodes.
fn second_harmonic(system: &mut System, v: &ComplexVector, rho: Complex<f64>, period: f64) -> Option<ComplexVector> {
    let (xx, yy) = (quadratic(system, &v.re, &v.re), quadratic(system, &v.im, &v.im));
    let re = combined(&[(1.0, &xx), (-1.0, &yy)]);
    let im = combined(&[(2.0, &quadratic(system, &v.re, &v.im))]);
    let mut right = ComplexVector { re, im };
    system.weigh_rows(period, &mut right.re);
    system.weigh_rows(period, &mut right.im);
    let mut bordered = ComplexBordered::new(system.shape(), 0);
    bordered.close(system.cyclic(), rho * rho).ok()?;
    let mut h20 = ComplexVector::zeros(system.shape().nodes_len());
    bordered.solve(system.cyclic(), (Some(&right), &[]), &mut h20, &mut []);
    Some(h20)
}

/// `C(v,v,conj v) + 2 B(v,h11) + B(conj v,h20) - 2 a A v` at the Gauss points.
fn third_order(
    system: &mut System,
    (v, h11, h20): (&ComplexVector, &[f64], &ComplexVector),
    a: f64,
) -> Option<ComplexVector> {
    let len = system.residual().len();
    let (x, y) = (&v.re[..], &v.im[..]);
    let mut cubic = |directions| {
        let mut out = vec![0.0; len];
        system.trilinear(directions, &mut out).ok().map(|()| out)
    };
    let (xxx, xyy, xxy, yyy) = (cubic([x, x, x])?, cubic([x, y, y])?, cubic([x, x, y])?, cubic([y, y, y])?);
    let mut linear = |u: &[f64]| {
        let mut out = vec![0.0; len];
        system.linear(u, &mut out);
        out
    };
    let (ax, ay) = (linear(x), linear(y));
    let mut b = |u: &[f64], w: &[f64]| quadratic(system, u, w);
    let (xh, yh) = (b(x, h11), b(y, h11));
    let (xp, yq, xq, yp) = (b(x, &h20.re), b(y, &h20.im), b(x, &h20.im), b(y, &h20.re));
    let re = [(1.0, &xxx), (1.0, &xyy), (2.0, &xh), (1.0, &xp), (1.0, &yq), (-2.0 * a, &ax)];
    let im = [(1.0, &xxy), (1.0, &yyy), (2.0, &yh), (1.0, &xq), (-1.0, &yp), (-2.0 * a, &ay)];
    let added = |terms: [(f64, &Vec<f64>); 6]| combined(&terms.map(|(factor, values)| (factor, &values[..])));
    Some(ComplexVector { re: added(re), im: added(im) })
}
