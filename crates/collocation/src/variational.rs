//! Interval maps of the linear variational equation along a profile.
//!
//! `v' = T A(t) v` is linear, so its maps need no Newton and no mesh of the profile: every mesh interval is cut
//! until `h T |A|` is at most m/2, where Gauss collocation of degree m is as accurate as the profile. Where that
//! would take more pieces than allowed, the interval is merely strongly damped and Radau IIA collocation,
//! L-stable, keeps signs and counts right; where it is strongly repelling, the same scheme run backwards in time does (Hairer & Wanner 1996, Solving ODEs II, sec. IV.5, IV.3). Gauss steps
//! would not: for stiff decay they tend to modulus 1 with sign (-1)^m.

use armilla_linalg::{Lu, Singular};
use armilla_model::{Batch, Evaluator, Linearisation, VectorField};
use armilla_record::Profile;

use crate::gauss::{gauss, radau};

/// The maps and what goes with them.
#[derive(Clone, Debug, Default)]
pub struct VariationalMaps {
    /// Number of states n.
    pub n: usize,
    /// The maps, n x n row-major, in the order of time.
    pub maps: Vec<f64>,
    /// Rates at the start of each map, n numbers each: the known direction of the trivial multiplier.
    pub flow: Vec<f64>,
    /// Integral of the divergence over one period.
    pub divergence: f64,
    /// Whether some interval was too stiff to cut finely and was passed by the L-stable scheme: then multipliers
    /// far below 1 are not accurate.
    pub damped: bool,
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

/// Pieces one mesh interval may be cut into before the L-stable scheme takes over.
const MOST_PIECES: usize = 64;

/// Integrates the variational equation; owns its workspace.
pub struct Variational {
    evaluator: Box<dyn Evaluator>,
    entries: Vec<(usize, usize)>,
    n: usize,
    accurate: Scheme,
    damping: Scheme,
    repelling: Scheme,
    states: Vec<f64>,
    rates: Vec<f64>,
    jacobian: Vec<f64>,
    stages: Lu,
    right: Vec<f64>,
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

/// What a piece is like.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Stiffness {
    /// Cut finely enough for the accurate scheme.
    None,
    /// Strongly damped on balance.
    Damped,
    /// Strongly repelling on balance.
    Repelling,
}

impl Variational {
    /// For a field and the degree of its profiles.
    pub fn new(field: &dyn VectorField, degree: usize) -> Self {
        let n = field.n_states();
        Self {
            evaluator: field.evaluator(&[]),
            entries: field.pattern().entries().collect(),
            n,
            accurate: Scheme::new(gauss(degree).0),
            damping: Scheme::new(radau(degree)),
            repelling: Scheme::new(radau(degree).iter().rev().map(|c| 1.0 - c).collect()),
            states: Vec::new(),
            rates: Vec::new(),
            jacobian: Vec::new(),
            stages: Lu::new(degree * n),
            right: Vec::new(),
            places: Vec::new(),
        }
    }

    /// Maps along `profile` with all `parameters`; `scales` are the sizes of the states, `fineness` divides the
    /// largest `h T |A|` of a piece (1 is as accurate as the profile as a rule).
    ///
    /// # Errors
    /// [`Singular`] with the mesh interval where a stage system is singular or not finite.
    pub fn maps(
        &mut self,
        profile: &Profile,
        parameters: &[f64],
        scales: &[f64],
        fineness: f64,
    ) -> Result<VariationalMaps, Singular> {
        let pieces = self.cut(profile, parameters, scales, fineness);
        let (n, m) = (self.n, self.accurate.points.len());
        let mut out = VariationalMaps {
            n,
            maps: Vec::with_capacity(pieces.len() * n * n),
            flow: vec![0.0; pieces.len() * n],
            divergence: 0.0,
            damped: pieces.iter().any(|piece| piece.stiffness != Stiffness::None),
        };
        // Per piece: its start (for the flow direction), then its stages.
        self.places.clear();
        for piece in &pieces {
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
            for a in 0..n {
                out.flow[index * n + a] = self.rates[a * points + first];
            }
            let interval_length = profile.mesh[piece.interval + 1] - profile.mesh[piece.interval];
            let step = piece.length * interval_length * profile.period;
            self.map_of_piece(*piece, (first + 1, points), step, &mut out)?;
        }
        Ok(out)
    }

