//! Settling: simulate until it is clear what the motion settles on.
//!
//! Time is cut into windows that double until a window holds many returns. After each window the motion is
//! compared with a state of rest nearby (found by Newton's method) and its returns to a section are searched
//! for the smallest number that closes. The section is a level of the state with the largest relative range,
//! at its mean over the last window, crossed upward; a forced model returns at multiples of its forcing
//! period. Errors allowed in a step follow the range of each state over the last window, so that nothing
//! depends on units. What is given as the transient is simulated first and looks at nothing but ranges.

use std::sync::atomic::AtomicBool;

use armilla_model::VectorField;

use crate::cycle::{Cycle, record, turns};
use crate::equilibrium::{Equilibrium, newton};
use crate::error::FlowError;
use crate::integrator::{Integrator, Limits, Stats, Tolerance, check_length};
use crate::observe::Observation;
use crate::returns::{Closing, NearReturn, Sequence};
use crate::section::{Return, Section};

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
    /// Returns watched in all before the motion counts as not settled. Default 4000.
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
    fn validate(&self, forced: bool) -> Result<(), FlowError> {
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
/// Part of the tolerance of settling that a step may err by: errors of a whole turn then stay below it.
const STEP_PART: f64 = 0.01;
/// Least error allowed in a step relative to the state itself, some hundred units in the last place.
const ROUNDOFF: f64 = 1e-13;
/// A state that grows by this factor beyond all that was seen at the start is taken for divergent.
const BOUND: f64 = 1e15;
/// Steps in the first window; the windows then double.
const FIRST_STEPS: usize = 20;
/// A window with fewer returns than this is doubled; one with more than `MANY` ends early.
const FEW: usize = 48;
const MANY: usize = 256;
/// The section is renewed when the mean moves by this part of the range, or when another state's relative
/// range is larger by this factor.
const MEAN_MOVED: f64 = 0.1;
const LIVELIER: f64 = 1.2;
/// How near, relative to the size of the states, counts as being at rest.
const AT_REST: f64 = 1e-9;
/// Nearer than this a decay at the rate of the eigenvalue, within `SAME_RATE`, over windows that hold at
/// least `DECAY` of it, twice in a row, is taken for going to rest.
const NEAR_REST: f64 = 0.02;
const SAME_RATE: f64 = 0.1;
const DECAY: f64 = 0.3;
/// Windows after which a motion that stands still where Newton's method fails is at rest too.
const STILL_WINDOWS: usize = 12;
/// Relative size of the push given to a motion that rests where it cannot stay, and how often.
const PUSH: f64 = 1e-4;
const PUSHES: usize = 3;
/// Leaps allowed towards slowly approached cycles.
const LEAPS: usize = 12;
/// Returns kept.
const KEPT: usize = 1024;

/// What a simulation settled on.
#[derive(Clone, Debug)]
#[non_exhaustive]
pub enum Verdict {
    /// A state of rest that attracts.
    Equilibrium(Equilibrium),
    /// A cycle.
    Cycle(Box<Cycle>),
    /// Neither, within the limits.
    NotSettled(Evidence),
}

/// Which limit ended a run that did not settle.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub enum Limit {
    /// The longest time.
    Time,
    /// The steps.
    Steps,
    /// The returns.
    Returns,
}

/// What was seen of a motion that did not settle.
#[derive(Clone, Debug, PartialEq)]
pub struct Evidence {
    /// The limit that was reached.
    pub limit: Limit,
    /// Time simulated.
    pub time: f64,
    /// Length of the last window, to which `ranges` belong.
    pub window: f64,
    /// Smallest and largest value of each state over the last window.
    pub ranges: Vec<(f64, f64)>,
    /// The section, where one was found.
    pub section: Option<Section>,
    /// Returns watched in all.
    pub returns: usize,
    /// Mean time between the returns watched last.
    pub return_time: Option<f64>,
    /// The nearest return among the last ones.
    pub nearest: Option<NearReturn>,
}

/// An unstable state of rest that the motion sat on until it was pushed.
#[derive(Clone, Debug, PartialEq)]
pub struct Push {
    /// When.
    pub time: f64,
    /// The state of rest.
    pub equilibrium: Equilibrium,
    /// Largest change made to a state.
    pub size: f64,
}

