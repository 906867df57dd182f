//! Small models and comparisons shared by the tests of this crate.

use armilla_model::{Batch, Direction, Evaluator, Gradient, Linearisation, Model, ModelError};

/// The generator SplitMix64 (Steele, Lea & Flood 2014, OOPSLA).
pub struct Random(pub u64);

impl Random {
    pub fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    pub fn below(&mut self, count: usize) -> usize {
        (self.next() % count as u64) as usize
    }

    /// Uniform in [-1, 1).
    pub fn symmetric(&mut self) -> f64 {
        (self.next() >> 11) as f64 / (1_u64 << 52) as f64 - 1.0
    }

    pub fn vector(&mut self, count: usize) -> Vec<f64> {
        (0..count).map(|_| self.symmetric()).collect()
    }

    pub fn choose<'a>(&mut self, from: &[&'a str]) -> &'a str {
        from[self.below(from.len())]
    }
}

/// States as (name, begin, rate), parameters as (name, value), period of a forcing or nothing.
pub fn try_model_of(
    states: &[(&str, f64, &str)],
    parameters: &[(&str, f64)],
    forcing: &str,
) -> Result<Model, ModelError> {
    let begin: String = states.iter().map(|(name, begin, _)| format!("\"{name}\": (begin: {begin:?}),")).collect();
    let rates: String = states.iter().map(|(name, _, rate)| format!("\"{name}\": \"{rate}\",")).collect();
    let values: String = parameters.iter().map(|(name, value)| format!("\"{name}\": (value: {value:?}),")).collect();
    let forcing = if forcing.is_empty() { String::new() } else { format!("forcing: (period: {forcing}),") };
    let text = format!("(states: {{{begin}}}, parameters: {{{values}}}, rates: {{{rates}}}, {forcing})");
    Model::parse(&text, "test.model.ron")
}

pub fn model_of(states: &[(&str, f64, &str)], parameters: &[(&str, f64)], forcing: &str) -> Model {
    try_model_of(states, parameters, forcing).unwrap_or_else(|error| panic!("{error}"))
}

pub fn one_state(rate: &str, begin: f64) -> Model {
    model_of(&[("x", begin, rate)], &[], "")
}

/// Rates, Jacobian values and columns of all parameters.
pub struct AtStart {
    pub rates: Vec<f64>,
    pub jacobian: Vec<f64>,
    pub columns: Vec<f64>,
}

/// Linearisation at the start of a model that is not forced.
pub fn linearised(model: &Model) -> AtStart {
    let field = model.field();
    let n = field.n_states();
    let all: Vec<_> = (0..field.n_parameters()).map(armilla_model::Column::Parameter).collect();
    let mut at =
        AtStart { rates: vec![0.0; n], jacobian: vec![0.0; field.pattern().nnz()], columns: vec![0.0; n * all.len()] };
    let (states, parameters) = (model.begin(), model.values());
    let batch = Batch { len: 1, time: &[], states: &states, parameters: &parameters };
    let out = Linearisation { rates: &mut at.rates, jacobian: &mut at.jacobian, columns: &mut at.columns };
    field.evaluator(&all).linearise(batch, out);
    at
}

/// Everything an evaluator gives for a batch, with directions made from the states.
#[derive(Debug)]
pub struct Everything(pub Vec<(&'static str, Vec<f64>)>);

impl Everything {
    pub fn of(evaluator: &mut dyn Evaluator, at: Batch<'_>, columns: usize, nonzeros: usize) -> Self {
        let size = at.states.len();
        let n = size / at.len;
        // Directions depend on the point only, so that a point alone has the same ones.
        let made = |factor: f64, count: usize| -> Vec<f64> {
            (0..count * at.len).map(|i| factor + at.states[i % size]).collect()
        };
        let (mut rates, mut jacobian, mut in_columns) =
            (vec![0.0; size], vec![0.0; nonzeros * at.len], vec![0.0; columns * size]);
        let out = Linearisation { rates: &mut rates, jacobian: &mut jacobian, columns: &mut in_columns };
        evaluator.linearise(at, out);
        let parts: Vec<_> = [0.3, -0.8, 1.1].iter().map(|f| (made(*f, n), made(-f, columns))).collect();
        let [u, v, w] = [0, 1, 2].map(|d: usize| Direction { states: &parts[d].0, columns: &parts[d].1 });
        let (mut plain, mut second, mut third) = (vec![0.0; size], vec![0.0; size], vec![0.0; size]);
        evaluator.rates(at, &mut plain);
        evaluator.second(at, u, v, &mut second);
        evaluator.third(at, [u, v, w], &mut third).expect("third derivatives");
        let (mut states_gradient, mut columns_gradient) = (vec![0.0; size], vec![0.0; columns * at.len]);
        let out = Gradient { states: &mut states_gradient, columns: &mut columns_gradient };
        evaluator.second_gradient(at, &made(0.5, n), v, out);
        Self(vec![
            ("rates", rates),
            ("plain rates", plain),
            ("jacobian", jacobian),
            ("columns", in_columns),
            ("second", second),
            ("third", third),
            ("states gradient", states_gradient),
            ("columns gradient", columns_gradient),
        ])
    }

    /// Point k of this batch of `len` equals the one point of `alone`.
    pub fn assert_point(&self, k: usize, len: usize, alone: &Self, allowed: f64) {
        for ((name, all), (_, one)) in self.0.iter().zip(&alone.0) {
            for (i, expected) in one.iter().enumerate() {
                let found = all[i * len + k];
                let size = expected.abs().max(1.0);
                assert!(
                    (found - expected).abs() <= allowed * size,
                    "{name} {i}, point {k} of {len}: {found} for {expected}"
                );
            }
        }
    }
}

/// A formula of x, y, a, k with all operations.
pub fn random_formula(random: &mut Random, depth: usize) -> String {
    if depth == 0 || random.below(8) == 0 {
        return random.choose(&["x", "y", "a", "k", "x", "y", "2", "0.5", "1.7", "3", "pi"]).to_owned();
    }
    let a = random_formula(random, depth - 1);
    match random.below(10) {
        0..=5 => {
            let b = random_formula(random, depth - 1);
            let operator = random.choose(&["+", "-", "*", "/", "*", "+"]);
            format!("({a}){operator}({b})")
        }
        6 => format!("({a})^{}", random.choose(&["2", "3", "-1", "-2", "0.5", "1.5", "(x/2)", "k"])),
        7 => format!("-({a})"),
        8 => {
            let b = random_formula(random, depth - 1);
            format!("{}({a}, {b})", random.choose(&["atan2", "min", "max", "pow"]))
        }
        _ => {
            let functions = [
                "sin", "cos", "tan", "atan", "sinh", "cosh", "tanh", "exp", "expm1", "log", "log1p", "log10", "sqrt",
                "cbrt", "abs", "floor", "asin", "acos",
            ];
            format!("{}({a})", random.choose(&functions))
        }
    }
}
