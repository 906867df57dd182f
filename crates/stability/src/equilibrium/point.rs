//! An equilibrium, a direction at it, and the metric that measures both.

/// A state of rest at a value of the followed parameter.
#[derive(Clone, Debug, PartialEq)]
pub struct EquilibriumPoint {
    /// The state.
    pub state: Vec<f64>,
    /// Value of the followed parameter.
    pub parameter: f64,
}

/// A direction in states and parameter.
#[derive(Clone, Debug, PartialEq)]
pub struct EquilibriumTangent {
    /// State part.
    pub state: Vec<f64>,
    /// Parameter part.
    pub parameter: f64,
}

/// `<a, b> = (1/n) Sum a_i b_i / s_i^2 + a_p b_p / w^2`: sizes of the states, width of the range.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct RestMetric {
    /// Size of each state.
    pub scales: Vec<f64>,
    /// Size of the parameter.
    pub parameter_scale: f64,
}

impl RestMetric {
    pub(crate) fn inner(&self, a: &EquilibriumTangent, b: &EquilibriumTangent) -> f64 {
        let states = a.state.iter().zip(&b.state).zip(&self.scales).map(|((a, b), s)| (a / s) * (b / s));
        states.sum::<f64>() / self.scales.len() as f64 + a.parameter * b.parameter / self.parameter_scale.powi(2)
    }

    pub(crate) fn length(&self, a: &EquilibriumTangent) -> f64 {
        self.inner(a, a).sqrt()
    }

    /// The row of numbers whose product with a direction is its inner product with `a`.
    pub(crate) fn functional(&self, a: &EquilibriumTangent) -> EquilibriumTangent {
        let n = self.scales.len() as f64;
        EquilibriumTangent {
            state: a.state.iter().zip(&self.scales).map(|(a, s)| a / (s * s * n)).collect(),
            parameter: a.parameter / self.parameter_scale.powi(2),
        }
    }

    /// The same direction with length 1.
    pub(crate) fn normalised(&self, mut a: EquilibriumTangent) -> EquilibriumTangent {
        let length = self.length(&a);
        a.state.iter_mut().for_each(|value| *value /= length);
        a.parameter /= length;
        a
    }

    /// Largest scaled entry.
    pub(crate) fn largest(&self, states: &[f64], parameter: f64) -> f64 {
        let scaled = states.iter().zip(&self.scales).map(|(value, s)| value.abs() / s);
        // NaN counts as large.
        scaled.fold(parameter.abs() / self.parameter_scale, |a, b| if b > a || b.is_nan() { b } else { a })
    }
}

impl EquilibriumTangent {
    pub(crate) fn is_finite(&self) -> bool {
        self.parameter.is_finite() && self.state.iter().all(|value| value.is_finite())
    }

    /// Plain product of entries, for a functional with a direction.
    pub(crate) fn product(&self, states: &[f64], parameter: f64) -> f64 {
        self.state.iter().zip(states).map(|(a, b)| a * b).sum::<f64>() + self.parameter * parameter
    }

    /// The opposite direction.
    #[must_use]
    pub fn reversed(&self) -> Self {
        Self { state: self.state.iter().map(|value| -value).collect(), parameter: -self.parameter }
    }
}

impl EquilibriumPoint {
    /// The step from `from` to here.
    pub(crate) fn minus(&self, from: &Self) -> EquilibriumTangent {
        EquilibriumTangent {
            state: self.state.iter().zip(&from.state).map(|(a, b)| a - b).collect(),
            parameter: self.parameter - from.parameter,
        }
    }

    /// `self + factor * direction`.
    pub(crate) fn plus(&self, factor: f64, direction: &EquilibriumTangent) -> Self {
        Self {
            state: self.state.iter().zip(&direction.state).map(|(x, d)| x + factor * d).collect(),
            parameter: self.parameter + factor * direction.parameter,
        }
    }
}