/// The outcome of [`settle`].
#[derive(Clone, Debug)]
pub struct Settled {
    /// What it settled on.
    pub verdict: Verdict,
    /// Pushes that were needed to leave unstable states of rest; a caller should say so.
    pub pushes: Vec<Push>,
    /// Time simulated.
    pub time: f64,
    /// What it cost.
    pub stats: Stats,
}

/// Simulates `field` from `state` at time 0 until it settles.
///
/// # Errors
/// Wrong lengths or settings, rates that are not finite, divergence, a wish to stop. Running out of steps,
/// time or returns is no error but [`Verdict::NotSettled`].
pub fn settle(
    field: &dyn VectorField,
    parameters: &[f64],
    state: &[f64],
    options: &SettleOptions<'_>,
) -> Result<Settled, FlowError> {
    options.validate(field.is_forced())?;
    check_length("states", state.len(), field.n_states())?;
    let largest = state.iter().fold(0.0, |largest: f64, x| largest.max(x.abs()));
    let size = if largest > 0.0 { largest } else { 1.0 };
    let limits = Limits { steps: options.steps, abort: options.abort, bound: BOUND * size };
    let scale = size * STEP_PART * options.tolerance;
    let tolerance = Tolerance::uniform(state.len(), STEP_PART * options.tolerance, scale);
    let integrator = Integrator::new(field, parameters, (0.0, state), tolerance, limits)?;
    let mut settling = Settling::new(integrator, options);
    let verdict = settling.run()?;
    Ok(Settled {
        verdict,
        time: settling.integrator.time(),
        stats: settling.integrator.stats(),
        pushes: settling.pushes,
    })
}

/// A run of settling between two windows.
struct Settling<'a, 'b> {
    integrator: Integrator<'a>,
    options: &'b SettleOptions<'b>,
    section: Option<Section>,
    returns: Vec<Return>,
    all_returns: usize,
    seen: Observation,
    /// Largest range of each state over any window.
    largest: Vec<f64>,
    window: f64,
    windows: usize,
    /// Reach from the state of rest in the window before, with the time of its end.
    decay: Option<(f64, f64)>,
    decays: usize,
    leaps: usize,
    pushes: Vec<Push>,
}

impl<'a, 'b> Settling<'a, 'b> {
    fn new(integrator: Integrator<'a>, options: &'b SettleOptions<'b>) -> Self {
        let n = integrator.state().len();
        let section = options.forcing_period.map(|period| Section::Period { period });
        Self {
            integrator,
            options,
            section,
            returns: Vec::new(),
            all_returns: 0,
            seen: Observation::new(n),
            largest: vec![0.0; n],
            window: 0.0,
            windows: 0,
            decay: None,
            decays: 0,
            leaps: 0,
            pushes: Vec::new(),
        }
    }

    fn run(&mut self) -> Result<Verdict, FlowError> {
        match self.search() {
            Err(FlowError::Budget { .. }) => Ok(Verdict::NotSettled(self.evidence(Limit::Steps))),
            outcome => outcome,
        }
    }

    fn search(&mut self) -> Result<Verdict, FlowError> {
        if let Some(equilibrium) = self.leave_rest_at_start()? {
            return Ok(Verdict::Equilibrium(equilibrium));
        }
        self.first_window()?;
        loop {
            if let Some(equilibrium) = self.rest()? {
                return Ok(Verdict::Equilibrium(equilibrium));
            }
            if let Some(cycle) = self.cycle()? {
                return Ok(Verdict::Cycle(Box::new(cycle)));
            }
            if let Some(limit) = self.limit() {
                return Ok(Verdict::NotSettled(self.evidence(limit)));
            }
            self.renew()?;
            self.watch()?;
        }
    }

    /// A start on a state of rest: the answer if it attracts, else a push away from it.
    fn leave_rest_at_start(&mut self) -> Result<Option<Equilibrium>, FlowError> {
        if matches!(self.section, Some(Section::Period { .. })) {
            return Ok(None);
        }
        let start = self.integrator.state().to_vec();
        let sizes: Vec<f64> = start.iter().map(|x| x.abs()).collect();
        let scale = filled(sizes, f64::MIN_POSITIVE);
        let Some(found) = newton(&mut self.integrator.rates, 0.0, &start, &scale) else { return Ok(None) };
        let far = start.iter().zip(&found.state).zip(&scale).any(|((x, e), s)| (x - e).abs() > AT_REST * s);
        if far {
            return Ok(None);
        }
        if found.is_stable() {
            return Ok(Some(found));
        }
        self.push(found)?;
        Ok(None)
    }

