//! Cycles planted with known multipliers.

use std::f64::consts::TAU;

use armilla_model::Model;
use armilla_record::{Point, Profile};
use armilla_stability::{CycleProblem, CycleSettings, CycleSpec, SpectrumFault};

/// A circle of radius 1 and period 2 pi with linear states beside it.
#[derive(Clone)]
pub struct Planted {
    radial: f64,
    /// Right sides of the linear states, in the names `o0` (cosine), `o1` (sine), `o2`, ...
    rates: Vec<String>,
    mixed: bool,
}

impl Planted {
    /// A circle with the multiplier exp(-2 pi `radial`).
    pub fn new(radial: f64) -> Self {
        Self { radial, rates: Vec::new(), mixed: false }
    }

    /// A state that decays at the rate `k`: multiplier exp(-2 pi k).
    pub fn decay(self, k: f64) -> Self {
        self.swaying(-k, 0.0)
    }

    /// A state that grows at the rate `mean + sway cos th`: multiplier exp(2 pi mean).
    pub fn swaying(mut self, mean: f64, sway: f64) -> Self {
        let own = format!("o{}", self.rates.len() + 2);
        self.rates.push(format!("({mean:?} + ({sway:?}) * o0) * {own}"));
        self
    }

    /// Two states whose eigendirections, of rates `a` and `b`, turn round with the cycle: multipliers exp(2 pi a),
    /// exp(2 pi b). With `half` they make half a turn only: both multipliers negative.
    pub fn turning(mut self, a: f64, b: f64, half: bool) -> Self {
        let (p, q) = (format!("o{}", self.rates.len() + 2), format!("o{}", self.rates.len() + 3));
        // R(phi) diag(a, b) R(-phi) + phi' J with phi = th or th/2; cosine and sine of 2 phi from those of th.
        let (cosine, sine, speed) = if half { ("o0", "o1", 0.5) } else { ("(o0^2 - o1^2)", "(2*o0*o1)", 1.0) };
        let (mean, half_difference) = (0.5 * (a + b), 0.5 * (a - b));
        self.rates.push(format!(
            "({mean:?} + ({half_difference:?})*{cosine}) * {p} + (({half_difference:?})*{sine} - {speed:?}) * {q}"
        ));
        self.rates.push(format!(
            "(({half_difference:?})*{sine} + {speed:?}) * {p} + ({mean:?} - ({half_difference:?})*{cosine}) * {q}"
        ));
        self
    }

    /// Two states that wind round each other at the rate `speed` while they grow at the rate `growth`: multipliers
    /// exp(2 pi (growth ± i speed)).
    pub fn winding(mut self, growth: f64, speed: f64) -> Self {
        let (p, q) = (format!("o{}", self.rates.len() + 2), format!("o{}", self.rates.len() + 3));
        self.rates.push(format!("({growth:?})*{p} - {speed:?}*{q}"));
        self.rates.push(format!("{speed:?}*{p} + ({growth:?})*{q}"));
        self
    }

    /// Whether everything is mixed by a constant matrix.
    pub fn mixed(mut self, mixed: bool) -> Self {
        self.mixed = mixed;
        self
    }

    fn n(&self) -> usize {
        self.rates.len() + 2
    }

    /// S and its inverse: a lower times an upper unit triangle, both with halves and quarters beside the diagonal.
    fn mixing(&self) -> (Vec<Vec<f64>>, Vec<Vec<f64>>) {
        let n = self.n();
        let unit = |f: &dyn Fn(usize, usize) -> f64| -> Vec<Vec<f64>> {
            (0..n).map(|i| (0..n).map(|j| if i == j { 1.0 } else { f(i, j) }).collect()).collect()
        };
        if !self.mixed {
            return (unit(&|_, _| 0.0), unit(&|_, _| 0.0));
        }
        let entry = |i: usize, j: usize| if (i + 2 * j).is_multiple_of(3) { -0.25 } else { 0.5 };
        let lower = unit(&|i, j| if i > j { entry(i, j) } else { 0.0 });
        let upper = unit(&|i, j| if i < j { -entry(i, j) } else { 0.0 });
        (product(&lower, &upper), product(&inverse_upper(&upper), &inverse_lower(&lower)))
    }

