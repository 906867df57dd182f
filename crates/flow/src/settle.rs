//! Settling: simulate until it is clear what the motion settles on.
//!
//! Time is cut into windows that double until a window holds many returns. After each window the motion is
//! compared with a state of rest nearby (found by Newton's method) and its returns to a section are searched
//! for the smallest number that closes. The section is a level of the state with the largest relative range,
//! at its mean over the last window, crossed upward; a forced model returns at multiples of its forcing
//! period. Errors allowed in a step follow the range of each state over the last window, so that nothing
//! depends on units. What is given as the transient is simulated first and looks at nothing but ranges.

use armilla_model::VectorField;

use crate::cycle::{Cycle, record, turns};
use crate::equilibrium::{Equilibrium, newton};
use crate::error::FlowError;
use crate::floors::{Floor, Floors};
use crate::integrator::{Integrator, Limits, Tolerance, check_length};
use crate::judge::{Kind, judge};
use crate::neutral::keeps_volume;
use crate::observe::{Observation, filled};
use crate::options::SettleOptions;
use crate::rest::{AT_REST, Outlook, RestWatch};
use crate::returns::{Closing, Sequence};
use crate::section::{Return, Section};
use crate::verdict::{Evidence, Limit, Push, Settled, Verdict};

/// Part of the tolerance of settling that a step may err by: errors of a whole turn then stay below it.
const STEP_PART: f64 = 0.01;
/// Least error allowed in a step relative to the state itself, some hundred units in the last place.
const ROUNDOFF: f64 = 1e-13;
/// A state whose range is below this part of its size does not move: what is seen of it is roundoff.
const MOVES: f64 = 1e-10;
/// Longest step as a share of the forcing period: where the motion rests for the moment, error estimates do not see what
/// the forcing does next.
const OF_FORCING: f64 = 0.125;
/// A state that grows by this factor beyond all states at the start is taken for divergent: far more than
/// units can differ by, and reached soon where growth is exponential.
const BOUND: f64 = 1e30;
/// Steps in the first window; the windows then double.
const FIRST_STEPS: usize = 20;
/// A window with fewer returns than this is doubled; one with more than `MANY` ends early.
const FEW: usize = 48;
const MANY: usize = 256;
/// The section is renewed when the mean moves by this part of the range, or when another state's relative
/// range is larger by this factor.
const MEAN_MOVED: f64 = 0.1;
const LIVELIER: f64 = 1.2;
/// Relative size of the push given to a motion that rests where it cannot stay, and how often.
const PUSH: f64 = 1e-4;
const PUSHES: usize = 3;
/// Leaps allowed towards slowly approached cycles.
const LEAPS: usize = 40;
/// Returns kept.
const KEPT: usize = 1024;

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
    let part = STEP_PART * options.tolerance;
    let loose = Tolerance::uniform(state.len(), part, part * size);
    let mut integrator = Integrator::new(field, parameters, (0.0, state), loose, limits)?;
    let sizes = first_sizes(state, integrator.slope());
    let absolute = sizes.iter().map(|size| part * size).collect();
    integrator.set_tolerance(Tolerance { absolute, relative: vec![part; state.len()] })?;
    integrator.restart(0.0, state)?;
    if let Some(period) = options.forcing_period {
        integrator.set_longest_step(OF_FORCING * period);
    }
    let mut settling = Settling::new(integrator, options);
    let verdict = settling.run()?;
    Ok(Settled {
        verdict,
        time: settling.integrator.time(),
        stats: settling.integrator.stats(),
        pushes: settling.pushes,
    })
}

/// Sizes of the states before anything was simulated: their values, and for a state that starts at zero what
/// its rate makes of it in the shortest time in which another state changes.
fn first_sizes(state: &[f64], slope: &[f64]) -> Vec<f64> {
    let times = state.iter().zip(slope).filter(|(x, f)| **x != 0.0 && **f != 0.0).map(|(x, f)| (x / f).abs());
    let time = times.fold(f64::INFINITY, f64::min);
    let time = if time.is_finite() { time } else { 1.0 };
    let size = |(x, f): (&f64, &f64)| if *x != 0.0 { x.abs() } else { f.abs() * time };
    filled(state.iter().zip(slope).map(size).collect(), 1.0)
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
    floors: Floors,
    window: f64,
    rest_watch: RestWatch,
    leaps: usize,
    pushes: Vec<Push>,
}