    /// The transient, where one was asked for, else a few steps to learn the scale of time.
    fn first_window(&mut self) -> Result<(), FlowError> {
        let transient = self.options.transient.unwrap_or(0.0);
        let start = self.integrator.time();
        let mut steps = 0;
        // The second half alone is kept in mind: the first may hold the way in.
        while steps < FIRST_STEPS || self.integrator.time() - start < transient {
            self.integrator.advance()?;
            steps += 1;
            if self.integrator.time() - start > 0.5 * transient {
                self.seen.add(&self.integrator);
            }
        }
        self.window = self.seen.time;
        self.windows = 1;
        Ok(())
    }

    /// Simulates one window, watching ranges and returns.
    fn watch(&mut self) -> Result<(), FlowError> {
        let n = self.integrator.state().len();
        self.seen = Observation::new(n);
        let before = self.all_returns;
        while self.seen.time < self.window && self.all_returns - before < MANY {
            self.integrator.advance()?;
            self.seen.add(&self.integrator);
            if let Some(section) = self.section {
                let count = self.returns.len();
                section.returns(&mut self.integrator, &mut self.returns);
                self.all_returns += self.returns.len() - count;
            }
        }
        for (i, largest) in self.largest.iter_mut().enumerate() {
            *largest = largest.max(self.seen.range(i));
        }
        let surplus = self.returns.len().saturating_sub(KEPT);
        self.returns.drain(..surplus);
        if self.all_returns - before < FEW {
            self.window *= 2.0;
        }
        self.windows += 1;
        Ok(())
    }

    /// Section and tolerances after what was seen.
    fn renew(&mut self) -> Result<(), FlowError> {
        let n = self.largest.len();
        let part = STEP_PART * self.options.tolerance;
        let ranges = filled((0..n).map(|i| self.seen.range(i)).collect(), 1.0);
        let relative = |i: usize| {
            let size = self.seen.magnitude(i);
            if size > 0.0 { (part * (ranges[i] / size).min(1.0)).max(ROUNDOFF) } else { part }
        };
        let relative = (0..n).map(relative).collect();
        self.integrator.set_tolerance(Tolerance { absolute: ranges.iter().map(|r| part * r).collect(), relative })?;
        if matches!(self.section, Some(Section::Period { .. })) {
            return Ok(());
        }
        let state_index = match self.section {
            Some(Section::Level { state_index, .. }) if !self.is_livelier(state_index) => state_index,
            _ => self.seen.liveliest(),
        };
        let mean = self.seen.mean(state_index);
        let kept = matches!(self.section, Some(Section::Level { state_index: old, level })
            if old == state_index && (level - mean).abs() <= MEAN_MOVED * self.seen.range(old));
        if !kept {
            self.section = Some(Section::Level { state_index, level: mean });
            self.returns.clear();
        }
        Ok(())
    }

    /// Whether some state is clearly livelier than this one.
    fn is_livelier(&self, state_index: usize) -> bool {
        let relative = |i: usize| self.seen.range(i) / self.seen.magnitude(i).max(f64::MIN_POSITIVE);
        relative(self.seen.liveliest()) > LIVELIER * relative(state_index)
    }

    fn limit(&self) -> Option<Limit> {
        if self.options.longest_time.is_some_and(|longest| self.integrator.time() >= longest) {
            return Some(Limit::Time);
        }
        (self.all_returns >= self.options.returns).then_some(Limit::Returns)
    }

    /// Scale of each state for closings: its range now; infinite where it does not move.
    fn scale(&self) -> Vec<f64> {
        let one = |i: usize| {
            let range = self.seen.range(i);
            if range > ROUNDOFF * self.seen.magnitude(i) { range } else { f64::INFINITY }
        };
        (0..self.largest.len()).map(one).collect()
    }

