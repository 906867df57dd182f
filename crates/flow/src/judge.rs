//! Motions that never close: whether they are quasi-periodic or irregular.
//!
//! A disturbance is carried along for some thousand returns and its rate of growth across the flow, the
//! largest Lyapunov exponent but the trivial one, is measured with its spread (Benettin, Galgani, Giorgilli
//! & Strelcyn 1980, Meccanica 15:9, here by the variational equation). Irregular: it is positive beyond its
//! spread, and the disturbance has grown by far more than the shear of a torus can make of it.
//! Quasi-periodic: the growth is that of shear at most, the motion comes back near, and its returns go on to
//! fill the same stretch. Anything else is left undecided.

use crate::error::FlowError;
use crate::integrator::Integrator;
use crate::returns::Sequence;
use crate::section::{Return, Section};
use crate::tangent::Tangent;

/// A rate of growth, per unit of time, with one standard deviation.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Exponent {
    /// The rate.
    pub value: f64,
    /// Its standard deviation, from the scatter of its parts.
    pub spread: f64,
    /// Time over which it was measured.
    pub time: f64,
}

/// What kind of motion it is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Kind {
    QuasiPeriodic,
    Irregular,
    Undecided,
}

/// Returns over which the growth is measured at a time, in this many parts whose scatter gives the spread, and
/// how many times it is continued while nothing can be said.
const ROUND: usize = 1000;
const PARTS: usize = 20;
const ROUNDS: usize = 4;
/// Logarithm of a growth that no torus shows: the shear of a torus gives a growth in proportion to the number of
/// returns, e^7 to e^8 here, times a factor of order one.
const BEYOND_SHEAR: f64 = 20.0;
/// Standard deviations that a growth must be away from zero.
const SURE: f64 = 4.0;
/// A quasi-periodic motion has come back within this part of the range; the ways of its returns to the ones that
/// come nearest go more than once round the closed curve that they fill, some three extents long; and the
/// stretch filled keeps its size within this part from the first half to the second. A slow drift does none of the
/// last two.
const NEAR: f64 = 0.1;
const LAPS: f64 = 3.3;
const SAME_STRETCH: f64 = 0.01;

/// Watches a motion until its kind is clear or the rounds are spent. The returns judged are left in `returns`;
/// `scale` holds the range of each state.
pub(crate) fn judge(
    integrator: &mut Integrator<'_>,
    section: Section,
    scale: &[f64],
    returns: &mut Vec<Return>,
) -> Result<(Kind, Option<Exponent>), FlowError> {
    returns.clear();
    let exact = vec![0.0; scale.len()];
    let mut growth = Growth {
        tangent: Tangent::new(scale, matches!(section, Section::Level { .. })),
        begin: integrator.time(),
        rates: Vec::new(),
        total: 0.0,
    };
    for _ in 0..ROUNDS {
        if !growth.measure(integrator, section, returns)? {
            break;
        }
        let exponent = growth.exponent(integrator.time());
        let kind = kind(exponent, &Sequence { returns, scale, noise: &exact });
        if kind != Kind::Undecided {
            return Ok((kind, Some(exponent)));
        }
    }
    let measured = !growth.rates.is_empty();
    Ok((Kind::Undecided, measured.then(|| growth.exponent(integrator.time()))))
}

/// Growth measured so far.
struct Growth {
    tangent: Tangent,
    begin: f64,
    /// Rate in each part.
    rates: Vec<f64>,
    total: f64,
}

impl Growth {
    /// One round; false where the disturbance could not be carried on.
    fn measure(
        &mut self,
        integrator: &mut Integrator<'_>,
        section: Section,
        returns: &mut Vec<Return>,
    ) -> Result<bool, FlowError> {
        for _ in 0..PARTS {
            let (begin, aim) = (integrator.time(), returns.len() + ROUND / PARTS);
            let mut part = 0.0;
            while returns.len() < aim {
                integrator.advance()?;
                let Some(growth) = self.tangent.carry(integrator) else { return Ok(false) };
                part += growth;
                section.returns(integrator, returns);
            }
            self.rates.push(part / (integrator.time() - begin));
            self.total += part;
        }
        Ok(true)
    }

    fn exponent(&self, now: f64) -> Exponent {
        let (count, time) = (self.rates.len() as f64, now - self.begin);
        let mean = self.rates.iter().sum::<f64>() / count;
        let scatter = self.rates.iter().map(|rate| (rate - mean).powi(2)).sum::<f64>() / (count - 1.0);
        Exponent { value: self.total / time, spread: (scatter / count).sqrt(), time }
    }
}

/// The kind of motion, from its growth and the returns over which it was measured.
fn kind(exponent: Exponent, judged: &Sequence<'_>) -> Kind {
    let growth = exponent.value * exponent.time;
    if growth > BEYOND_SHEAR && exponent.value > SURE * exponent.spread {
        return Kind::Irregular;
    }
    let Some(nearest) = judged.nearest() else { return Kind::Undecided };
    let (first, second) = judged.returns.split_at(judged.returns.len() / 2);
    let same = (0..judged.scale.len()).all(|i| {
        let (a, b) = (stretch(first, i), stretch(second, i));
        // The state that defines the section does not move on it.
        (a - b).abs() <= SAME_STRETCH * a.max(b) || a.max(b) <= SAME_STRETCH * nearest.distance * judged.scale[i]
    });
    let is_round = nearest.distance <= NEAR && judged.laps(nearest.returns) >= LAPS;
    let shear = (judged.returns.len() as f64).ln();
    if growth.abs() <= shear && is_round && same { Kind::QuasiPeriodic } else { Kind::Undecided }
}

/// Range of a state over some returns.
fn stretch(returns: &[Return], i: usize) -> f64 {
    let values = || returns.iter().map(|one| one.state[i]);
    values().fold(f64::NEG_INFINITY, f64::max) - values().fold(f64::INFINITY, f64::min)
}
