//! Returns to a section, located to the accuracy of the steps themselves.
//!
//! A section is a level of one state, crossed upward, or a multiple of a forcing period. A crossing is
//! bracketed by looking at the dense output in several places of a step, refined on it, and then landed on
//! by a shorter step and one correction along the flow: with g the distance to the level and f the rates,
//! `t -= g/f_i`, `x -= f g/f_i`. The dense output leaves g of the size of its own error, so the correction
//! leaves its square.

use crate::integrator::Integrator;

/// Where returns are taken.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Section {
    /// Upward crossings of `level` by the state with this index.
    Level {
        /// Index of the state.
        state_index: usize,
        /// The level.
        level: f64,
    },
    /// Whole multiples of a forcing period.
    Period {
        /// The period.
        period: f64,
    },
}

/// One return to a section.
#[derive(Clone, Debug, PartialEq)]
pub struct Return {
    /// When.
    pub time: f64,
    /// Where.
    pub state: Vec<f64>,
}

/// Places of a step where the sign is looked at: a wave shorter than a step over this number is not
/// resolved by the integration either.
const LOOKS: usize = 8;
/// Halvings (in effect) of a bracket of one eighth of a step: down to the last bit.
const REFINEMENTS: usize = 60;

impl Section {
    /// Appends the returns inside the last step of `integrator` to `found`, in order of time.
    pub fn returns(&self, integrator: &mut Integrator<'_>, found: &mut Vec<Return>) {
        match *self {
            Self::Level { state_index, level } => crossings(integrator, state_index, level, found),
            Self::Period { period } => multiples(integrator, period, found),
        }
    }
}

fn crossings(integrator: &mut Integrator<'_>, state_index: usize, level: f64, found: &mut Vec<Return>) {
    let mut point = vec![0.0; integrator.state().len()];
    let mut before = integrator.previous_state()[state_index] - level;
    for look in 1..=LOOKS {
        let theta = look as f64 / LOOKS as f64;
        let here = if look == LOOKS {
            integrator.state()[state_index] - level
        } else {
            integrator.dense(theta, &mut point);
            point[state_index] - level
        };
        if before < 0.0 && here >= 0.0 {
            let low = (look - 1) as f64 / LOOKS as f64;
            let place = refine(integrator, (low, theta), (before, here), (state_index, level));
            found.push(land_on_level(integrator, place, state_index, level));
        }
        before = here;
    }
}

/// Place of the crossing in the dense output: false position, kept from stalling by halving the weight of
/// the end that stays (the Illinois rule, Dowell & Jarratt 1971, BIT 11:168).
fn refine(integrator: &Integrator<'_>, ends: (f64, f64), values: (f64, f64), level: (usize, f64)) -> f64 {
    let (mut low, mut high) = ends;
    let (mut below, mut above) = values;
    let mut point = vec![0.0; integrator.state().len()];
    let mut stayed = 0;
    for _ in 0..REFINEMENTS {
        let place = (low * above - high * below) / (above - below);
        if !(low < place && place < high) {
            break;
        }
        integrator.dense(place, &mut point);
        let value = point[level.0] - level.1;
        if value >= 0.0 {
            (high, above) = (place, value);
            if stayed == -1 {
                below *= 0.5;
            }
            stayed = -1;
        } else {
            (low, below) = (place, value);
            if stayed == 1 {
                above *= 0.5;
            }
            stayed = 1;
        }
        if value == 0.0 {
            break;
        }
    }
    high
}

fn land_on_level(integrator: &mut Integrator<'_>, place: f64, state_index: usize, level: f64) -> Return {
    let n = integrator.state().len();
    let (start, length) = (integrator.previous_time(), integrator.time() - integrator.previous_time());
    let mut time = start + place * length;
    let (mut state, mut slope) = (vec![0.0; n], vec![0.0; n]);
    integrator.land(place, &mut state);
    integrator.rates.at(time, &state, &mut slope);
    let correction = (level - state[state_index]) / slope[state_index];
    // A grazing crossing has no slope to correct along; its place is then as good as it can be.
    if correction.is_finite() && correction.abs() < length / LOOKS as f64 {
        time += correction;
        state.iter_mut().zip(&slope).for_each(|(x, f)| *x += correction * f);
        state[state_index] = level;
    }
    Return { time, state }
}

