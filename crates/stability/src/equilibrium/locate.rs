//! Location of folds, branchings and Hopf points on their defining systems.
//!
//! Each is Newton's method on `f = 0` with bordered scalars that vanish at the event, their gradients exact (Govaerts 2000,
//! Numerical Methods for Bifurcations of Dynamical Equilibria, SIAM, ch. 3 and 4; `dg = -psi^T d(A) v`):
//! - fold: `g(x, p) = 0` of the real null vectors, unknowns x, p;
//! - Hopf: `g(x, p, omega) = 0` of the complex ones of `A - i omega`, two numbers, unknowns x, p, omega;
//! - branching: `f + mu b = 0`, `g = 0`, `psi^T f_p = 0`, unknowns x, p, mu. mu, 0 at the branching, unfolds it, so that the
//!   system is regular though two branches cross; with y from `[A, b; c^T, 0] (y, s) = (f_p, 0)` the last scalar is s, and
//!   `ds = psi^T d[f_x, f_p] (-y, 1)`.
//!
//! Errors: rounding of the terms of every row, through the conditioning (one transposed solve), and what Newton's method
//! left.

use armilla_follow::{Closing, Orientation, Problem, Station};
use armilla_linalg::Eigenvalues;

use super::local::Along;
use super::null::{BorderSizes, ComplexNull, RealNull};
use super::point::{EquilibriumPoint, EquilibriumTangent};
use super::problem::{Course, EquilibriumProblem, any_sign, is_neutral};
use super::systems::Complex;

/// What happens to the eigenvalues at an event of equilibria.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum RestEvent {
    /// One is 0 where the parameter turns back.
    Fold,
    /// One is 0 where two branches cross.
    Branching,
    /// A pair is imaginary.
    Hopf,
}

/// The critical vectors of an event.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Vectors {
    /// `A v = 0`, `psi^T A = 0`; at a branching besides y with `A y = f_p`.
    Real { v: Vec<f64>, psi: Vec<f64>, y: Vec<f64> },
    /// `A q = i omega q`, `psi^H A = i omega psi^H`.
    Complex { q: Complex, psi: Complex },
}

/// A located event of equilibria.
#[derive(Clone, Debug)]
pub struct LocatedRest {
    /// What happens.
    pub event: RestEvent,
    /// The equilibrium there.
    pub point: EquilibriumPoint,
    /// Estimated absolute error of the parameter.
    pub error: f64,
    /// Frequency of a Hopf point and its estimated error; 0 otherwise.
    pub frequency: (f64, f64),
    /// Estimated error of the states, largest over the size of its state.
    pub state_error: f64,
    /// Where between the two stations the event lies, 0 to 1.
    pub share: f64,
    /// How often Newton's method corrected.
    pub iterations: usize,
    pub(crate) vectors: Vectors,
}

impl LocatedRest {
    /// Period of the cycles born at a Hopf point, with its error.
    pub fn period(&self) -> Option<(f64, f64)> {
        let (omega, error) = self.frequency;
        let period = std::f64::consts::TAU / omega;
        (omega > 0.0).then(|| (period, period * (error / omega + 2.0 * f64::EPSILON)))
    }
}

/// An unknown beside states and parameter, and what the defining system needs of it.
#[derive(Clone, Debug)]
struct Iterate {
    point: EquilibriumPoint,
    /// omega of a Hopf point, mu of a branching.
    extra: f64,
}

/// A defining system at an iterate: residuals of the scalar rows and their rows over (x, p, extra).
struct Defining {
    scalars: [f64; 2],
    rows: [Vec<f64>; 2],
    /// Column of the extra unknown in the rates.
    column: Vec<f64>,
    /// Size of the terms of each scalar.
    sizes: [f64; 2],
    vectors: Vectors,
}

pub(crate) type RestStation = Station<EquilibriumPoint, EquilibriumTangent>;

/// Iterations of Newton's method.
const ITERATIONS: usize = 25;
/// Units in the last place of every term: a few roundings each.
const UNITS: f64 = 8.0;
/// Halvings of the bracket: 40 take any stride to the shortest.
const HALVINGS: usize = 40;
/// Frequency of a Hopf point, over the norm of the Jacobian, below which it is no pair: two zero eigenvalues.
const SLOWEST: f64 = 1e-8;
/// Share of the range of the parameter that the error of an isolated event stays below.
const ISOLATED: f64 = 1e-3;

