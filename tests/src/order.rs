//! Observed orders of convergence.

/// Errors over a sequence of meshes.
#[derive(Clone, Debug, Default)]
pub struct Orders {
    errors: Vec<(usize, f64)>,
}

impl Orders {
    /// Adds the error on a mesh of `intervals` pieces.
    pub fn push(&mut self, intervals: usize, error: f64) {
        self.errors.push((intervals, error.abs()));
    }

    /// Slope of log error against log N, by least squares.
    pub fn slope(&self) -> f64 {
        let points: Vec<(f64, f64)> = self.errors.iter().map(|(n, error)| ((*n as f64).ln(), error.ln())).collect();
        let mean = |of: fn(&(f64, f64)) -> f64| points.iter().map(of).sum::<f64>() / points.len() as f64;
        let (x, y) = (mean(|point| point.0), mean(|point| point.1));
        let product: f64 = points.iter().map(|point| (point.0 - x) * (point.1 - y)).sum();
        let square: f64 = points.iter().map(|point| (point.0 - x).powi(2)).sum();
        -product / square
    }

    /// Checks that the slope is `order` to within `slack`.
    ///
    /// # Panics
    /// Where it is not.
    #[track_caller]
    pub fn check(&self, what: &str, order: f64, slack: f64) {
        let errors: Vec<String> = self.errors.iter().map(|(n, error)| format!("{n}: {error:.1e}")).collect();
        let (slope, errors) = (self.slope(), errors.join(", "));
        eprintln!("{what}: order {order} wanted, {slope:.2} found, errors {errors}");
        assert!((slope - order).abs() <= slack, "{what}: order {order} wanted, {slope:.2} found, errors {errors}");
    }
}