impl<'a, 'b> Settling<'a, 'b> {
    fn new(integrator: Integrator<'a>, options: &'b SettleOptions<'b>) -> Self {
        let n = integrator.state().len();
        let section = options.forcing_period.map(|period| Section::Period { period });
        let floors = Floors::new(&integrator);
        Self {
            integrator,
            options,
            section,
            returns: Vec::new(),
            all_returns: 0,
            seen: Observation::new(n),
            largest: vec![0.0; n],
            floors,
            window: 0.0,
            rest_watch: RestWatch::default(),
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
                return self.judge(limit);
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
        let mut whole = Observation::new(self.integrator.state().len());
        // The second half alone is kept in mind: the first may hold the way in.
        while steps < FIRST_STEPS || self.integrator.time() - start < transient {
            self.integrator.advance()?;
            steps += 1;
            whole.add(&self.integrator);
            self.floors.sample(&self.integrator);
            if self.integrator.time() - start > 0.5 * transient {
                self.seen.add(&self.integrator);
            }
        }
        self.floors.widen(&whole);
        self.window = self.seen.time;
        Ok(())
    }

    /// Simulates one window, watching ranges and returns.
    fn watch(&mut self) -> Result<(), FlowError> {
        let n = self.integrator.state().len();
        self.seen = Observation::new(n);
        self.floors.begin_window();
        let before = self.all_returns;
        while self.seen.time < self.window && self.all_returns - before < MANY {
            self.integrator.advance()?;
            self.seen.add(&self.integrator);
            self.floors.sample(&self.integrator);
            if let Some(section) = self.section {
                let count = self.returns.len();
                section.returns(&mut self.integrator, &mut self.returns);
                self.all_returns += self.returns.len() - count;
            }
        }
        for (i, largest) in self.largest.iter_mut().enumerate() {
            *largest = largest.max(self.seen.range(i));
        }
        self.floors.widen(&self.seen);
        let surplus = self.returns.len().saturating_sub(KEPT);
        self.returns.drain(..surplus);
        if self.all_returns - before < FEW {
            self.window *= 2.0;
        }
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
        let least = self.floors.step(&self.seen, part);
        let absolute = ranges.iter().zip(&least).map(|(range, least)| (part * range).max(*least)).collect();
        self.integrator.set_tolerance(Tolerance { absolute, relative })?;
        if matches!(self.section, Some(Section::Period { .. })) {
            return Ok(());
        }
        let state_index = match self.section {
            Some(Section::Level { state_index, .. }) if self.is_lively(state_index) => state_index,
            _ => self.seen.liveliest(&self.floor().died),
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

    /// The floors of what was seen, with the returns as they are.
    fn floor(&self) -> Floor {
        let return_time = self.return_time().unwrap_or(0.0);
        let tolerance = self.options.tolerance;
        self.floors.floor(&self.seen, return_time, (tolerance, STEP_PART * tolerance))
    }

    /// Mean time from one return to the next.
    fn return_time(&self) -> Option<f64> {
        match self.returns.as_slice() {
            [first, .., last] => Some((last.time - first.time) / (self.returns.len() - 1) as f64),
            _ => None,
        }
    }

    /// Whether this state lives, and none is clearly livelier.
    fn is_lively(&self, state_index: usize) -> bool {
        let died = self.floor().died;
        let relative = |i: usize| self.seen.range(i) / self.seen.magnitude(i).max(f64::MIN_POSITIVE);
        let lives = self.seen.range(state_index) > died[state_index];
        lives && relative(self.seen.liveliest(&died)) <= LIVELIER * relative(state_index)
    }

    fn limit(&self) -> Option<Limit> {
        if self.options.longest_time.is_some_and(|longest| self.integrator.time() >= longest) {
            return Some(Limit::Time);
        }
        (self.all_returns >= self.options.returns).then_some(Limit::Returns)
    }

    /// Scale of each state for closings: its range now, or its floor; infinite where it does not move.
    fn scale(&self, floor: &Floor) -> Vec<f64> {
        let one = |i: usize| {
            let range = self.seen.range(i);
            if range > MOVES * self.seen.magnitude(i) { range.max(floor.range[i]) } else { f64::INFINITY }
        };
        (0..self.largest.len()).map(one).collect()
    }

    fn cycle(&mut self) -> Result<Option<Cycle>, FlowError> {
        let Some(section) = self.section else { return Ok(None) };
        let floor = self.floor();
        let scale = self.scale(&floor);
        if matches!(section, Section::Level { state_index, .. } if scale[state_index].is_infinite()) {
            return Ok(None);
        }
        let sequence = Sequence { returns: &self.returns, scale: &scale, noise: &floor.noise };
        match sequence.closing(self.options.tolerance) {
            Closing::Closed { returns, contraction } => {
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
        /// A period that lasts this many times longer than the one before it is none.
        const LONGER: f64 = 2.0;
        let before = &self.returns[self.returns.len() - 1 - returns];
        let longest = LONGER * (start.time - before.time);
        let Some((orbit, end)) = record(&mut self.integrator, section, start, (returns, longest))? else {
            self.returns.clear();
            return Ok(None);
        };
        let ranges: Vec<f64> = orbit.extremes().iter().map(|(low, high)| high - low).collect();
        let floor = self.floor();
        let miss = |i: usize| {
            let gap = (end.state[i] - start.state[i]).abs();
            let roundoff = (ROUNDOFF * start.state[i].abs()).max(floor.noise[i]);
            if gap <= roundoff { 0.0 } else { gap / ranges[i].max(roundoff).max(floor.range[i]) }
        };
        let distance = (0..ranges.len()).map(miss).fold(0.0, f64::max);
        // A distance that is no number is a miss too.
        if distance.is_nan() || distance > MISS * self.options.tolerance {
            self.returns.clear();
            return Ok(None);
        }
        let (state_index, counted) = turns(&orbit, &floor.died);
        let turns = if matches!(section, Section::Period { .. }) { returns } else { counted };
        let neutral = keeps_volume(&mut self.integrator.rates, &orbit, start.time);
        Ok(Some(Cycle { orbit, turns, state_index, distance, contraction, neutral, time: start.time }))
    }

    /// The state of rest that the motion goes to, if it does; pushes it off an unstable one.
    fn rest(&mut self) -> Result<Option<Equilibrium>, FlowError> {
        if matches!(self.section, Some(Section::Period { .. })) {
            return Ok(None);
        }
        match self.rest_watch.look(&mut self.integrator, &self.seen, &self.largest) {
            Outlook::Moves => Ok(None),
            Outlook::Rests(found) => Ok(Some(found)),
            Outlook::RestsUnstably(found) if self.pushes.len() == PUSHES => Ok(Some(found)),
            Outlook::RestsUnstably(found) => {
                self.push(found)?;
                Ok(None)
            }
        }
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
        self.rest_watch = RestWatch::default();
        Ok(())
    }

    /// The kind of a motion that has had all its returns without closing.
    fn judge(&mut self, limit: Limit) -> Result<Verdict, FlowError> {
        let (Some(section), Limit::Returns) = (self.section, limit) else {
            return Ok(Verdict::NotSettled(self.evidence(limit)));
        };
        let n = self.largest.len();
        let floor = self.floor();
        let scale = filled((0..n).map(|i| self.seen.range(i).max(floor.range[i])).collect(), 1.0);
        let (kind, exponent) = judge(&mut self.integrator, section, &scale, &mut self.returns)?;
        self.all_returns += self.returns.len();
        // What was on its way to a cycle may have arrived meanwhile.
        if kind == Kind::Undecided
            && let Some(cycle) = self.cycle()?
        {
            return Ok(Verdict::Cycle(Box::new(cycle)));
        }
        let mut evidence = self.evidence(limit);
        evidence.exponent = exponent;
        Ok(match kind {
            Kind::QuasiPeriodic => Verdict::QuasiPeriodic(evidence),
            Kind::Irregular => Verdict::Irregular(evidence),
            Kind::Undecided => Verdict::NotSettled(evidence),
        })
    }

    fn evidence(&self, limit: Limit) -> Evidence {
        let floor = self.floor();
        let scale = self.scale(&floor);
        let return_time = self.return_time();
        Evidence {
            limit,
            time: self.integrator.time(),
            window: self.seen.time,
            ranges: self.seen.low.iter().copied().zip(self.seen.high.iter().copied()).collect(),
            section: self.section,
            returns: self.all_returns,
            return_time,
            nearest: Sequence { returns: &self.returns, scale: &scale, noise: &floor.noise }.nearest(),
            exponent: None,
        }
    }
}
