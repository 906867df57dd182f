//! Numbers of a cycle as they are drawn.

use armilla_record::{Event, Point, Quantity};

use crate::axis::LARGEST;
use crate::error::FigureError;
use crate::spec::{Diagram, Measure};
use crate::text;

/// What a point and an event have in common.
#[derive(Clone, Copy)]
pub(crate) struct Cycle<'a> {
    maxima: &'a [f64],
    minima: &'a [f64],
    means: &'a [f64],
    spreads: &'a [f64],
    period: f64,
    /// Natural logarithm of the largest modulus, where it is known.
    log_modulus: Option<f64>,
}

impl<'a> Cycle<'a> {
    pub(crate) fn of_point(point: &'a Point) -> Self {
        Self {
            maxima: &point.maxima,
            minima: &point.minima,
            means: &point.means,
            spreads: &point.spreads,
            period: point.period,
            log_modulus: point.multipliers.iter().map(|multiplier| multiplier.log_modulus).reduce(f64::max),
        }
    }

    /// `log_modulus` is zero at an event where the critical multiplier is the largest: it lies on the
    /// unit circle.
    pub(crate) fn of_event(event: &'a Event, log_modulus: Option<f64>) -> Self {
        Self {
            maxima: &event.maxima,
            minima: &event.minima,
            means: &event.means,
            spreads: &event.spreads,
            period: event.period,
            log_modulus,
        }
    }

    /// The same cycle told as `times` of its rounds.
    pub(crate) fn repeated(self, times: f64) -> Self {
        Self { period: self.period * times, log_modulus: self.log_modulus.map(|log| log * times), ..self }
    }
}

/// Reads one measure.
pub(crate) struct Reader<'a> {
    measure: &'a Measure,
    state: usize,
    /// The state measured, where it is one.
    quantity: Option<&'a Quantity>,
    /// Whether the drawn number is the decimal logarithm.
    pub(crate) logarithmic: bool,
}

impl<'a> Reader<'a> {
    pub(crate) fn new(diagram: &'a Diagram, states: &'a [Quantity]) -> Result<Self, FigureError> {
        let state = diagram.measure.state().map(|asked| find(states, asked)).transpose()?;
        Ok(Self {
            measure: &diagram.measure,
            state: state.unwrap_or(0),
            quantity: state.map(|state| &states[state]),
            logarithmic: diagram.logarithmic || diagram.measure == Measure::LargestMultiplier,
        })
    }

    /// Number of curves of a branch.
    pub(crate) fn curves(&self) -> usize {
        if matches!(self.measure, Measure::Extremes(_)) { 2 } else { 1 }
    }

    /// The drawn number of the `curve`-th curve; none where it is missing, not finite, or has no logarithm.
    pub(crate) fn drawn(&self, cycle: &Cycle, curve: usize) -> Option<f64> {
        let of = |values: &[f64]| values.get(self.state).copied();
        let value = match self.measure {
            Measure::LargestMultiplier => {
                return cycle.log_modulus.map(|log| log / std::f64::consts::LN_10).filter(sound);
            }
            // Equilibria have none.
            Measure::Period => Some(cycle.period).filter(|period| *period > 0.0),
            Measure::Mean(_) => of(cycle.means),
            Measure::Spread(_) => of(cycle.spreads),
            Measure::PeakToPeak(_) => of(cycle.maxima).zip(of(cycle.minima)).map(|(max, min)| max - min),
            Measure::Min(_) => of(cycle.minima),
            Measure::Extremes(_) if curve == 1 => of(cycle.minima),
            Measure::Max(_) | Measure::Extremes(_) => of(cycle.maxima),
        }?;
        let drawn = if self.logarithmic { value.log10() } else { value };
        Some(drawn).filter(sound)
    }

    /// The measure as an axis is called.
    pub(crate) fn label(&self) -> String {
        let state = self.quantity.map_or(String::new(), |quantity| text::quantity(&quantity.label));
        match self.measure {
            Measure::Max(_) => format!("maximum of {state}"),
            Measure::Min(_) => format!("minimum of {state}"),
            Measure::Mean(_) => format!("mean of {state}"),
            Measure::Extremes(_) => format!("maximum and minimum of {state}"),
            Measure::PeakToPeak(_) => format!("peak-to-peak {state}"),
            Measure::Spread(_) => format!("spread of {state}"),
            Measure::Period => "period".into(),
            Measure::LargestMultiplier => "modulus of largest multiplier".into(),
        }
    }

    /// The unit of the measure.
    pub(crate) fn unit(&self) -> &str {
        match (self.quantity, self.measure) {
            (Some(quantity), _) => &quantity.unit,
            // Branches do not carry the unit of time.
            (None, Measure::Period) => "time unit of the model",
            (None, _) => "",
        }
    }
}

/// Whether a number can be drawn.
pub(crate) fn sound(value: &f64) -> bool {
    value.abs() < LARGEST
}

/// The index of a state.
pub(crate) fn find(states: &[Quantity], asked: &str) -> Result<usize, FigureError> {
    states.iter().position(|state| state.name == asked).ok_or_else(|| FigureError::UnknownState {
        asked: asked.to_string(),
        known: states.iter().map(|state| state.name.clone()).collect(),
    })
}
