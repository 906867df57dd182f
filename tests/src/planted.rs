//! Models whose cycles are known exactly, disguised by a random change of coordinates.
//!
//! The four systems beneath are X1 to X4 of the exact tests, with states that decay or grow on their own beside them.
//! Their periods, multipliers and thresholds do not depend on coordinates; a constant factor of all rates divides
//! periods, and the followed parameter has an origin and a unit of its own. What is exact, by hand:
//!
//! - X1, `r' = r (mu - r^2)`, `theta' = 1 + k mu` on the circle: T = 2 pi/(1 + k mu), log multiplier -2 mu T.
//! - X2, `r' = r (mu + r^2 - r^4)`: r^2 = (1 +- sqrt(1 + 4 mu))/2, T = 2 pi, log multiplier 4 pi r^2 (1 - 2 r^2); fold at
//!   mu = -1/4.
//! - X3, a band twisted by half a turn: circle with T = 2 pi/om and multipliers -exp(mu T), -exp(-kap T); doubling at mu = 0;
//!   the doubled cycle (r - 1) + i z = sqrt(mu) exp(i theta/2) has T2 = 4 pi/om, log multipliers -2 mu T2, -(kap + mu) T2.
//! - X4, in the turning plane U' = l U + g U^3, V' = -V, theta' = 1 + e U^2: circle with T = 2 pi and multipliers
//!   -exp(2 pi l), -exp(-2 pi); doubling at l = 0, supercritical for g < 0; the doubled cycle U^2 = -l/g has
//!   T2 = 4 pi/(1 + e U^2) and, dU' = (l + 3 g U^2) dU = -2 l dU, log multipliers -2 l T2, -T2.

use std::f64::consts::{PI, TAU};
use std::sync::Arc;

use armilla_model::{CodedField, DualRates, Model, VectorField};
use armilla_record::Profile;
use num_dual::DualNum;

use crate::change::{Change, number};
use crate::{Random, uniform_mesh};

/// The system beneath.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Beneath {
    /// X1 with its k.
    Circle(f64),
    /// X2.
    TwoCircles,
    /// X3 with kap and om.
    Band(f64, f64),
    /// X4 with g and e.
    Turning(f64, f64),
}

/// Which of its cycles.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Sheet {
    /// The circle; of two the outer one.
    First,
    /// The inner one of two circles.
    Inner,
    /// The doubled cycle.
    Doubled,
}

/// A disguised system.
#[derive(Clone, Debug)]
pub struct Planted {
    /// What is beneath.
    pub beneath: Beneath,
    /// Rates of growth of the states beside it.
    pub beside: Vec<f64>,
    /// The disguise.
    pub change: Change,
    /// Factor of all rates.
    pub clock: f64,
    /// Value of the followed parameter where that of the system beneath is 0.
    pub origin: f64,
    /// Its unit.
    pub unit: f64,
}

/// A cycle as it must be found.
#[derive(Clone, Debug)]
pub struct Exact {
    /// Period.
    pub period: f64,
    /// Log-moduli and signs of the multipliers but the trivial one, largest modulus first.
    pub multipliers: Vec<(f64, bool)>,
}

impl Beneath {
    fn n(self) -> usize {
        if matches!(self, Self::Circle(_) | Self::TwoCircles) { 2 } else { 3 }
    }

    fn constants(self) -> [f64; 2] {
        match self {
            Self::Circle(k) => [k, 0.0],
            Self::TwoCircles => [0.0; 2],
            Self::Band(a, b) | Self::Turning(a, b) => [a, b],
        }
    }

    /// Where its threshold is; a circle has none but its birth.
    pub fn threshold(self) -> f64 {
        if self == Self::TwoCircles { -0.25 } else { 0.0 }
    }

    fn exact(self, sheet: Sheet, mu: f64) -> Exact {
        let (period, mut multipliers) = match (self, sheet) {
            (Self::Circle(k), _) => {
                let period = TAU / (1.0 + k * mu);
                (period, vec![(-2.0 * mu * period, false)])
            }
            (Self::TwoCircles, _) => {
                let square = square_of_radius(sheet, mu);
                (TAU, vec![(4.0 * PI * square * (1.0 - 2.0 * square), false)])
            }
            (Self::Band(kap, om), Sheet::Doubled) => {
                let period = 2.0 * TAU / om;
                (period, vec![(-2.0 * mu * period, false), (-(kap + mu) * period, false)])
            }
            (Self::Band(kap, om), _) => (TAU / om, vec![(mu * TAU / om, true), (-kap * TAU / om, true)]),
            (Self::Turning(g, e), Sheet::Doubled) => {
                let period = 2.0 * TAU / (1.0 - e * mu / g);
                (period, vec![(-2.0 * mu * period, false), (-period, false)])
            }
            (Self::Turning(..), _) => (TAU, vec![(TAU * mu, true), (-TAU, true)]),
        };
        multipliers.sort_by(|a, b| b.0.total_cmp(&a.0));
        Exact { period, multipliers }
    }

