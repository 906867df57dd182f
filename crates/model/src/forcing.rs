//! Whether the rates repeat with the period that a model states for its forcing.
//!
//! `f(t + P, x, p) = f(t, x, p)` is compared at times all over one period and at states around the start. What roundoff may
//! do is a change of the time by some units in its last place, so the comparison is relative to the sizes of f and of
//! `P df/dt`.

use crate::field::{Batch, Column, Linearisation};
use crate::model::Model;
use crate::sample::Random;

/// Times compared; a pulse shorter than a hundredth of the period may be missed.
const TIMES: usize = 64;
/// States compared: the start, and two around it.
const STATES: usize = 3;
/// Largest relative difference taken for roundoff: a period given in eleven digits passes.
const ROUNDOFF: f64 = 1e-11;
/// Relative displacement of the states from the start.
const SPREAD: f64 = 0.5;
/// Displacement of a state that starts at zero.
const SIZE_OF_ZERO: f64 = 1.0;

/// Why the forcing of a model does not hold for some values of its parameters.
#[derive(Clone, Debug, PartialEq)]
pub enum ForcingFault {
    /// Its period is not a positive finite number.
    Period {
        /// What it is.
        period: f64,
    },
    /// A rate differs one period later.
    NotPeriodic {
        /// Name of the state whose rate it is.
        state: String,
        /// The period.
        period: f64,
        /// A time at which they differ.
        time: f64,
        /// The rate then, and one period later.
        rates: [f64; 2],
    },
}

impl std::fmt::Display for ForcingFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Period { period } => write!(f, "the period of the forcing is {period}"),
            Self::NotPeriodic { state, period, time, rates: [now, later] } => write!(
                f,
                "the rate of `{state}` does not repeat with the period of the forcing, {period}: it is {} at t = {} and {} \
                 one period later",
                short(*now),
                short(*time),
                short(*later)
            ),
        }
    }
}

/// A number for a sentence.
fn short(value: f64) -> f64 {
    format!("{value:.5e}").parse().unwrap_or(value)
}

impl std::error::Error for ForcingFault {}

impl ForcingFault {
    /// What to do about it.
    pub fn help(&self) -> &'static str {
        match self {
            Self::Period { .. } => "it must be positive and finite",
            Self::NotPeriodic { .. } => {
                "state a period after which everything that uses `t` repeats, as in `forcing: (period: \"2*pi/omega\")` \
                 for cos(omega*t)"
            }
        }
    }
}

impl Model {
    /// Checks that the rates repeat with the period of the forcing for these parameters; nothing to check where the model
    /// is not forced.
    ///
    /// # Errors
    /// [`ForcingFault`].
    ///
    /// # Panics
    /// If the number of parameters is not that of the model.
    pub fn check_forcing(&self, parameters: &[f64]) -> Result<(), ForcingFault> {
        let Some([period, ..]) = self.field.forcing_period(parameters, 0) else { return Ok(()) };
        if !(period.is_finite() && period > 0.0) {
            return Err(ForcingFault::Period { period });
        }
        let states = self.states_around_start();
        let now = self.at_times(&states, parameters, |share| period * share);
        let later = self.at_times(&states, parameters, |share| period * (share + 1.0));
        let len = TIMES * STATES;
        for (index, state) in self.states.iter().enumerate() {
            let of = index * len..(index + 1) * len;
            let size = |values: &[f64]| {
                values[of.clone()].iter().filter(|x| x.is_finite()).fold(0.0f64, |size, x| size.max(x.abs()))
            };
            let allowed = ROUNDOFF * (size(&now.rates) + period * size(&now.slopes));
            for place in of.clone() {
                let rates = [now.rates[place], later.rates[place]];
                // Outside the domain of a formula nothing can be compared.
                if rates.iter().all(|rate| rate.is_finite()) && (rates[0] - rates[1]).abs() > allowed {
                    let time = period * share_of(place - index * len);
                    return Err(ForcingFault::NotPeriodic { state: state.name.clone(), period, time, rates });
                }
            }
        }
        Ok(())
    }