    /// Evaluates rates and Jacobian at `self.places`, pairs of mesh interval and local place.
    fn evaluate(&mut self, profile: &Profile, parameters: &[f64]) {
        let (n, points) = (self.n, self.places.len());
        self.states.resize(n * points, 0.0);
        self.rates.resize(n * points, 0.0);
        self.jacobian.resize(self.entries.len() * points, 0.0);
        let mut evaluator = profile.evaluator();
        let mut state = vec![0.0; n];
        for (point, &(interval, local)) in self.places.iter().enumerate() {
            evaluator.in_interval(interval, local, &mut state);
            for a in 0..n {
                self.states[a * points + point] = state[a];
            }
        }
        let batch = Batch { len: points, time: &[], states: &self.states, parameters };
        let out = Linearisation { rates: &mut self.rates, jacobian: &mut self.jacobian, columns: &mut [] };
        self.evaluator.linearise(batch, out);
    }

    /// Cuts every mesh interval by the size of the scaled Jacobian on it.
    fn cut(&mut self, profile: &Profile, parameters: &[f64], scales: &[f64], fineness: f64) -> Vec<Piece> {
        let m = self.accurate.points.len();
        self.places.clear();
        for interval in 0..profile.intervals() {
            self.places.push((interval, 0.0));
            self.places.extend(self.accurate.points.iter().map(|&c| (interval, c)));
        }
        let points = self.places.len();
        self.evaluate(profile, parameters);
        let mut pieces = Vec::with_capacity(profile.intervals());
        let mut row_sums = vec![0.0; self.n];
        for interval in 0..profile.intervals() {
            let (mut norm, mut trace) = (0.0f64, 0.0);
            for point in interval * (m + 1)..(interval + 1) * (m + 1) {
                row_sums.fill(0.0);
                for (entry, &(a, b)) in self.entries.iter().enumerate() {
                    if a == b {
                        trace += self.jacobian[entry * points + point];
                    }
                    row_sums[a] += (self.jacobian[entry * points + point] * scales[b] / scales[a]).abs();
                }
                norm = row_sums.iter().fold(norm, |norm, sum| norm.max(*sum));
            }
            let length = (profile.mesh[interval + 1] - profile.mesh[interval]) * profile.period;
            let wanted = (norm * length * fineness / (0.5 * m as f64)).ceil();
            let stiffness = match () {
                () if wanted <= MOST_PIECES as f64 => Stiffness::None,
                () if trace > 0.0 => Stiffness::Repelling,
                () => Stiffness::Damped,
            };
            let count = if stiffness == Stiffness::None { (wanted as usize).max(1) } else { MOST_PIECES };
            pieces.extend((0..count).map(|k| Piece {
                interval,
                from: k as f64 / count as f64,
                length: 1.0 / count as f64,
                stiffness,
            }));
        }
        pieces
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
        stages.resize(size, 0.0);
        for column in 0..n {
            stages.fill(0.0);
            for (entry, &(a, b)) in self.entries.iter().enumerate() {
                if b == column {
                    for l in 0..m {
                        stages[l * n + a] = step * self.jacobian[entry * points + first + l];
                    }
                }
            }
            self.stages.solve(stages);
            for a in 0..n {
                let sum: f64 = (0..m).map(|j| scheme.weights[j] * stages[j * n + a]).sum();
                out.maps[start + a * n + column] = sum + if a == column { 1.0 } else { 0.0 };
            }
        }
        Ok(())
    }
}