    fn cycle(&mut self) -> Result<Option<Cycle>, FlowError> {
        let Some(section) = self.section else { return Ok(None) };
        let scale = self.scale();
        let sequence = Sequence { returns: &self.returns, scale: &scale };
        match sequence.closing(self.options.tolerance) {
            Closing::Closed { returns, contraction, .. } => {
                let start = self.returns.last().expect("closed returns are not empty").clone();
                self.record_cycle(section, &start, returns, contraction)
            }
            Closing::Leap { state } if self.leaps < LEAPS => {
                self.leaps += 1;
                self.returns.clear();
                // Nothing but the place is changed; a forced model keeps its phase.
                let time = self.phase_time();
                self.integrator.restart(time, &state)?;
                Ok(None)
            }
            _ => Ok(None),
        }
    }

    /// Time at which a state on the section may be put: now, or the last multiple of the forcing period.
    fn phase_time(&self) -> f64 {
        match self.section {
            Some(Section::Period { period }) => (self.integrator.time() / period).floor() * period,
            _ => self.integrator.time(),
        }
    }

    fn record_cycle(
        &mut self,
        section: Section,
        start: &Return,
        returns: usize,
        contraction: Option<f64>,
    ) -> Result<Option<Cycle>, FlowError> {
        /// A recorded period may miss by this many tolerances: it is simulated with steps of its own.
        const MISS: f64 = 10.0;
        let (orbit, end) = record(&mut self.integrator, section, start, returns)?;
        let ranges: Vec<f64> = orbit.extremes().iter().map(|(low, high)| high - low).collect();
        let miss = |i: usize| {
            let gap = (end.state[i] - start.state[i]).abs();
            let floor = ROUNDOFF * start.state[i].abs();
            if gap <= floor { 0.0 } else { gap / ranges[i].max(floor) }
        };
        let distance = (0..ranges.len()).map(miss).fold(0.0, f64::max);
        if !(distance <= MISS * self.options.tolerance) {
            self.returns.clear();
            return Ok(None);
        }
        let (state_index, counted) = turns(&orbit);
        let turns = if matches!(section, Section::Period { .. }) { returns } else { counted };
        Ok(Some(Cycle { orbit, turns, state_index, distance, contraction, time: start.time }))
    }

    /// The state of rest that the motion goes to, if it does; pushes it off an unstable one.
    fn rest(&mut self) -> Result<Option<Equilibrium>, FlowError> {
        if matches!(self.section, Some(Section::Period { .. })) {
            return Ok(None);
        }
        let n = self.largest.len();
        let sizes: Vec<f64> = (0..n).map(|i| self.largest[i].max(self.seen.magnitude(i))).collect();
        let scale = filled(sizes, 1.0);
        let state = self.integrator.state().to_vec();
        let time = self.integrator.time();
        let Some(found) = newton(&mut self.integrator.rates, time, &state, &scale) else {
            return Ok(self.still(&scale));
        };
        let far = |i: usize| {
            let at = found.state[i];
            (self.seen.low[i] - at).abs().max((self.seen.high[i] - at).abs()) / scale[i]
        };
        let reach = (0..n).map(far).fold(0.0, f64::max);
        let is_neutral = found.growth().abs() <= ROUNDOFF * largest_eigenvalue(&found);
        if reach <= AT_REST && (found.is_stable() || is_neutral) {
            return Ok(Some(found));
        }
        if reach <= AT_REST && found.growth() > 0.0 {
            if self.pushes.len() == PUSHES {
                return Ok(Some(found));
            }
            self.push(found)?;
            return Ok(None);
        }
        Ok(self.decays_to(&found, reach).then_some(found))
    }

    /// Whether the reach has fallen at the rate of the slowest eigenvalue in two windows in a row.
    fn decays_to(&mut self, found: &Equilibrium, reach: f64) -> bool {
        let time = self.integrator.time() - self.seen.time;
        let before = self.decay.replace((time, reach));
        let Some((earlier, larger)) = before else { return false };
        let expected = -found.growth() * (time - earlier);
        let decayed = (larger / reach).ln();
        let as_expected = (decayed - expected).abs() <= SAME_RATE * expected;
        let counts = found.is_stable() && larger <= NEAR_REST && expected >= DECAY && as_expected;
        self.decays = if counts { self.decays + 1 } else { 0 };
        self.decays >= 2
    }

    /// A motion that no longer moves where the Jacobian is singular.
    fn still(&mut self, scale: &[f64]) -> Option<Equilibrium> {
        let moves = (0..scale.len()).any(|i| self.seen.range(i) > AT_REST * scale[i]);
        if moves || self.windows < STILL_WINDOWS {
            return None;
        }
        Some(Equilibrium { state: self.integrator.state().to_vec(), eigenvalues: Vec::new() })
    }