    /// The state at a share of the period.
    fn orbit(self, sheet: Sheet, mu: f64, share: f64) -> Vec<f64> {
        let turns = if sheet == Sheet::Doubled { 2.0 } else { 1.0 };
        let angle = TAU * turns * share;
        let (sine, cosine) = angle.sin_cos();
        let (half_sine, half_cosine) = (0.5 * angle).sin_cos();
        let amplitude = match (self, sheet) {
            (Self::Band(..), Sheet::Doubled) => mu.sqrt(),
            (Self::Turning(g, _), Sheet::Doubled) => (-mu / g).sqrt(),
            _ => 0.0,
        };
        match self {
            Self::Circle(_) => vec![mu.sqrt() * cosine, mu.sqrt() * sine],
            Self::TwoCircles => {
                let radius = square_of_radius(sheet, mu).sqrt();
                vec![radius * cosine, radius * sine]
            }
            Self::Band(..) | Self::Turning(..) => {
                let radius = 1.0 + amplitude * half_cosine;
                vec![radius * cosine, radius * sine, amplitude * half_sine]
            }
        }
    }

    fn rates<D: DualNum<Primitive = f64> + Copy>(self, mu: D, [a, b]: [D; 2], u: &[D], out: &mut [D]) {
        let (x, y) = (u[0], u[1]);
        let r2 = x * x + y * y;
        match self {
            Self::Circle(_) => {
                let (gap, turn) = (mu - r2, a * r2 + 1.0);
                (out[0], out[1]) = (x * gap - y * turn, y * gap + x * turn);
            }
            Self::TwoCircles => {
                let g = mu + r2 - r2 * r2;
                (out[0], out[1]) = (x * g - y, y * g + x);
            }
            Self::Band(..) => {
                let (kap, om, z) = (a, b, u[2]);
                let r = r2.sqrt();
                let (q, c, s) = (r - 1.0, x / r, y / r);
                let square = (q * q + z * z + c * (q * q - z * z) + s * q * z * 2.0) * 0.5;
                let (half, sum) = ((mu - kap) * 0.5, (mu + kap) * 0.5);
                let outwards = -om * z * 0.5 + half * q + sum * (c * q + s * z) - square * q;
                out[0] = outwards * c - om * y;
                out[1] = outwards * s + om * x;
                out[2] = om * q * 0.5 + half * z + sum * (s * q - c * z) - square * z;
            }
            Self::Turning(..) => {
                let (g, e, z) = (a, b, u[2]);
                let r = r2.sqrt();
                let (q, c, s) = (r - 1.0, x / r, y / r);
                let (more, less) = (c + 1.0, -c + 1.0);
                let square = (more * q * q + s * q * z * 2.0 + less * z * z) * 0.5;
                let (k, w) = (mu + g * square, e * square + 1.0);
                let (along, across) = ((more * q + s * z) * 0.5, (s * q + less * z) * 0.5);
                let outwards = k * along + (s * z - less * q) * 0.5 - w * z * 0.5;
                out[0] = outwards * c - w * y;
                out[1] = outwards * s + w * x;
                out[2] = k * across - (more * z - s * q) * 0.5 + w * q * 0.5;
            }
        }
    }

