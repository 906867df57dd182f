//! Whether a motion goes to rest.
//!
//! After each window Newton's method looks for a state of rest near by, and the reach, the largest distance from it
//! over the window in units of the size of each state, is compared with zero and with the reach of the window
//! before: a motion that decays at the rate of the slowest eigenvalue need not be followed to the end.

use crate::equilibrium::{Equilibrium, newton};
use crate::integrator::Integrator;
use crate::observe::{Observation, filled};

/// How near, relative to the size of the states, counts as being at rest.
pub(crate) const AT_REST: f64 = 1e-9;
/// Nearer than this a decay at the rate of the eigenvalue, within `SAME_RATE`, over windows that hold at
/// least `DECAY` of it, twice in a row, is taken for going to rest.
const NEAR_REST: f64 = 0.02;
const SAME_RATE: f64 = 0.1;
const DECAY: f64 = 0.3;
/// Windows after which a motion that stands still where Newton's method fails is at rest too.
const STILL_WINDOWS: usize = 12;
/// An eigenvalue below this part of the largest is roundoff.
const NEUTRAL: f64 = 1e-13;

/// What a window says.
pub(crate) enum Outlook {
    /// The motion goes on.
    Moves,
    /// It goes to this state of rest, or sits there.
    Rests(Equilibrium),
    /// It sits at a state of rest that does not keep it.
    RestsUnstably(Equilibrium),
}

/// What is remembered from window to window.
#[derive(Default)]
pub(crate) struct RestWatch {
    windows: usize,
    /// Beginning of the last window and the reach over it.
    last: Option<(f64, f64)>,
    /// Windows in a row with the decay that the eigenvalue asks for.
    decays: usize,
}

impl RestWatch {
    /// Judges the window `seen`, which ends where `integrator` stands; `largest` are the ranges seen ever.
    pub(crate) fn look(&mut self, integrator: &mut Integrator<'_>, seen: &Observation, largest: &[f64]) -> Outlook {
        self.windows += 1;
        let n = largest.len();
        let scale = filled((0..n).map(|i| largest[i].max(seen.magnitude(i))).collect(), 1.0);
        let (time, state) = (integrator.time(), integrator.state().to_vec());
        let Some(found) = newton(&mut integrator.rates, time, &state, &scale) else {
            let moves = self.windows < STILL_WINDOWS || (0..n).any(|i| seen.range(i) > AT_REST * scale[i]);
            let still = Equilibrium { state, eigenvalues: Vec::new() };
            return if moves { Outlook::Moves } else { Outlook::Rests(still) };
        };
        let far = |i: usize| {
            let at = found.state[i];
            (seen.low[i] - at).abs().max((seen.high[i] - at).abs()) / scale[i]
        };
        let reach = (0..n).map(far).fold(0.0, f64::max);
        let is_neutral = found.growth().abs() <= NEUTRAL * largest_eigenvalue(&found);
        if reach <= AT_REST && (found.is_stable() || is_neutral) {
            return Outlook::Rests(found);
        }
        if reach <= AT_REST && found.growth() > 0.0 {
            return Outlook::RestsUnstably(found);
        }
        if self.decays_to(&found, (time - seen.time, reach)) { Outlook::Rests(found) } else { Outlook::Moves }
    }

    /// Whether the reach has fallen at the rate of the slowest eigenvalue in two windows in a row.
    fn decays_to(&mut self, found: &Equilibrium, window: (f64, f64)) -> bool {
        let Some((earlier, larger)) = self.last.replace(window) else { return false };
        let (time, reach) = window;
        let expected = -found.growth() * (time - earlier);
        let decayed = (larger / reach).ln();
        let as_expected = (decayed - expected).abs() <= SAME_RATE * expected;
        let counts = found.is_stable() && larger <= NEAR_REST && expected >= DECAY && as_expected;
        self.decays = if counts { self.decays + 1 } else { 0 };
        self.decays >= 2
    }
}

fn largest_eigenvalue(equilibrium: &Equilibrium) -> f64 {
    equilibrium.eigenvalues.iter().map(|(re, im)| re.hypot(*im)).fold(0.0, f64::max)
}