impl EquilibriumProblem {
    /// Locates an event that lies between two stations. `is_beyond` tells whether the event has been passed where a
    /// station stands, given that it was not at `before` and is at `after`.
    pub fn locate(
        &mut self,
        event: RestEvent,
        (before, after): (&RestStation, &RestStation),
        is_beyond: &dyn Fn(&RestStation) -> bool,
    ) -> Option<LocatedRest> {
        let total = self.distance(&before.point, &after.point);
        let (mut low, mut high) = (before.clone(), after.clone());
        for _ in 0..HALVINGS {
            if let Some(mut located) = self.locate_between(event, &low, &high) {
                let share = self.distance(&before.point, &located.point) / total;
                located.share = if total > 0.0 { share.clamp(0.0, 1.0) } else { 0.0 };
                return Some(located);
            }
            let middle = self.between(&low, &high)?;
            if is_beyond(&middle) { high = middle } else { low = middle }
        }
        None
    }

    fn locate_between(&mut self, event: RestEvent, low: &RestStation, high: &RestStation) -> Option<LocatedRest> {
        let crossing = if event == RestEvent::Hopf { self.crossing_pair(low, high) } else { None };
        let (from, to) = match crossing {
            Some(pair) => pair,
            None => (self.critical_part(event, low)?, self.critical_part(event, high)?),
        };
        let share = (from.0 / (from.0 - to.0)).clamp(0.05, 0.95);
        let share = if share.is_finite() { share } else { 0.5 };
        let guess = low.point.plus(share, &high.point.minus(&low.point));
        let located = self.solve(event, guess, from.1 + share * (to.1 - from.1))?;
        (self.is_isolated(&located) && self.lies_between(&located.point, low, high)).then_some(located)
    }

    /// Whether an event stands at one value of the parameter. Where a pair stays on the imaginary axis every point of the
    /// branch solves the equations of a Hopf point, and the error says so.
    pub fn is_isolated(&self, located: &LocatedRest) -> bool {
        located.error < ISOLATED * self.metric.parameter_scale
    }

    /// The pair whose real part changes its sign between two stations: real part and frequency at both. One that stays on
    /// the axis all along may be nearer to it.
    fn crossing_pair(&mut self, low: &RestStation, high: &RestStation) -> Option<((f64, f64), (f64, f64))> {
        let (from, to) = (self.spectrum(&low.point).ok()?, self.spectrum(&high.point).ok()?);
        let pairs = |spectrum: &Eigenvalues| -> Vec<(f64, f64)> {
            let off = spectrum.values.iter().filter(|value| value.im > 0.0 && !is_neutral(value.re, spectrum.norm));
            off.map(|value| (value.re, value.im)).collect()
        };
        let (from, to) = (pairs(&from), pairs(&to));
        let both = from.iter().flat_map(|a| to.iter().map(move |b| (*a, *b))).filter(|(a, b)| a.0 * b.0 < 0.0);
        let apart = |((a, v), (b, w)): &((f64, f64), (f64, f64))| (a - b).abs() + (v - w).abs();
        both.min_by(|x, y| apart(x).total_cmp(&apart(y)))
    }

    /// Whether a point lies ahead of one station and behind another and not far from both, so that it is the event they
    /// bracket: a neighbour of it, on this branch or another, may attract Newton's method as well.
    fn lies_between(&self, point: &EquilibriumPoint, low: &RestStation, high: &RestStation) -> bool {
        /// Distances are known to this.
        const ROUNDOFF: f64 = 1e-12;
        // A chord is shorter than the branch between its ends; twice its length still excludes other branches.
        let reach = 2.0 * self.distance(&low.point, &high.point);
        let near = |station: &RestStation| self.distance(&station.point, point) <= reach;
        let along = |station: &RestStation| self.metric.inner(&station.tangent, &point.minus(&station.point));
        near(low) && near(high) && along(low) >= -ROUNDOFF && along(high) <= ROUNDOFF
    }

    /// A number that changes its sign at an event, roughly, and the frequency of the critical pair.
    fn critical_part(&mut self, event: RestEvent, station: &RestStation) -> Option<(f64, f64)> {
        if event == RestEvent::Fold {
            return Some((station.watch.values[super::problem::WATCH_TURN].value, 0.0));
        }
        let spectrum = self.spectrum(&station.point).ok()?;
        let is_pair = event == RestEvent::Hopf;
        let wanted = spectrum.values.iter().filter(|value| if is_pair { value.im > 0.0 } else { value.im == 0.0 });
        let nearest = wanted.min_by(|a, b| a.re.abs().total_cmp(&b.re.abs()));
        match nearest {
            Some(value) => Some((value.re, value.im)),
            // The pair has split into two real ones on this side; half the way may still find it.
            None if is_pair => None,
            None => Some((0.0, 0.0)),
        }
    }

