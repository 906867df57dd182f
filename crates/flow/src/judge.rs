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

/// Returns over which the growth is measured, in this many parts whose scatter gives the spread.
pub(crate) const JUDGED_RETURNS: usize = 1000;
const PARTS: usize = 20;
/// Logarithm of a growth that no torus shows: the shear of a torus gives at most a growth in proportion to
/// the number of returns, e^7 here, times a bounded factor.
const BEYOND_SHEAR: f64 = 20.0;
const SHEAR: f64 = 12.0;
/// Standard deviations that a growth must be away from zero.
const SURE: f64 = 4.0;
/// A quasi-periodic motion has come back within this part of the range, and the stretch filled by its
/// returns keeps its size within this part from the first half to the second.
const NEAR: f64 = 0.1;
const SAME_STRETCH: f64 = 0.05;

/// Growth across the flow over the next returns to `section`, which are appended to `returns`.
pub(crate) fn exponent(
    integrator: &mut Integrator<'_>,
    section: Section,
    scale: &[f64],
    returns: &mut Vec<Return>,
) -> Result<Option<Exponent>, FlowError> {
    let mut tangent = Tangent::new(scale, matches!(section, Section::Level { .. }));
    let begin = integrator.time();
    let per_part = JUDGED_RETURNS / PARTS;
    let mut rates = Vec::with_capacity(PARTS);
    let mut total = 0.0;
    let (mut part_begin, mut part_growth, mut aim) = (begin, 0.0, returns.len() + per_part);
    while rates.len() < PARTS {
        integrator.advance()?;
        let Some(growth) = tangent.carry(integrator) else { return Ok(None) };
        part_growth += growth;
        section.returns(integrator, returns);
        if returns.len() >= aim {
            rates.push(part_growth / (integrator.time() - part_begin));
            total += part_growth;
            (part_begin, part_growth, aim) = (integrator.time(), 0.0, returns.len() + per_part);
        }
    }
    let time = integrator.time() - begin;
    let mean = rates.iter().sum::<f64>() / PARTS as f64;
    let scatter: f64 = rates.iter().map(|rate| (rate - mean).powi(2)).sum::<f64>() / (PARTS - 1) as f64;
    Ok(Some(Exponent { value: total / time, spread: (scatter / PARTS as f64).sqrt(), time }))
}

/// The kind of motion, from its growth, its nearest return and the returns that were judged.
pub(crate) fn kind(exponent: Exponent, nearest: f64, returns: &[Return], scale: &[f64]) -> Kind {
    let growth = exponent.value * exponent.time;
    if growth > BEYOND_SHEAR && exponent.value > SURE * exponent.spread {
        return Kind::Irregular;
    }
    let (first, second) = returns.split_at(returns.len() / 2);
    let same = (0..scale.len()).all(|i| {
        let (a, b) = (stretch(first, i), stretch(second, i));
        // The state that defines the section does not move on it.
        (a - b).abs() <= SAME_STRETCH * a.max(b) || a.max(b) <= SAME_STRETCH * nearest * scale[i]
    });
    if growth.abs() <= SHEAR && nearest <= NEAR && same { Kind::QuasiPeriodic } else { Kind::Undecided }
}

/// Range of a state over some returns.
fn stretch(returns: &[Return], i: usize) -> f64 {
    let values = || returns.iter().map(|one| one.state[i]);
    values().fold(f64::NEG_INFINITY, f64::max) - values().fold(f64::INFINITY, f64::min)
}