    /// All states at all points, structure of arrays.
    fn states_around_start(&self) -> Vec<f64> {
        /// Any fixed number: the same model gives the same words.
        const SEED: u64 = 1;
        let mut random = Random(SEED);
        let len = TIMES * STATES;
        let mut states = vec![0.0; self.states.len() * len];
        for (state, values) in self.states.iter().zip(states.chunks_exact_mut(len)) {
            let size = if state.begin == 0.0 { SIZE_OF_ZERO } else { state.begin.abs() };
            for (around, values) in values.chunks_exact_mut(TIMES).enumerate() {
                let shift = if around == 0 { 0.0 } else { SPREAD * size * random.symmetric() };
                values.fill(state.begin + shift);
            }
        }
        states
    }

    fn at_times(&self, states: &[f64], parameters: &[f64], time: impl Fn(f64) -> f64) -> Sampled {
        let (n, len) = (self.states.len(), TIMES * STATES);
        let time: Vec<f64> = (0..len).map(|place| time(share_of(place))).collect();
        let (mut rates, mut slopes) = (vec![0.0; n * len], vec![0.0; n * len]);
        let mut jacobian = vec![0.0; self.field.pattern().nnz() * len];
        let out = Linearisation { rates: &mut rates, jacobian: &mut jacobian, columns: &mut slopes };
        self.field.evaluator(&[Column::Time]).linearise(Batch { len, time: &time, states, parameters }, out);
        Sampled { rates, slopes }
    }
}

/// Rates and their slopes in time.
struct Sampled {
    rates: Vec<f64>,
    slopes: Vec<f64>,
}

/// Share of the period at a place: an equidistributed sequence (Weyl 1916, Math. Ann. 77:313).
fn share_of(place: usize) -> f64 {
    const IRRATIONAL: f64 = 0.618_033_988_749_894_8;
    (((place % TIMES) as f64 + 0.5) * IRRATIONAL).fract()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn model(rate: &str, period: &str) -> Result<Model, String> {
        let text = format!(
            r#"(
    states: {{ "x": (begin: 0.5), "y": (begin: 0) }},
    parameters: {{ "omega": (value: 1.5), "a": (value: 2) }},
    rates: {{ "x": "{rate}", "y": "x - y" }},
    forcing: (period: "{period}"),
)"#
        );
        Model::parse(&text, "forced.model.ron").map_err(|error| error.to_string())
    }

    #[test]
    fn whole_multiples_of_the_shortest_period_pass() {
        for (rate, period) in [
            ("a*cos(omega*t) - x", "2*pi/omega"),
            ("a*cos(omega*t) - x", "6*pi/omega"),
            ("1e6*x*sin(omega*t)^2 - 1e6*x", "pi/omega"),
            ("exp(20*cos(omega*t)) - x", "2*pi/omega"),
            ("t*omega - floor(t*omega) - x", "1/omega"),
            ("log(x - 0.4)*sin(2*pi*t)", "1"),
        ] {
            assert!(model(rate, period).is_ok(), "{rate} {period}: {:?}", model(rate, period).err());
        }
    }

    #[test]
    fn a_wrong_period_is_refused_with_its_place() {
        for (rate, period) in [
            ("a*cos(omega*t) - x", "2*pi"),
            ("a*cos(omega*t) - x", "pi/omega"),
            ("a*cos(omega*t) - x", "4.1887902"),
            ("x*exp(-t)", "2*pi"),
            ("t - x", "1"),
            // A pulse that lasts a fiftieth of the period.
            ("exp(-1000*(1 - cos(omega*t))) - x", "3*pi/omega"),
        ] {
            let error = model(rate, period).err().unwrap_or_else(|| panic!("{rate} repeats with {period}"));
            assert!(error.contains("forced.model.ron:5:") && error.contains("`x`"), "{error}");
            assert!(error.contains("one period later") && error.contains("help: state a period"), "{error}");
        }
    }

    /// By hand: cos(2 t) repeats with 2 pi, cos(1.5 t) does not.
    #[test]
    fn other_values_are_checked_when_they_are_asked_for() {
        let model = model("a*cos(2*omega*t/1.5) - x", "2*pi").expect("periodic with the values of the file");
        assert_eq!(model.check_forcing(&[1.5, 7.0]), Ok(()));
        assert!(matches!(model.check_forcing(&[1.0, 2.0]), Err(ForcingFault::NotPeriodic { .. })));
    }
}
