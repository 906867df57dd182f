//! Random points near the start of a model, with directions, for the self-test.

use crate::field::{Batch, Column, Direction};
use crate::model::Model;

/// Relative size of the random displacement from the start.
const SPREAD: f64 = 0.1;

/// Size of a number that is zero at the start.
const SIZE_OF_ZERO: f64 = 0.1;

/// Time, states, parameters.
pub(crate) type Place = (f64, Vec<f64>, Vec<f64>);

/// State part and column part of a direction.
pub(crate) type Part = (Vec<f64>, Vec<f64>);

/// A point with directions. A unit along a direction is a change of every number by about its size.
pub(crate) struct Sample {
    pub time: f64,
    pub states: Vec<f64>,
    pub parameters: Vec<f64>,
    pub directions: [Part; 3],
    pub psi: Vec<f64>,
    pub state_sizes: Vec<f64>,
    pub column_sizes: Vec<f64>,
}

impl Sample {
    /// A point near the start of `model`; directions have a part in `columns`.
    pub(crate) fn new(model: &Model, columns: &[Column], random: &mut Random) -> Self {
        let size = |value: f64| if value == 0.0 { SIZE_OF_ZERO } else { value.abs() };
        let mut near = |value: f64| value + SPREAD * size(value) * random.symmetric();
        let states: Vec<f64> = model.begin().into_iter().map(&mut near).collect();
        let parameters: Vec<f64> = model.values().into_iter().map(&mut near).collect();
        let time = random.symmetric();
        let state_sizes: Vec<f64> = model.begin().into_iter().map(size).collect();
        let column_sizes: Vec<f64> = columns
            .iter()
            .map(|column| match column {
                Column::Parameter(index) => size(model.parameters()[*index].value),
                Column::Time => 1.0,
            })
            .collect();
        let mut direction =
            |sizes: &[f64]| -> Vec<f64> { sizes.iter().map(|size| size * random.symmetric()).collect() };
        let directions = [(); 3].map(|()| (direction(&state_sizes), direction(&column_sizes)));
        let psi = states.iter().map(|_| random.symmetric()).collect();
        Self { time, states, parameters, directions, psi, state_sizes, column_sizes }
    }

    /// The point moved by `step` along a direction.
    pub(crate) fn moved(&self, columns: &[Column], direction: &Part, step: f64) -> Place {
        let states = self.states.iter().zip(&direction.0).map(|(x, d)| x + step * d).collect();
        let (mut time, mut parameters) = (self.time, self.parameters.clone());
        for (column, d) in columns.iter().zip(&direction.1) {
            match column {
                Column::Parameter(index) => parameters[*index] += step * d,
                Column::Time => time += step * d,
            }
        }
        (time, states, parameters)
    }
}

pub(crate) fn batch(place: &Place) -> Batch<'_> {
    Batch { len: 1, time: std::slice::from_ref(&place.0), states: &place.1, parameters: &place.2 }
}

pub(crate) fn direction(part: &Part) -> Direction<'_> {
    Direction { states: &part.0, columns: &part.1 }
}

pub(crate) fn scale(values: &mut [f64], sizes: &[f64]) {
    for (value, size) in values.iter_mut().zip(sizes) {
        *value *= size;
    }
}

pub(crate) fn units(sizes: &[f64]) -> impl Iterator<Item = Vec<f64>> {
    (0..sizes.len()).map(|at| {
        let mut unit = vec![0.0; sizes.len()];
        unit[at] = sizes[at];
        unit
    })
}

/// The generator SplitMix64 (Steele, Lea & Flood 2014, OOPSLA): any seed will do.
pub(crate) struct Random(pub u64);

impl Random {
    /// Uniform in [-1, 1).
    pub(crate) fn symmetric(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^= z >> 31;
        // 53 bits fill the mantissa.
        (z >> 11) as f64 / (1_u64 << 52) as f64 - 1.0
    }
}