    /// The event near a guess, by Newton's method on its defining system alone.
    pub fn solve(&mut self, event: RestEvent, guess: EquilibriumPoint, frequency: f64) -> Option<LocatedRest> {
        let extra = if event == RestEvent::Hopf { frequency } else { 0.0 };
        let mut at = Iterate { point: guess, extra };
        self.local.linearise(&at.point).ok()?;
        let sizes = self.border_sizes();
        match event {
            RestEvent::Hopf => {
                let (jacobian, systems) = (&self.local.jacobian, &mut self.systems);
                let mut null = ComplexNull::find(systems, jacobian, (0.0, frequency), &sizes)?;
                self.iterate(event, &mut at, &mut |problem, at| problem.hopf_system(&mut null, at, &sizes))
            }
            RestEvent::Fold | RestEvent::Branching => {
                let mut null = RealNull::find(&mut self.systems, &self.local.jacobian, 0.0, &sizes)?;
                let branching = event == RestEvent::Branching;
                self.iterate(event, &mut at, &mut |problem, at| problem.zero_system(&mut null, at, &sizes, branching))
            }
        }
    }

    /// Newton's method on a defining system.
    fn iterate(
        &mut self,
        event: RestEvent,
        at: &mut Iterate,
        define: &mut dyn FnMut(&mut Self, &Iterate) -> Option<Defining>,
    ) -> Option<LocatedRest> {
        let n = at.point.state.len();
        let first_extra = at.extra;
        let mut course = Course { corrections: Vec::new() };
        let mut step = vec![0.0; n + 2];
        for _ in 0..ITERATIONS {
            self.local.linearise(&at.point).ok()?;
            let defining = define(self, at)?;
            let rates = self.local.rates.iter().zip(&defining.column);
            let unfolded = if event == RestEvent::Branching { at.extra } else { 0.0 };
            step[..n].iter_mut().zip(rates).for_each(|(s, (rate, b))| *s = rate + unfolded * b);
            step[n..].copy_from_slice(&defining.scalars);
            let rows = [&defining.rows[0][..], &defining.rows[1][..]];
            let columns = [&self.local.column[..], &defining.column[..]];
            self.systems.double(&self.local.jacobian, columns, rows)?.solve(&mut step);
            let mut size = self.metric.largest(&step[..n], step[n]);
            if event == RestEvent::Hopf {
                size = size.max((step[n + 1] / first_extra).abs());
            }
            // The system of the last iterate tells the errors; its own correction is roundoff then.
            let over = course.judge(size);
            at.point.state.iter_mut().zip(&step).for_each(|(x, d)| *x -= d);
            at.point.parameter -= step[n];
            at.extra -= step[n + 1];
            match over {
                Some(true) => return self.told(event, at, &defining, &course),
                Some(false) => return None,
                None => {}
            }
        }
        None
    }

    /// The located event with its errors, from the defining system factored last.
    fn told(&mut self, event: RestEvent, at: &Iterate, defining: &Defining, course: &Course) -> Option<LocatedRest> {
        let n = at.point.state.len();
        let norm = self.norm();
        if event == RestEvent::Hopf && !(at.extra > SLOWEST * norm) {
            return None;
        }
        let mut sizes = self.terms.of_rates(&self.local, &at.point);
        sizes.extend(defining.sizes);
        let rows = [&defining.rows[0][..], &defining.rows[1][..]];
        let columns = [&self.local.column[..], &defining.column[..]];
        let jacobian = &self.local.jacobian;
        let system = self.systems.double(jacobian, columns, rows)?;
        let mut rounding = |unknown: usize| {
            let mut row = vec![0.0; n + 2];
            row[unknown] = 1.0;
            system.solve_transposed(&mut row);
            UNITS * f64::EPSILON * row.iter().zip(&sizes).map(|(w, size)| (w * size).abs()).sum::<f64>()
        };
        let (by_value, by_extra) = (rounding(n), rounding(n + 1));
        let mut moved: Vec<f64> =
            sizes.iter().enumerate().map(|(k, size)| any_sign(k) * UNITS * f64::EPSILON * size).collect();
        system.solve(&mut moved);
        let left = course.left();
        let size = at.point.parameter.abs().max(self.metric.parameter_scale);
        let error = by_value + left * self.metric.parameter_scale + UNITS * f64::EPSILON * size;
        let state_error = self.metric.largest(&moved[..n], moved[n]) + left + UNITS * f64::EPSILON;
        let omega = if event == RestEvent::Hopf { at.extra } else { 0.0 };
        let frequency = (omega, by_extra + (left + UNITS * f64::EPSILON) * omega);
        error.is_finite().then(|| LocatedRest {
            event,
            point: at.point.clone(),
            error,
            frequency,
            state_error,
            share: 0.0,
            iterations: course.corrections.len(),
            vectors: defining.vectors.clone(),
        })
    }