    /// Moves every state up by a little, each by another part of its size, and forgets what was seen.
    fn push(&mut self, equilibrium: Equilibrium) -> Result<(), FlowError> {
        let n = equilibrium.state.len();
        let sizes: Vec<f64> = (0..n).map(|i| equilibrium.state[i].abs().max(self.largest[i])).collect();
        let scale = filled(sizes, 1.0);
        // Fractions of the golden mean differ from state to state, so no symmetry of the model is kept.
        const GOLDEN: f64 = 0.618_033_988_749_894_8;
        let mut size: f64 = 0.0;
        let mut state = equilibrium.state.clone();
        for (i, x) in state.iter_mut().enumerate() {
            let change = PUSH * scale[i] * (1.0 - 0.5 * (GOLDEN * (i + 1) as f64).fract());
            size = size.max(change);
            *x += change;
        }
        let time = self.integrator.time();
        self.integrator.restart(time, &state)?;
        self.pushes.push(Push { time, equilibrium, size });
        self.returns.clear();
        self.decay = None;
        self.decays = 0;
        Ok(())
    }

    fn evidence(&self, limit: Limit) -> Evidence {
        let scale = self.scale();
        let return_time = match self.returns.as_slice() {
            [first, .., last] => Some((last.time - first.time) / (self.returns.len() - 1) as f64),
            _ => None,
        };
        Evidence {
            limit,
            time: self.integrator.time(),
            window: self.seen.time,
            ranges: self.seen.low.iter().copied().zip(self.seen.high.iter().copied()).collect(),
            section: self.section,
            returns: self.all_returns,
            return_time,
            nearest: Sequence { returns: &self.returns, scale: &scale }.nearest(),
        }
    }
}

fn largest_eigenvalue(equilibrium: &Equilibrium) -> f64 {
    equilibrium.eigenvalues.iter().map(|(re, im)| re.hypot(*im)).fold(0.0, f64::max)
}