    /// The same as formulas of the names in `u`, the parameter `mu` and the constants `a` and `b`.
    fn text(self, u: &[String], out: &mut Vec<(String, String)>) -> Vec<String> {
        let mut set = |name: &str, formula: &str| out.push((name.to_owned(), formula.to_owned()));
        let named = |formula: &str| {
            // Names in the formulas below are words between blanks.
            let word = |word: &str| match word {
                "X" => u[0].clone(),
                "Y" => u[1].clone(),
                "Z" => u[2].clone(),
                other => other.to_owned(),
            };
            formula.split(' ').map(word).collect::<Vec<String>>().join(" ")
        };
        set("r2", &named("X ^2 + Y ^2"));
        if self.n() == 3 {
            set("r", "sqrt(r2)");
            set("q", "r - 1");
            set("c", &named("X / r"));
            set("s", &named("Y / r"));
        }
        match self {
            Self::Circle(_) => {
                set("gap", "mu - r2");
                set("turn", "1 + a*r2");
                set("f0", &named("X * gap - Y * turn"));
                set("f1", &named("Y * gap + X * turn"));
            }
            Self::TwoCircles => {
                set("g", "mu + r2 - r2^2");
                set("f0", &named("X * g - Y"));
                set("f1", &named("Y * g + X"));
            }
            Self::Band(..) => {
                set("square", &named("( q^2 + Z ^2 + c*( q^2 - Z ^2) + 2*s*q* Z )/2"));
                set("outwards", &named("-b/2* Z + (mu - a)/2*q + (mu + a)/2*( c*q + s* Z ) - square*q"));
                set("f0", &named("outwards*c - b* Y"));
                set("f1", &named("outwards*s + b* X"));
                set("f2", &named("b/2*q + (mu - a)/2* Z + (mu + a)/2*( s*q - c* Z ) - square* Z"));
            }
            Self::Turning(..) => {
                set("square", &named("( (1 + c)*q^2 + 2*s*q* Z + (1 - c)* Z ^2)/2"));
                set("k", "mu + a*square");
                set("w", "1 + b*square");
                set("along", &named("( (1 + c)*q + s* Z )/2"));
                set("across", &named("( s*q + (1 - c)* Z )/2"));
                set("outwards", &named("k*along + ( s* Z - (1 - c)*q)/2 - w* Z /2"));
                set("f0", &named("outwards*c - w* Y"));
                set("f1", &named("outwards*s + w* X"));
                set("f2", &named("k*across - ( (1 + c)* Z - s*q)/2 + w*q/2"));
            }
        }
        (0..self.n()).map(|i| format!("f{i}")).collect()
    }
}

fn square_of_radius(sheet: Sheet, mu: f64) -> f64 {
    let root = (1.0 + 4.0 * mu).sqrt();
    // The inner one by the product of both, -mu, which loses no digits.
    if sheet == Sheet::Inner { -2.0 * mu / (1.0 + root) } else { 0.5 * (1.0 + root) }
}

impl Planted {
    /// Number of states.
    pub fn n(&self) -> usize {
        self.beneath.n() + self.beside.len()
    }

    /// A random disguise of `beneath`, with up to two states beside it.
    pub fn random(random: &mut Random, beneath: Beneath) -> Self {
        let beside: Vec<f64> = (0..random.below(3)).map(|_| random.either_sign(0.05, 0.6)).collect();
        let n = beneath.n() + beside.len();
        let origin = random.between(-10.0, 10.0);
        let change = Change::random(random, n);
        let (clock, unit) =
            (random.decade(-3.0, 3.0), random.decade(-3.0, 3.0) * if random.coin() { 1.0 } else { -1.0 });
        Self { beneath, beside, change, clock, origin: origin * unit, unit }
    }

    /// The followed parameter where that of the system beneath is `mu`.
    pub fn value(&self, mu: f64) -> f64 {
        self.origin + self.unit * mu
    }

    /// The parameter beneath at a value of the followed one.
    pub fn mu(&self, value: f64) -> f64 {
        (value - self.origin) / self.unit
    }

    /// The exact cycle at a value of the followed parameter.
    pub fn exact(&self, sheet: Sheet, value: f64) -> Exact {
        let mut exact = self.beneath.exact(sheet, self.mu(value));
        exact.multipliers.extend(self.beside.iter().map(|rate| (rate * exact.period, false)));
        exact.multipliers.sort_by(|a, b| b.0.total_cmp(&a.0));
        exact.period /= self.clock;
        exact
    }

    /// State and velocity in scaled time of the exact cycle at a share of its period.
    pub fn orbit(&self, sheet: Sheet, value: f64, share: f64) -> (Vec<f64>, Vec<f64>) {
        let mu = self.mu(value);
        let mut state = self.beneath.orbit(sheet, mu, share);
        let mut velocity = vec![0.0; state.len()];
        self.beneath.rates(mu, self.beneath.constants(), &state, &mut velocity);
        let period = self.beneath.exact(sheet, mu).period;
        velocity.iter_mut().for_each(|v| *v *= period);
        state.resize(self.n(), 0.0);
        velocity.resize(self.n(), 0.0);
        self.change.push(&mut state, &mut velocity);
        (state, velocity)
    }

