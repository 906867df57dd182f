//! Interval maps of the linear variational equation along a profile.
//!
//! `v' = T A(t) v` is linear, so its maps need no Newton and no mesh of the profile: every mesh interval is cut
//! until `h T |A|` is at most m/2, where Gauss collocation of degree m is as accurate as the profile. Where that is
//! not worth its pieces (`linear_mesh.rs`), some direction is merely strongly damped, and Radau IIA collocation,
//! L-stable, keeps signs and counts right, and the other directions accurate; where it is strongly repelling, the
//! same scheme run backwards in time does (Hairer & Wanner 1996, Solving ODEs II, sec. IV.5, IV.3). Gauss steps would
//! not: for stiff decay they tend to modulus 1 with sign (-1)^m.

use armilla_linalg::{Lu, Singular};
use armilla_model::{Batch, Evaluator, Linearisation, VectorField};
use armilla_record::Profile;

use crate::direction::Directions;
use crate::gauss::{gauss, radau};
use crate::linear_mesh::{LinearMesh, Plan, Samples, Stiffness, TooStiff};

/// The maps and what goes with them.
#[derive(Clone, Debug, Default)]
pub struct VariationalMaps {
    /// Number of states n.
    pub n: usize,
    /// The maps, n x n row-major, in the order of time.
    pub maps: Vec<f64>,
    /// Direction of the trivial multiplier at the start of each map, n numbers each: the rates at mesh points, carried on
    /// inside. Under a forcing no multiplier is trivial and these are mere rates.
    pub flow: Vec<f64>,
    /// Integral of the divergence over one period.
    pub divergence: f64,
    /// Whether some stretch was passed by an L-stable scheme: multipliers damped (or repelled) that strongly have the
    /// right sign and side of the unit circle, and not the right size.
    pub damped: bool,
    /// Largest number of directions at one place that may be concerned.
    pub dropped: usize,
    /// `Int |A| dt` over one period.
    pub stiffness: f64,
}

/// A stage scheme on `[0, 1]`.
#[derive(Clone, Debug)]
struct Scheme {
    points: Vec<f64>,
    weights: Vec<f64>,
    /// `a[l * m + j] = Int_0^(c_l) l_j`.
    matrix: Vec<f64>,
}

impl Scheme {
    fn new(points: Vec<f64>) -> Self {
        let m = points.len();
        let (rule_points, rule_weights) = gauss(m);
        let basis = |j: usize, x: f64| -> f64 {
            (0..m).filter(|&l| l != j).map(|l| (x - points[l]) / (points[j] - points[l])).product()
        };
        // Gauss quadrature of the same size integrates the basis polynomials exactly.
        let integral = |j: usize, to: f64| -> f64 {
            to * rule_points.iter().zip(&rule_weights).map(|(x, w)| w * basis(j, to * x)).sum::<f64>()
        };
        let weights = (0..m).map(|j| integral(j, 1.0)).collect();
        let matrix = (0..m * m).map(|e| integral(e % m, points[e / m])).collect();
        Self { points, weights, matrix }
    }
}

/// Pieces evaluated together: memory of the points of a long cycle stays small, and a batch stays in the cache.
const PIECES_AT_ONCE: usize = 256;

/// Why there are no maps.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum MapsFault {
    /// A stage system is singular or not finite.
    Singular(Singular),
    /// A stretch is too stiff.
    TooStiff(TooStiff),
}

impl From<Singular> for MapsFault {
    fn from(fault: Singular) -> Self {
        Self::Singular(fault)
    }
}

impl From<TooStiff> for MapsFault {
    fn from(fault: TooStiff) -> Self {
        Self::TooStiff(fault)
    }
}

impl std::fmt::Display for MapsFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Singular(fault) => fault.fmt(f),
            Self::TooStiff(fault) => fault.fmt(f),
        }
    }
}

impl std::error::Error for MapsFault {}

/// Integrates the variational equation; owns its workspace.
pub struct Variational {
    evaluator: Box<dyn Evaluator>,
    entries: Vec<(usize, usize)>,
    n: usize,
    is_forced: bool,
    accurate: Scheme,
    damping: Scheme,
    repelling: Scheme,
    mesh: LinearMesh,
    states: Vec<f64>,
    rates: Vec<f64>,
    jacobian: Vec<f64>,
    stages: Lu,
    right: Vec<f64>,
    times: Vec<f64>,
    places: Vec<(usize, f64)>,
}

