//! Why cycles of a model come in families: a quantity its solutions conserve, or a continuous symmetry.
//!
//! A second multiplier is 1 on every cycle then, and at given parameters no cycle is isolated. Both are properties of the
//! rates and are looked for there, at states scattered about a cycle:
//! - `I = Sum c_k b_k(x)` is conserved where `Sum c_k (db_k/dx) f = 0`, a linear system for c, the b_k being the states, their
//!   logarithms, and their products of second degree;
//! - the flow of `x' = G x + g` carries solutions into solutions where `Df (G x + g) = G f` (Olver 1993, Applications of Lie
//!   Groups to Differential Equations, sec. 2.3; from memory), a linear system for G and g.
//!
//! What holds at twice as many states as there are unknowns, to roundoff, holds in all likelihood everywhere.

use armilla_model::{Batch, Linearisation, VectorField};
use armilla_record::Profile;
use nalgebra::DMatrix;

/// What makes cycles come in families.
#[derive(Clone, Debug, PartialEq)]
pub enum Degeneracy {
    /// The sum of these terms, each with its factor, keeps its value along every solution.
    Conserved(Vec<(f64, Term)>),
    /// The solutions of these linear equations carry cycles into other cycles: one sum of terms for the rate of each state.
    Symmetric(Vec<Vec<(f64, Term)>>),
}

/// A function of the state.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Term {
    /// 1.
    One,
    /// The state with this index.
    State(usize),
    /// Its natural logarithm.
    Logarithm(usize),
    /// The product of two states.
    Product(usize, usize),
}

/// States up to which products and symmetries are looked for: the work grows with the sixth power.
const MOST_STATES: usize = 10;
/// Share of the largest singular value below which the smallest is zero: roundoff of the rates, with room.
const ZERO: f64 = 1e-11;
/// Share of the largest factor below which another is zero.
const NO_FACTOR: f64 = 1e-7;
/// Scatter of the states about the cycle, in its ranges, or relative where all states are positive.
const SCATTER: f64 = 0.2;
/// Range of a state, relative to its size, that is no motion.
const STILL: f64 = 1e-6;
/// Share of a cycle's own motion by which a symmetry must move it sideways.
const SIDEWAYS: f64 = 1e-6;

/// Looks for the reason why cycles near `profile` come in families.
pub fn degeneracy(field: &dyn VectorField, parameters: &[f64], profile: &Profile) -> Option<Degeneracy> {
    let sampler = Sampler { field, parameters, profile };
    sampler.conserved().map(Degeneracy::Conserved).or_else(|| sampler.symmetric().map(Degeneracy::Symmetric))
}

/// Whether the divergence of the rates vanishes everywhere about `profile`: what flows keeps its volume.
pub fn keeps_volume(field: &dyn VectorField, parameters: &[f64], profile: &Profile) -> bool {
    let sampler = Sampler { field, parameters, profile };
    let samples = sampler.samples(2 * profile.n_states + MOST_STATES);
    let vanishes = |sample: &Sample| sample.jacobian.trace().abs() <= ZERO * sample.jacobian.norm();
    samples.is_some_and(|samples| samples.iter().all(vanishes))
}

/// States about a cycle, with the rates there.
struct Sampler<'a> {
    field: &'a dyn VectorField,
    parameters: &'a [f64],
    profile: &'a Profile,
}

/// One state with its rate and Jacobian matrix.
struct Sample {
    state: Vec<f64>,
    rates: Vec<f64>,
    jacobian: DMatrix<f64>,
}