fn multiples(integrator: &mut Integrator<'_>, period: f64, found: &mut Vec<Return>) {
    let (start, end) = (integrator.previous_time(), integrator.time());
    // Quotients round: a step that begins on a multiple has none there, and none is told twice.
    let first = (start / period).floor() as i64 - 1;
    let last = (end / period).floor() as i64 + 1;
    let times = (first..=last).map(|k| k as f64 * period).filter(|time| *time > start && *time <= end);
    for time in times {
        let mut state = vec![0.0; integrator.state().len()];
        integrator.land(((time - start) / (end - start)).clamp(0.0, 1.0), &mut state);
        found.push(Return { time, state });
    }
}

#[cfg(test)]
mod tests {
    use std::sync::atomic::AtomicBool;

    use super::*;
    use crate::integrator::{Limits, Method, Tolerance};
    use crate::test_models::{TestField, hopf_with_shear};

    /// Exact (Hopf with shear): period 2 pi/(1 + k mu) = 5.58505360638185 at mu = 0.25, k = 0.5.
    #[test]
    fn the_time_between_crossings_of_a_circle_is_its_period() {
        let field = hopf_with_shear();
        let abort = AtomicBool::new(false);
        let limits = Limits { steps: 100_000, abort: &abort, bound: 1e12 };
        let tolerance = Tolerance::uniform(2, 1e-12, 1e-12);
        let mut integrator =
            Integrator::new(&field, &[0.25, 0.5], (0.0, &[0.5, 0.0]), tolerance, limits).expect("a good start");
        let section = Section::Level { state_index: 1, level: 0.1 };
        let mut found = Vec::new();
        while found.len() < 6 {
            integrator.advance().expect("the circle is stable");
            section.returns(&mut integrator, &mut found);
        }
        for pair in found.windows(2) {
            let period = pair[1].time - pair[0].time;
            assert!((period - 5.585_053_606_381_854).abs() < 1e-11, "{period}");
        }
    }

    /// A stiffly damped second state makes the steps implicit; the first is sin t exactly, its upward
    /// crossings of 0 at 2 pi k.
    #[test]
    fn crossings_of_implicit_steps_are_located_too() {
        let field = TestField::new(2, 0, |t, x, _, f, j| {
            f.copy_from_slice(&[t.cos(), -1e5 * (x[1] - x[0])]);
            j.copy_from_slice(&[0.0, 0.0, 1e5, -1e5]);
        })
        .forced();
        let abort = AtomicBool::new(false);
        let limits = Limits { steps: 100_000, abort: &abort, bound: 1e12 };
        let tolerance = Tolerance::uniform(2, 1e-11, 1e-11);
        let mut integrator =
            Integrator::new(&field, &[], (0.0, &[-0.1, 0.0]), tolerance, limits).expect("a good start");
        let section = Section::Level { state_index: 0, level: -0.1 };
        let mut found = Vec::new();
        while found.len() < 4 {
            integrator.advance().expect("nothing stops it");
            section.returns(&mut integrator, &mut found);
        }
        assert_eq!(integrator.method(), Method::Implicit);
        for (k, crossing) in found.iter().enumerate() {
            let exact = 2.0 * std::f64::consts::PI * (k + 1) as f64;
            assert!((crossing.time - exact).abs() < 1e-9, "{} {exact}", crossing.time);
        }
    }

    /// By hand: steps that end and begin on multiples of the period, whatever the quotients round to.
    #[test]
    fn every_multiple_of_a_period_is_met_once() {
        let field = TestField::new(1, 0, |t, _, _, f, j| {
            f[0] = t.cos();
            j[0] = 0.0;
        })
        .forced();
        let abort = AtomicBool::new(false);
        for number in 1..400 {
            let period = 60.0 / (250.0 + f64::from(number));
            let limits = Limits { steps: 100_000, abort: &abort, bound: 1e12 };
            let start = f64::from(number) * period;
            let tolerance = Tolerance::uniform(1, 1e-6, 1e-6);
            let mut integrator =
                Integrator::new(&field, &[], (start, &[0.0]), tolerance, limits).expect("a good start");
            integrator.set_longest_step(0.3 * period);
            let mut found = Vec::new();
            while integrator.time() < start + 5.5 * period {
                integrator.advance().expect("nothing stops it");
                Section::Period { period }.returns(&mut integrator, &mut found);
            }
            let times: Vec<f64> = found.iter().map(|found| found.time).collect();
            let exact: Vec<f64> = (1..=5).map(|k| f64::from(number + k) * period).collect();
            assert_eq!(times, exact, "{number}");
        }
    }
}