/// One piece of the linear mesh.
#[derive(Clone, Copy)]
struct Piece {
    interval: usize,
    from: f64,
    length: f64,
    stiffness: Stiffness,
}

impl Variational {
    /// For a field and the degree of its profiles.
    pub fn new(field: &dyn VectorField, degree: usize) -> Self {
        let n = field.n_states();
        Self {
            evaluator: field.evaluator(&[]),
            entries: field.pattern().entries().collect(),
            n,
            is_forced: field.is_forced(),
            accurate: Scheme::new(gauss(degree).0),
            damping: Scheme::new(radau(degree)),
            repelling: Scheme::new(radau(degree).iter().rev().map(|c| 1.0 - c).collect()),
            mesh: LinearMesh::new(degree),
            states: Vec::new(),
            rates: Vec::new(),
            jacobian: Vec::new(),
            stages: Lu::new(degree * n),
            right: Vec::new(),
            times: Vec::new(),
            places: Vec::new(),
        }
    }

    /// Fineness at which a piece of constant A has a relative error of `accuracy` in each log multiplier. Gauss collocation
    /// gives `exp(z)` up to `c z^(2m+1)`, `c = m!^2/((2m)! (2m+1)!)` (Hairer & Wanner 1996, theorem IV.3.12). The sum of
    /// log-moduli does not see it where a rate and its opposite occur: their errors cancel.
    pub fn fineness_for(&self, accuracy: f64) -> f64 {
        let m = self.accurate.points.len();
        let factorial = |k: usize| (1..=k).map(|k| k as f64).product::<f64>();
        let c = factorial(m).powi(2) / factorial(2 * m) / factorial(2 * m + 1);
        let reach = (accuracy.max(f64::EPSILON) / c).powf(0.5 / m as f64);
        (0.5 * m as f64 / reach).max(1.0)
    }

    /// Maps along `profile` with all `parameters`; `scales` are the sizes of the states, `fineness` divides the
    /// largest `h T |A|` of a piece (1 is as accurate as the profile as a rule).
    ///
    /// # Errors
    /// [`MapsFault`] with the mesh interval.
    pub fn maps(
        &mut self,
        profile: &Profile,
        parameters: &[f64],
        scales: &[f64],
        fineness: f64,
    ) -> Result<VariationalMaps, MapsFault> {
        let plan = self.plan(profile, parameters, (scales, fineness))?;
        let (n, count) = (self.n, plan.cuts.iter().map(|cut| cut.pieces).sum::<usize>());
        let mut out = VariationalMaps {
            n,
            maps: Vec::with_capacity(count * n * n),
            flow: Vec::with_capacity(count * n),
            divergence: 0.0,
            damped: plan.cuts.iter().any(|cut| cut.stiffness != Stiffness::None),
            dropped: plan.dropped,
            stiffness: plan.stiffness,
        };
        let pieces = plan.cuts.iter().enumerate().flat_map(|(interval, cut)| {
            let count = cut.pieces as f64;
            (0..cut.pieces).map(move |k| Piece {
                interval,
                from: k as f64 / count,
                length: 1.0 / count,
                stiffness: cut.stiffness,
            })
        });
        let mut batch: Vec<Piece> = Vec::with_capacity(PIECES_AT_ONCE);
        for piece in pieces {
            batch.push(piece);
            if batch.len() == PIECES_AT_ONCE {
                self.pass(profile, parameters, &batch, &mut out)?;
                batch.clear();
            }
        }
        self.pass(profile, parameters, &batch, &mut out)?;
        if !self.is_forced {
            let directions = Directions { maps: &out.maps, scales };
            directions.carry(&mut out.flow, plan.cuts.iter().map(|cut| cut.pieces));
        }
        Ok(out)
    }

    /// Appends the maps of some pieces.
    fn pass(
        &mut self,
        profile: &Profile,
        parameters: &[f64],
        pieces: &[Piece],
        out: &mut VariationalMaps,
    ) -> Result<(), Singular> {
        let m = self.accurate.points.len();
        // Per piece: its start (for the flow direction), then its stages.
        self.places.clear();
        for piece in pieces {
            let scheme = match piece.stiffness {
                Stiffness::None => &self.accurate,
                Stiffness::Damped => &self.damping,
                Stiffness::Repelling => &self.repelling,
            };
            self.places.push((piece.interval, piece.from));
            self.places.extend(scheme.points.iter().map(|c| (piece.interval, piece.from + piece.length * c)));
        }
        let points = self.places.len();
        self.evaluate(profile, parameters);
        for (index, piece) in pieces.iter().enumerate() {
            let first = index * (m + 1);
            out.flow.extend((0..self.n).map(|a| self.rates[a * points + first]));
            let interval_length = profile.mesh[piece.interval + 1] - profile.mesh[piece.interval];
            let step = piece.length * interval_length * profile.period;
            self.map_of_piece(*piece, (first + 1, points), step, out)?;
        }
        Ok(())
    }

