//! Limits of a pursuit, in one place.

/// How a branch is followed. Distances are in the problem's own metric, in which the solution's size and the
/// asked range of the parameter are both about 1.
#[derive(Clone, Debug, PartialEq)]
pub struct Settings {
    /// Range of the parameter, ascending; the branch ends exactly on its edges.
    pub range: (f64, f64),
    /// Parameter values to land on exactly.
    pub targets: Vec<f64>,
    /// First stride; default 0.01.
    pub initial: f64,
    /// Shortest stride; default 1e-8: below it the branch counts as stuck.
    pub shortest: f64,
    /// Longest stride; default 0.05: some twenty points across a range even where nothing happens.
    pub longest: f64,
    /// Wanted distance of prediction and solution, default 1e-3: the stride is `sqrt(2 e / curvature)`.
    pub prediction_error: f64,
    /// Wanted contraction of the corrector, default 1/4 (Deuflhard 2004, sec. 5.1).
    pub contraction: f64,
    /// Least cosine of the angle between neighbouring tangents, default 0.9; a sharper turn is a shorter stride.
    pub least_cosine: f64,
    /// Most points of one direction; default 2000.
    pub points: usize,
}

impl Settings {
    /// Defaults for a range.
    pub fn new(range: (f64, f64)) -> Self {
        Self {
            range,
            targets: Vec::new(),
            initial: 0.01,
            shortest: 1e-8,
            longest: 0.05,
            prediction_error: 1e-3,
            contraction: 0.25,
            least_cosine: 0.9,
            points: 2000,
        }
    }

    /// Checks ranges and relations.
    ///
    /// # Errors
    /// The first field that breaks a rule.
    pub fn validate(&self) -> Result<(), SettingsFault> {
        let fault = |field, rule| Err(SettingsFault { field, rule });
        if !(self.range.0 < self.range.1 && self.range.0.is_finite() && self.range.1.is_finite()) {
            return fault("range", "must be two finite numbers, the smaller first");
        }
        if !(self.shortest > 0.0) {
            return fault("shortest", "must be positive");
        }
        if !(self.initial >= self.shortest) {
            return fault("initial", "must not be below the shortest stride");
        }
        if !(self.longest >= self.initial && self.longest.is_finite()) {
            return fault("longest", "must not be below the initial stride");
        }
        if !(self.prediction_error > 0.0) {
            return fault("prediction_error", "must be positive");
        }
        if !(self.contraction > 0.0 && self.contraction < 1.0) {
            return fault("contraction", "must lie between 0 and 1");
        }
        if !(self.least_cosine > 0.0 && self.least_cosine < 1.0) {
            return fault("least_cosine", "must lie between 0 and 1");
        }
        Ok(())
    }
}

/// A setting outside its rule.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SettingsFault {
    /// Name of the field.
    pub field: &'static str,
    /// What it must be.
    pub rule: &'static str,
}

impl std::fmt::Display for SettingsFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "`{}` of the stride {}", self.field, self.rule)
    }
}

impl std::error::Error for SettingsFault {}