impl Sampler<'_> {
    fn n(&self) -> usize {
        self.profile.n_states
    }

    fn conserved(&self) -> Option<Vec<(f64, Term)>> {
        let n = self.n();
        let extremes = self.profile.extremes();
        let states: Vec<Term> = (0..n).map(Term::State).collect();
        let positive = extremes.iter().all(|(low, _)| *low > 0.0);
        let logarithms = (0..n).filter(|_| positive).map(Term::Logarithm);
        let with_logarithms: Vec<Term> = states.iter().copied().chain(logarithms).collect();
        let products = (0..n).flat_map(|i| (i..n).map(move |j| Term::Product(i, j)));
        let all: Vec<Term> = with_logarithms.iter().copied().chain(products).collect();
        let mut bases = vec![states, with_logarithms];
        if n <= MOST_STATES {
            bases.push(all);
        }
        bases.into_iter().find_map(|basis| self.conserved_among(&basis))
    }

    fn conserved_among(&self, basis: &[Term]) -> Option<Vec<(f64, Term)>> {
        let samples = self.samples(2 * basis.len() + self.n())?;
        let rows: Vec<Vec<f64>> =
            samples.iter().map(|sample| basis.iter().map(|term| sample.rate_of(*term)).collect()).collect();
        let factors = null_vectors(&rows).into_iter().next()?;
        Some(terms(&factors, basis))
    }

    /// A linear vector field that commutes with the rates and does not carry the cycle along itself.
    fn symmetric(&self) -> Option<Vec<Vec<(f64, Term)>>> {
        let n = self.n();
        if n > MOST_STATES || self.field.is_forced() {
            return None;
        }
        let basis: Vec<Term> = (0..n).map(Term::State).chain([Term::One]).collect();
        let samples = self.samples(2 * (n + 1) + n)?;
        let rows: Vec<Vec<f64>> = samples.iter().flat_map(|sample| sample.commutators(&basis)).collect();
        let sideways = |factors: &Vec<f64>| self.moves_sideways(factors, &basis);
        let factors = null_vectors(&rows).into_iter().find(sideways)?;
        Some(normalised(&factors).chunks_exact(n + 1).map(|row| large_terms(row, &basis)).collect())
    }

    fn moves_sideways(&self, factors: &[f64], basis: &[Term]) -> bool {
        let Some(on_cycle) = self.evaluated(&self.profile.values) else { return false };
        let scales: Vec<f64> =
            self.profile.extremes().iter().map(|(low, high)| (high - low).max(f64::MIN_POSITIVE)).collect();
        let scaled = |values: Vec<f64>| values.iter().zip(&scales).map(|(v, s)| v / s).collect::<Vec<f64>>();
        let (mut aside, mut whole) = (0.0f64, 0.0f64);
        for sample in on_cycle {
            let moved = factors.chunks_exact(basis.len()).map(|row| sample.sum(row, basis)).collect();
            let (moved, along) = (scaled(moved), scaled(sample.rates.clone()));
            let share = dot(&moved, &along) / dot(&along, &along);
            let rest: Vec<f64> = moved.iter().zip(&along).map(|(m, a)| m - share * a).collect();
            (aside, whole) = (aside.max(dot(&rest, &rest).sqrt()), whole.max(dot(&moved, &moved).sqrt()));
        }
        aside > SIDEWAYS * whole
    }

    /// At least `count` states about the cycle; none where the rates are not finite there.
    fn samples(&self, count: usize) -> Option<Vec<Sample>> {
        let n = self.n();
        let extremes = self.profile.extremes();
        let positive = extremes.iter().all(|(low, _)| *low > 0.0);
        let nodes = self.profile.n_nodes();
        // A state that does not move here is tried as far off as those that move least, lest it seem to stay everywhere.
        let least =
            extremes.iter().map(|(low, high)| high - low).filter(|range| *range > 0.0).fold(f64::INFINITY, f64::min);
        let still = if least.is_finite() { least } else { 1.0 };
        let mut states = Vec::with_capacity(count * n);
        for k in 0..count {
            let node = self.profile.node(k * nodes / count);
            for (i, (value, (low, high))) in node.iter().zip(&extremes).enumerate() {
                let shift = SCATTER * (2.0 * spread(k, i) - 1.0);
                let moves = high - low > STILL * value.abs();
                let size = if moves { high - low } else { value.abs().max(still) };
                states.push(if positive { value * (1.0 + shift) } else { value + shift * size });
            }
        }
        self.evaluated(&states)
    }

    /// Rates and Jacobian matrices at states, n numbers each.
    fn evaluated(&self, states: &[f64]) -> Option<Vec<Sample>> {
        let n = self.n();
        let pattern = self.field.pattern();
        let mut evaluator = self.field.evaluator(&[]);
        let (mut rates, mut values) = (vec![0.0; n], vec![0.0; pattern.nnz()]);
        let mut samples = Vec::with_capacity(states.len() / n);
        for (k, state) in states.chunks_exact(n).enumerate() {
            let time = [spread(k, n) * self.profile.period];
            let batch = Batch { len: 1, time: &time, states: state, parameters: self.parameters };
            let out = Linearisation { rates: &mut rates, jacobian: &mut values, columns: &mut [] };
            evaluator.linearise(batch, out);
            let mut jacobian = DMatrix::zeros(n, n);
            pattern.entries().zip(&values).for_each(|((i, j), value)| jacobian[(i, j)] = *value);
            if !rates.iter().chain(&values).all(|number| number.is_finite()) {
                return None;
            }
            samples.push(Sample { state: state.to_vec(), rates: rates.clone(), jacobian });
        }
        Some(samples)
    }
}