    /// Evaluates rates and Jacobian at `self.places`, pairs of mesh interval and local place.
    fn evaluate(&mut self, profile: &Profile, parameters: &[f64]) {
        let (n, points) = (self.n, self.places.len());
        self.states.resize(n * points, 0.0);
        self.rates.resize(n * points, 0.0);
        self.jacobian.resize(self.entries.len() * points, 0.0);
        let mut evaluator = profile.evaluator();
        let mut state = vec![0.0; n];
        self.times.clear();
        for (point, &(interval, local)) in self.places.iter().enumerate() {
            let (from, to) = (profile.mesh[interval], profile.mesh[interval + 1]);
            self.times.push(profile.period * (from + local * (to - from)));
            evaluator.in_interval(interval, local, &mut state);
            for a in 0..n {
                self.states[a * points + point] = state[a];
            }
        }
        let batch = Batch { len: points, time: &self.times, states: &self.states, parameters };
        let out = Linearisation { rates: &mut self.rates, jacobian: &mut self.jacobian, columns: &mut [] };
        self.evaluator.linearise(batch, out);
    }

    /// Cuts every mesh interval by the scaled Jacobian on it.
    fn plan(
        &mut self,
        profile: &Profile,
        parameters: &[f64],
        (scales, fineness): (&[f64], f64),
    ) -> Result<Plan, TooStiff> {
        let m = self.accurate.points.len();
        self.places.clear();
        for interval in 0..profile.intervals() {
            self.places.push((interval, 0.0));
            self.places.extend(self.accurate.points.iter().map(|&c| (interval, c)));
        }
        self.evaluate(profile, parameters);
        let lengths: Vec<f64> = profile.mesh.windows(2).map(|pair| (pair[1] - pair[0]) * profile.period).collect();
        let samples = Samples {
            lengths: &lengths,
            per_interval: m + 1,
            entries: &self.entries,
            jacobian: &self.jacobian,
            scales,
        };
        self.mesh.plan(&samples, fineness)
    }

    /// Solves `K_l - step A_l Sum_j a_lj K_j = A_l` (scaled) for all n right sides and appends `I + step Sum b_j K_j`.
    fn map_of_piece(
        &mut self,
        piece: Piece,
        (first, points): (usize, usize),
        step: f64,
        out: &mut VariationalMaps,
    ) -> Result<(), Singular> {
        let n = self.n;
        let scheme = match piece.stiffness {
            Stiffness::None => &self.accurate,
            Stiffness::Damped => &self.damping,
            Stiffness::Repelling => &self.repelling,
        };
        let m = scheme.points.len();
        let size = m * n;
        let matrix = self.stages.matrix_mut();
        matrix.fill(0.0);
        (0..size).for_each(|q| matrix[q * size + q] = 1.0);
        for l in 0..m {
            for (entry, &(a, b)) in self.entries.iter().enumerate() {
                let value = step * self.jacobian[entry * points + first + l];
                if a == b {
                    out.divergence += scheme.weights[l] * value;
                }
                let row = &mut matrix[(l * n + a) * size..(l * n + a + 1) * size];
                for j in 0..m {
                    row[j * n + b] -= scheme.matrix[l * m + j] * value;
                }
            }
        }
        if !self.stages.factor() {
            return Err(Singular { interval: piece.interval });
        }
        let start = out.maps.len();
        out.maps.resize(start + n * n, 0.0);
        let stages = &mut self.right;
        stages.resize(size * n, 0.0);
        stages.fill(0.0);
        for (entry, &(a, b)) in self.entries.iter().enumerate() {
            for l in 0..m {
                stages[(l * n + a) * n + b] = step * self.jacobian[entry * points + first + l];
            }
        }
        self.stages.solve_many(stages, n);
        let map = &mut out.maps[start..];
        (0..n).for_each(|a| map[a * n + a] = 1.0);
        for (j, stage) in stages.chunks_exact(n * n).enumerate() {
            map.iter_mut().zip(stage).for_each(|(map, stage)| *map += scheme.weights[j] * stage);
        }
        Ok(())
    }
}
