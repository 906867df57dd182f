//! A self-test of the derivatives of a model by two independent ways.
//!
//! On random points near the start, everything an evaluator gives is compared (a) with the same
//! formulas evaluated over hyper-dual numbers, which share no rule of differentiation with the compiled
//! programs, and (b) with central differences extrapolated to step 0 (Richardson; the table of Ridders
//! 1982, Advances in Engineering Software 4:75). Each derivative is differenced from the next lower
//! one, so that no difference of differences is needed. Where the table does not converge (a kink is
//! near, or the scale is too short), the entry is left out.

use crate::field::Column;
use crate::model::Model;
use crate::sample::{Random, Sample};
use crate::tester::Tester;

/// Points at which the derivatives are compared.
const POINTS: usize = 8;

/// Disagreement allowed against dual numbers: rounding, magnified by the cancellations of a formula.
const ALLOWED_DUAL: f64 = 1e-9;

/// Disagreement allowed against extrapolated differences, which lose about a third of the digits.
const ALLOWED_DIFFERENCE: f64 = 1e-6;

/// An entry counts as at least this part of the largest one of its row: below it, rounding of the
/// row's other terms is all there is.
const SMALLEST_PART: f64 = 1e-3;

/// Names of the quantities, in the order of what the tester gives.
const QUANTITIES: [&str; 6] = [
    "Jacobian in the states",
    "derivatives in the parameters",
    "second derivatives",
    "third derivatives",
    "gradient in the states",
    "gradient in the parameters",
];

/// One derivative against one independent way.
#[derive(Clone, Debug, PartialEq)]
pub struct DerivativeTest {
    /// Which derivative.
    pub derivative: &'static str,
    /// Against what.
    pub against: &'static str,
    /// Entries compared.
    pub compared: usize,
    /// Worst relative disagreement; relative to the larger of the entry and what a change of the
    /// argument by its own size would make of it.
    pub worst: f64,
    /// Largest disagreement that passes.
    pub allowed: f64,
}

impl DerivativeTest {
    fn new(derivative: &'static str, against: &'static str, allowed: f64) -> Self {
        Self { derivative, against, compared: 0, worst: 0.0, allowed }
    }

    /// Whether the two ways agree.
    pub fn passed(&self) -> bool {
        self.worst <= self.allowed
    }

    fn compare(&mut self, found: f64, expected: f64, row: f64) {
        let size = expected.abs().max(row * SMALLEST_PART);
        // Dual numbers have no slope in the exponent of a base that is not positive.
        if size > 0.0 && expected.is_finite() {
            self.compared += 1;
            self.worst = self.worst.max((found - expected).abs() / size);
        }
    }
}

/// Tests the derivatives of a model near its start: for each derivative, against dual numbers (models
/// from a file) and against extrapolated differences. The same seed gives the same points.
pub fn test_derivatives(model: &Model, seed: u64) -> Vec<DerivativeTest> {
    let mut random = Random(seed);
    let columns = all_columns(model);
    let mut tester = Tester { model, evaluator: model.field().evaluator(&columns), columns };
    let table = |against, allowed| QUANTITIES.map(|name| DerivativeTest::new(name, against, allowed));
    let mut by_duals = table("dual numbers", ALLOWED_DUAL);
    let mut by_differences = table("extrapolated differences", ALLOWED_DIFFERENCE);
    for _ in 0..POINTS {
        let sample = Sample::new(model, &tester.columns, &mut random);
        let found = tester.everything(&sample);
        if !found.is_finite() {
            continue;
        }
        let rows = found.rows();
        if let Some(expected) = tester.by_duals(&sample) {
            for (test, (found, expected)) in by_duals.iter_mut().zip(found.parts.iter().zip(&expected)) {
                for (at, (found, expected)) in found.iter().zip(expected).enumerate() {
                    test.compare(*found, *expected, row_of(test.derivative, at, &rows));
                }
            }
        }
        let expected = tester.by_differences(&sample);
        for (test, (found, expected)) in by_differences.iter_mut().zip(found.parts.iter().zip(&expected)) {
            for (at, (found, expected)) in found.iter().zip(expected).enumerate() {
                let row = row_of(test.derivative, at, &rows);
                // A table that did not converge says nothing.
                let size = expected.value.abs().max(row * SMALLEST_PART);
                if expected.error <= 0.1 * test.allowed * size {
                    test.compare(*found, expected.value, row);
                }
            }
        }
    }
    let mut tests: Vec<DerivativeTest> = by_duals.into_iter().chain(by_differences).collect();
    tests.retain(|test| test.compared > 0);
    tests
}

/// The size that an entry's row has; gradients gather all rows.
fn row_of(quantity: &str, at: usize, rows: &[f64]) -> f64 {
    if quantity.starts_with("gradient") { rows.iter().sum() } else { rows[at % rows.len()] }
}

fn all_columns(model: &Model) -> Vec<Column> {
    let parameters = (0..model.parameters().len()).map(Column::Parameter);
    parameters.chain(model.field().is_forced().then_some(Column::Time)).collect()
}