    /// The model file.
    pub fn text(&self) -> String {
        let n = self.n();
        let (mix, unmix) = self.mixing();
        let sum = |row: &[f64], name: &str| {
            let terms = row.iter().enumerate().filter(|(_, factor)| **factor != 0.0);
            terms.map(|(k, factor)| format!("({factor:?})*{name}{k}")).collect::<Vec<_>>().join(" + ")
        };
        let mut rates =
            vec![format!("(lift + {:?}*gap)*o0 - o1", self.radial), format!("(lift + {:?}*gap)*o1 + o0", self.radial)];
        rates.extend(self.rates.iter().cloned());
        let list = |make: &dyn Fn(usize) -> String| (0..n).map(make).collect::<Vec<_>>().join(", ");
        format!(
            "(states: {{ {} }}, parameters: {{ \"lift\": (value: 0) }}, expressions: {{ {}, \"gap\": \"(1 - o0^2 - o1^2)/2\", {} }}, rates: {{ {} }})",
            list(&|i| format!("\"s{i}\": (begin: 1)")),
            list(&|i| format!("\"o{i}\": \"{}\"", sum(&unmix[i], "s"))),
            list(&|i| format!("\"f{i}\": \"{}\"", rates[i])),
            list(&|i| format!("\"s{i}\": \"{}\"", sum(&mix[i], "f"))),
        )
    }

    /// The cycle, described.
    pub fn describe(&self, accuracy: f64) -> Result<Point, SpectrumFault> {
        let model = Model::parse(&self.text(), "planted").unwrap_or_else(|fault| panic!("{fault}"));
        let (n, settings) = (self.n(), CycleSettings::new(accuracy));
        let mesh: Vec<f64> = (0..=24).map(|i| i as f64 / 24.0).collect();
        let mut profile = Profile { n_states: n, degree: settings.degree, period: TAU, mesh, values: Vec::new() };
        let (mix, _) = self.mixing();
        for time in profile.node_times() {
            let (sine, cosine) = (TAU * time).sin_cos();
            profile.values.extend(mix.iter().map(|row| row[0] * cosine + row[1] * sine));
        }
        let spec = CycleSpec {
            field: model.field(),
            parameters: model.values(),
            free: 0,
            typical: vec![0.0; n],
            parameter_scale: 1.0,
        };
        let (mut problem, cycle) =
            CycleProblem::start(spec, settings, &profile, 0.0).unwrap_or_else(|fault| panic!("{fault}"));
        problem.describe(&cycle, 1, 0.0)
    }
}

fn product(a: &[Vec<f64>], b: &[Vec<f64>]) -> Vec<Vec<f64>> {
    let n = a.len();
    (0..n).map(|i| (0..n).map(|j| (0..n).map(|k| a[i][k] * b[k][j]).sum()).collect()).collect()
}

/// Inverse of a unit upper triangle, exact here: sums and products of few binary digits.
fn inverse_upper(upper: &[Vec<f64>]) -> Vec<Vec<f64>> {
    let n = upper.len();
    let mut inverse = vec![vec![0.0; n]; n];
    for column in 0..n {
        for i in (0..n).rev() {
            let sum: f64 = (i + 1..n).map(|k| upper[i][k] * inverse[k][column]).sum();
            inverse[i][column] = if i == column { 1.0 } else { 0.0 } - sum;
        }
    }
    inverse
}

fn inverse_lower(lower: &[Vec<f64>]) -> Vec<Vec<f64>> {
    let transposed =
        |a: &[Vec<f64>]| -> Vec<Vec<f64>> { (0..a.len()).map(|i| (0..a.len()).map(|j| a[j][i]).collect()).collect() };
    transposed(&inverse_upper(&transposed(lower)))
}