/// Sizes with zeros replaced by the largest of them, or by `fallback` where all are zero.
fn filled(mut sizes: Vec<f64>, fallback: f64) -> Vec<f64> {
    let largest = sizes.iter().copied().fold(0.0, f64::max);
    let fill = if largest > 0.0 { largest } else { fallback };
    sizes.iter_mut().filter(|size| **size == 0.0).for_each(|size| *size = fill);
    sizes
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::test_models::{TestField, hopf_with_shear, roessler, torus_case, van_der_pol};

    fn run(field: &TestField, parameters: &[f64], state: &[f64]) -> Settled {
        let begin = std::time::Instant::now();
        let settled = settle(field, parameters, state, &SettleOptions::default()).expect("it can be simulated");
        println!("{parameters:?}: {:?} time {} {:?}", begin.elapsed(), settled.time, settled.stats);
        match &settled.verdict {
            Verdict::Cycle(c) => println!("  cycle T {} turns {} distance {:e} contraction {:?} steps {}", c.period(), c.turns, c.distance, c.contraction, c.orbit.intervals()),
            other => println!("  {other:?}"),
        }
        settled
    }

    fn cycle(field: &TestField, parameters: &[f64], state: &[f64]) -> Cycle {
        match run(field, parameters, state).verdict {
            Verdict::Cycle(cycle) => *cycle,
            other => panic!("{parameters:?}: {other:?}"),
        }
    }

    fn close(found: f64, exact: f64, tolerance: f64) {
        assert!((found / exact - 1.0).abs() < tolerance, "{found} for {exact}");
    }

    /// Exact: period 2 pi/(1 + k mu), radius sqrt(mu).
    #[test]
    fn hopf_with_shear_settles_on_its_circle() {
        let cycle = cycle(&hopf_with_shear(), &[0.25, 0.5], &[1.0, 0.3]);
        close(cycle.period(), 5.585_053_606_381_854_6, 1e-10);
        assert_eq!(cycle.turns, 1);
        let profile = cycle.profile(4, 40);
        profile.validate().expect("a valid profile");
        let radius = |t: f64| profile.at(t).iter().map(|x| x * x).sum::<f64>().sqrt();
        let worst = (0..100).map(|k| (radius(k as f64 / 100.0) - 0.5).abs()).fold(0.0, f64::max);
        assert!(worst < 1e-6, "interpolation of degree 4 on 40 pieces is good to 1e-7: {worst}");
    }

    /// Periods computed independently with 113 bits by single shooting; from rest at 0 nearly, too.
    #[test]
    fn van_der_pol_periods() {
        let field = van_der_pol();
        for (mu, period) in
            [(0.1, 6.287_111_272_288_726_8), (1.0, 6.663_286_859_323_130_2), (5.0, 11.612_230_667_719_57)]
        {
            let cycle = cycle(&field, &[mu], &[0.5, 0.0]);
            close(cycle.period(), period, 1e-9);
            assert_eq!(cycle.turns, 1);
        }
    }

    /// The same source; large amplitude quotient of time scales, about mu^2 = 1e6.
    #[test]
    fn stiff_van_der_pol_periods() {
        let field = van_der_pol();
        for (mu, period) in [(100.0, 162.837_071_092_370_02), (1000.0, 1_614.401_125_808_334)] {
            let cycle = cycle(&field, &[mu], &[2.0, 0.0]);
            close(cycle.period(), period, 1e-9);
            assert_eq!(cycle.turns, 1);
        }
    }

    /// Period at c = 1 computed independently with 113 bits; numbers of turns: common knowledge of the
    /// doubling sequence (first below 3, second below 4) and of the three-turn window above 5.
    #[test]
    fn roessler_turns() {
        let field = roessler();
        let start = [1.0, 1.0, 0.0];
        close(cycle(&field, &[0.2, 0.2, 1.0], &start).period(), 5.541_660_322_289_143, 1e-9);
        for (c, turns) in [(2.0, 1), (3.5, 2), (4.0, 4), (5.25, 3)] {
            assert_eq!(cycle(&field, &[0.2, 0.2, c], &start).turns, turns, "c = {c}");
        }
    }

    /// Roessler's first attractor (1976, Phys. Lett. 57A:397) at c = 5.7 is chaotic.
    #[test]
    fn chaos_does_not_settle() {
        let Verdict::NotSettled(evidence) = run(&roessler(), &[0.2, 0.2, 5.7], &[1.0, 1.0, 0.0]).verdict else {
            panic!("it must not settle")
        };
        assert_eq!(evidence.limit, Limit::Returns);
        assert!(evidence.nearest.expect("there are returns").distance > 1e-7);
    }

    /// Exact: torus threshold at lam = 2; below it the cycle attracts with T = 8 pi, above a torus does.
    #[test]
    fn the_torus_case_on_both_sides() {
        let field = torus_case();
        let below = cycle(&field, &[1.95], &[0.6, 0.0, 1.2]);
        close(below.period(), 8.0 * std::f64::consts::PI, 1e-9);
        for lam in [2.003, 2.01] {
            let settled = run(&field, &[lam], &[0.6, 0.0, 1.2]);
            assert!(matches!(settled.verdict, Verdict::NotSettled(_)), "lam = {lam}");
        }
    }

    /// Exact: eigenvalues mu ± i of the rest at 0; slow spirals included.
    #[test]
    fn spirals_go_to_rest() {
        for mu in [-0.5, -1e-2, -1e-3] {
            let settled = run(&hopf_with_shear(), &[mu, 0.5], &[0.3, 0.1]);
            let Verdict::Equilibrium(rest) = settled.verdict else { panic!("mu = {mu}") };
            assert!(rest.state.iter().all(|x| x.abs() < 1e-12), "{rest:?}");
            assert!((rest.growth() - mu).abs() < 1e-12);
            assert!(settled.pushes.is_empty());
        }
    }

    /// A start exactly at the unstable rest of van der Pol's equation is pushed off it, and that is said.
    #[test]
    fn a_start_on_an_unstable_rest_is_pushed_and_reported() {
        let settled = run(&van_der_pol(), &[1.0], &[0.0, 0.0]);
        let Verdict::Cycle(cycle) = &settled.verdict else { panic!("it settles on the cycle") };
        close(cycle.period(), 6.663_286_859_323_130_2, 1e-9);
        assert_eq!(settled.pushes.len(), 1);
        assert!((settled.pushes[0].equilibrium.growth() - 0.5).abs() < 1e-12);
    }
}