impl Sample {
    fn value_of(&self, term: Term) -> f64 {
        match term {
            Term::One => 1.0,
            Term::State(i) => self.state[i],
            Term::Logarithm(i) => self.state[i].ln(),
            Term::Product(i, j) => self.state[i] * self.state[j],
        }
    }

    /// How fast a term changes along the solution.
    fn rate_of(&self, term: Term) -> f64 {
        match term {
            Term::One => 0.0,
            Term::State(i) => self.rates[i],
            Term::Logarithm(i) => self.rates[i] / self.state[i],
            Term::Product(i, j) => self.state[i] * self.rates[j] + self.state[j] * self.rates[i],
        }
    }

    fn sum(&self, factors: &[f64], basis: &[Term]) -> f64 {
        factors.iter().zip(basis).map(|(factor, term)| factor * self.value_of(*term)).sum()
    }

    /// `Df v - Dv f` for each v that has one term in one component: n rows with a number for each factor.
    fn commutators(&self, basis: &[Term]) -> Vec<Vec<f64>> {
        let n = self.state.len();
        let row = |row: usize| {
            let entry = |component: usize, term: Term| {
                let own = if component == row { self.rate_of(term) } else { 0.0 };
                self.jacobian[(row, component)] * self.value_of(term) - own
            };
            (0..n).flat_map(|component| basis.iter().map(move |term| entry(component, *term))).collect()
        };
        (0..n).map(row).collect()
    }
}

/// Number between 0 and 1, well spread over k in each dimension: fractional parts of multiples of roots of integers.
fn spread(k: usize, dimension: usize) -> f64 {
    ((k + 1) as f64 * ((dimension + 2) as f64 + 0.5).sqrt()).fract()
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// Factors of the columns of `rows` whose sum vanishes to roundoff in every row.
fn null_vectors(rows: &[Vec<f64>]) -> Vec<Vec<f64>> {
    let count = rows[0].len();
    let mut matrix = DMatrix::from_fn(rows.len(), count, |i, j| rows[i][j]);
    let lengths: Vec<f64> = matrix.column_iter().map(|column| column.norm()).collect();
    let largest = lengths.iter().copied().fold(0.0, f64::max);
    // A column that is zero already is its own null vector, and keeps its scale.
    let scale = |length: f64| if length > ZERO * largest { length } else { largest.max(f64::MIN_POSITIVE) };
    for (mut column, length) in matrix.column_iter_mut().zip(&lengths) {
        column /= scale(*length);
    }
    let Some(svd) = nalgebra::linalg::SVD::try_new(matrix, false, true, f64::EPSILON, SWEEPS * count) else {
        return Vec::new();
    };
    let (Some(right), values) = (svd.v_t, svd.singular_values) else { return Vec::new() };
    let most = values.max();
    let null = values.iter().enumerate().filter(|(_, value)| **value <= ZERO * most);
    null.map(|(row, _)| right.row(row).iter().zip(&lengths).map(|(v, l)| v / scale(*l)).collect()).collect()
}

/// Sweeps of the singular value decomposition for each column: a few are the rule.
const SWEEPS: usize = 60;

/// The terms that count, the largest factor 1.
fn terms(factors: &[f64], basis: &[Term]) -> Vec<(f64, Term)> {
    large_terms(&normalised(factors), basis)
}

/// The same direction with 1 for the size of the largest factor and the first one that counts positive.
fn normalised(factors: &[f64]) -> Vec<f64> {
    let largest = factors.iter().fold(0.0f64, |largest, factor| largest.max(factor.abs()));
    let first = factors.iter().find(|factor| factor.abs() > NO_FACTOR * largest).copied().unwrap_or(1.0);
    factors.iter().map(|factor| factor / largest * first.signum()).collect()
}

fn large_terms(factors: &[f64], basis: &[Term]) -> Vec<(f64, Term)> {
    factors.iter().copied().zip(basis.iter().copied()).filter(|(factor, _)| factor.abs() > NO_FACTOR).collect()
}
