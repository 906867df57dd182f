//! How to settle: the settings and what they may be.

use std::sync::atomic::AtomicBool;

use crate::error::FlowError;

/// How to settle.
#[derive(Clone, Copy, Debug)]
pub struct SettleOptions<'a> {
    /// Time that is simulated before anything is judged; chosen by the run itself where absent.
    pub transient: Option<f64>,
    /// Distance, relative to the range of each state, within which returns count as closed. Default 1e-9.
    pub tolerance: f64,
    /// Longest time simulated in all; no limit but the others where absent.
    pub longest_time: Option<f64>,
    /// Steps allowed in all. Default 2 million, some seconds for a small model.
    pub steps: usize,
    /// Returns watched before the motion counts as one that closes nowhere; up to 4000 more then tell whether it is
    /// quasi-periodic or irregular. Default 4000.
    pub returns: usize,
    /// Period of the forcing; needed where the rates use the time.
    pub forcing_period: Option<f64>,
    /// Stops the run when set.
    pub abort: &'a AtomicBool,
}

static NEVER: AtomicBool = AtomicBool::new(false);

impl Default for SettleOptions<'static> {
    fn default() -> Self {
        Self {
            transient: None,
            tolerance: 1e-9,
            longest_time: None,
            steps: 2_000_000,
            returns: 4000,
            forcing_period: None,
            abort: &NEVER,
        }
    }
}

impl SettleOptions<'_> {
    pub(crate) fn validate(&self, forced: bool) -> Result<(), FlowError> {
        let positive = |name, value: Option<f64>| match value {
            Some(value) if !(value.is_finite() && value > 0.0) => {
                Err(FlowError::Setting { name, value, allowed: "finite and positive" })
            }
            _ => Ok(()),
        };
        positive("the longest time", self.longest_time)?;
        positive("the forcing period", self.forcing_period)?;
        if let Some(value) = self.transient.filter(|value| !(value.is_finite() && *value >= 0.0)) {
            return Err(FlowError::Setting { name: "the transient", value, allowed: "finite and not negative" });
        }
        let value = self.tolerance;
        if !(TIGHTEST..=LOOSEST).contains(&value) {
            let allowed = "between 1e-11 and 1e-3";
            return Err(FlowError::Setting { name: "the tolerance of settling", value, allowed });
        }
        if forced && self.forcing_period.is_none() {
            return Err(FlowError::ForcingPeriodMissing);
        }
        Ok(())
    }
}

/// Accepted tolerances: tighter ones drown in the roundoff of the steps, looser ones confuse motions.
const TIGHTEST: f64 = 1e-11;
const LOOSEST: f64 = 1e-3;