    /// The exact cycle disturbed by a smooth motion of `share` of its size, its period by as much: a guess.
    pub fn guess(&self, random: &mut Random, (sheet, value): (Sheet, f64), degree: usize, share: f64) -> Profile {
        /// Intervals a turn: enough for any accuracy to start from.
        const INTERVALS: usize = 32;
        let turns = if sheet == Sheet::Doubled { 2 } else { 1 };
        let period = self.exact(sheet, value).period * (1.0 + share * random.between(-1.0, 1.0));
        let mesh = uniform_mesh(INTERVALS * turns);
        let mut profile = Profile { n_states: self.n(), degree, period, mesh, values: Vec::new() };
        let ranges = self.ranges(sheet, value);
        let waves: Vec<(f64, f64)> =
            ranges.iter().map(|range| (share * range * random.between(-1.0, 1.0), random.between(0.0, TAU))).collect();
        for time in profile.node_times() {
            let (state, _) = self.orbit(sheet, value, time);
            profile
                .values
                .extend(state.iter().zip(&waves).map(|(u, (size, phase))| u + size * (TAU * time + phase).sin()));
        }
        profile
    }

    /// Ranges of the states over the exact cycle.
    pub fn ranges(&self, sheet: Sheet, value: f64) -> Vec<f64> {
        const SAMPLES: usize = 256;
        let mut extremes = vec![(f64::INFINITY, f64::NEG_INFINITY); self.n()];
        for k in 0..SAMPLES {
            let (state, _) = self.orbit(sheet, value, k as f64 / SAMPLES as f64);
            extremes.iter_mut().zip(state).for_each(|(e, u)| *e = (e.0.min(u), e.1.max(u)));
        }
        extremes.into_iter().map(|(low, high)| high - low).collect()
    }

    /// Values of all parameters.
    pub fn parameters(&self, value: f64) -> Vec<f64> {
        let [a, b] = self.beneath.constants();
        vec![value, a, b]
    }

    /// As a coded field.
    pub fn coded(&self) -> Arc<dyn VectorField> {
        Arc::new(CodedField::new(Coded(self.clone())))
    }

    /// As a model read from text.
    ///
    /// # Panics
    /// Where the text is refused.
    pub fn model(&self) -> Model {
        let states: Vec<String> = (0..self.n()).map(|i| format!("y{i}")).collect();
        let mut expressions = Vec::new();
        expressions.push(("mu".to_owned(), format!("(p - {})/{}", number(self.origin), number(self.unit))));
        let points = self.change.pull_text(states.clone(), &mut expressions);
        let x = points.last().expect("it starts with y").clone();
        let mut velocity = self.beneath.text(&x, &mut expressions);
        velocity
            .extend(self.beside.iter().zip(&x[self.beneath.n()..]).map(|(rate, x)| format!("{}*{x}", number(*rate))));
        let rates = self.change.push_text(velocity, &points, &mut expressions);
        let quoted = |pairs: Vec<(String, String)>| -> String {
            pairs.iter().map(|(name, formula)| format!("        \"{name}\": \"{formula}\",\n")).collect()
        };
        let begin = self.orbit(Sheet::First, self.value(0.1), 0.0).0;
        let declared: String =
            states.iter().zip(&begin).map(|(name, u)| format!("\"{name}\": (begin: {u:?}), ")).collect();
        let rates = states.into_iter().zip(rates).map(|(y, v)| (y, format!("{}*({v})", number(self.clock)))).collect();
        let [a, b] = self.beneath.constants();
        let text = format!(
            "(\n    states: {{ {declared}}},\n    parameters: {{ \"p\": (value: {:?}), \"a\": (value: {a:?}), \"b\": (value: {b:?}) }},\n    \
             expressions: {{\n{}    }},\n    rates: {{\n{}    }},\n)\n",
            self.value(0.1),
            quoted(expressions),
            quoted(rates)
        );
        Model::parse(&text, "planted.model.ron").unwrap_or_else(|fault| panic!("{fault}\n{text}"))
    }
}

/// The rates in Rust.
struct Coded(Planted);

impl DualRates for Coded {
    fn n_states(&self) -> usize {
        self.0.n()
    }

    fn n_parameters(&self) -> usize {
        3
    }

    fn rates<D: DualNum<Primitive = f64> + Copy>(&self, _t: D, y: &[D], p: &[D], out: &mut [D]) {
        let planted = &self.0;
        // States of a planted system are few.
        let mut x = y.to_vec();
        planted.change.pull(&mut x);
        let mu = (p[0] - planted.origin) / planted.unit;
        let n = planted.beneath.n();
        planted.beneath.rates(mu, [p[1], p[2]], &x[..n], &mut out[..n]);
        for (beside, rate) in planted.beside.iter().enumerate() {
            out[n + beside] = x[n + beside] * *rate;
        }
        planted.change.push(&mut x, out);
        out.iter_mut().for_each(|v| *v *= D::from(planted.clock));
    }
}