    /// `g` of the real null vectors, and for a branching `s = psi^T f_p`.
    fn zero_system(
        &mut self,
        null: &mut RealNull,
        at: &Iterate,
        sizes: &BorderSizes,
        branching: bool,
    ) -> Option<Defining> {
        let n = at.point.state.len();
        null.refresh(sizes);
        null.solve(&mut self.systems, &self.local.jacobian, 0.0)?;
        // Solved with the same factors: they are still those of the null vectors.
        let mut y = self.local.column.clone();
        y.push(0.0);
        let border = super::systems::Border { column: null.column(), row: null.row(), corner: 0.0 };
        self.systems.single(&self.local.jacobian, 0.0, &border)?.solve(&mut y);
        let s = y[n];
        y.truncate(n);
        let row = |(states, parameter): (Vec<f64>, f64), factor: f64| {
            let mut row: Vec<f64> = states.iter().map(|value| factor * value).collect();
            row.extend([factor * parameter, 0.0]);
            row
        };
        let first = row(self.local.gradient(&at.point, &null.psi, Along::states(&null.v)), -1.0);
        let size = self.terms.of_product(&self.local, &at.point, &null.psi, &null.v);
        let vectors = Vectors::Real { v: null.v.clone(), psi: null.psi.clone(), y: y.clone() };
        if !branching {
            // The extra unknown is not there: its column is a unit row of its own.
            let mut idle = vec![0.0; n + 2];
            idle[n + 1] = 1.0;
            let column = vec![0.0; n];
            return Some(Defining { scalars: [null.g, 0.0], rows: [first, idle], column, sizes: [size, 0.0], vectors });
        }
        let second = row(self.local.gradient(&at.point, &null.psi, Along { states: &y, parameter: -1.0 }), -1.0);
        let by_column: f64 = null.psi.iter().zip(&self.local.column).map(|(p, f)| (p * f).abs()).sum();
        let size_of_s = self.terms.of_product(&self.local, &at.point, &null.psi, &y) + by_column;
        let column = null.column().to_vec();
        let sizes = [size, size_of_s];
        Some(Defining { scalars: [null.g, s], rows: [first, second], column, sizes, vectors })
    }

    /// `g` of the complex null vectors of `A - i omega`.
    fn hopf_system(&mut self, null: &mut ComplexNull, at: &Iterate, sizes: &BorderSizes) -> Option<Defining> {
        let n = at.point.state.len();
        null.refresh(sizes);
        null.solve(&mut self.systems, &self.local.jacobian, (0.0, at.extra))?;
        let ComplexNull { q, psi, .. } = &*null;
        let mut rows = [vec![0.0; n + 2], vec![0.0; n + 2]];
        // -psi^H dA q, from its four real parts.
        for (psi, v, part, sign) in
            [(&psi.re, &q.re, 0, -1.0), (&psi.im, &q.im, 0, -1.0), (&psi.re, &q.im, 1, -1.0), (&psi.im, &q.re, 1, 1.0)]
        {
            let (states, parameter) = self.local.gradient(&at.point, psi, Along::states(v));
            rows[part].iter_mut().zip(&states).for_each(|(sum, value)| *sum += sign * value);
            rows[part][n] += sign * parameter;
        }
        // d(A - i omega)/d omega = -i: dg/d omega = i psi^H q.
        let (re, im) = psi.product(q);
        (rows[0][n + 1], rows[1][n + 1]) = (-im, re);
        let (moduli_psi, moduli_q) = (psi.moduli(), q.moduli());
        let turned: f64 = moduli_psi.iter().zip(&moduli_q).map(|(p, q)| p * q).sum();
        let mut size = at.extra * turned;
        for (psi, v) in [(&psi.re, &q.re), (&psi.im, &q.im), (&psi.re, &q.im), (&psi.im, &q.re)] {
            size += self.terms.of_product(&self.local, &at.point, psi, v);
        }
        let vectors = Vectors::Complex { q: q.clone(), psi: psi.clone() };
        let scalars = [null.g.0, null.g.1];
        Some(Defining { scalars, rows, column: vec![0.0; n], sizes: [size, size], vectors })
    }

    /// The station halfway between two, on the branch; none where it does not correct.
    pub fn between(&mut self, low: &RestStation, high: &RestStation) -> Option<RestStation> {
        let length = self.distance(&low.point, &high.point);
        let stride = 0.5 * length;
        // From the middle of the chord: nearer than along the tangent where the branch bends.
        let prediction = low.point.plus(0.5, &high.point.minus(&low.point));
        let chord = self.metric.normalised(high.point.minus(&low.point));
        let closing = Closing::Component { from: &low.point, direction: &chord, amount: stride };
        let point = self.correct(&prediction, closing).ok()?.point;
        if !(self.distance(&point, &prediction) <= length) {
            return None;
        }
        let tangent = self.tangent(&point, Orientation::Along(&chord)).ok()?;
        let watch = self.watch(&point, &tangent).ok()?;
        Some(Station { point, tangent, watch, distance: 0.5 * (low.distance + high.distance) })
    }
}
