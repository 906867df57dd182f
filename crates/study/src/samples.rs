//! From samples of a cycle to a first cycle of the model.
//!
//! The samples are told on one period, given or estimated (`recurrence.rs`), a smooth closed curve is laid through them
//! (`smoothing.rs`), and Newton's method, damped, goes from there to a cycle of the model at the parameters of the start,
//! stable or not. Smoother curves and finer meshes are tried where it does not arrive, and simulation from the samples at
//! last. Then the cycle is held against the samples: one that lies elsewhere is none of theirs.

use std::sync::atomic::AtomicBool;

use armilla_flow::{on_mesh_of_motion, turns_of};
use armilla_record::{Profile, Samples, SamplesError};
use armilla_stability::{CyclePoint, CycleProblem};

use crate::branch::Entry;
use crate::error::StudyError;
use crate::families::family;
use crate::file::Start;
use crate::progress::{Observer, Progress};
use crate::recurrence::{best_of, estimate, fold, refine};
use crate::settings::cycle_settings;
use crate::smoothing::{Folded, Smooth};
use crate::start::{FIRST_INTERVALS, First, copies, cycle_spec, part, settled};
use crate::study::Study;
use crate::words::digits;

/// Curves and meshes tried in turn: how much smoother than cross-validation wants, and how many times the first intervals.
const ATTEMPTS: [(f64, usize); 5] = [(1.0, 1), (2.0, 1), (1.0, 2), (4.0, 1), (2.0, 3)];
/// Distance of a cycle from the samples, in ranges of the states (root mean square), beyond which it is not theirs: the
/// mean of a sine is 0.35 from it.
const ELSEWHERE: f64 = 0.2;
/// Multiple of the noise beyond which a cycle is told to lie off the samples.
const OFF: f64 = 2.0;
/// Share of the period by which the phase condition may let a cycle slide along itself.
const SHIFT: f64 = 0.1;
/// Largest stretch of the period without a sample.
const GAP: f64 = 0.3;
/// Share of the forcing period by which a stated period may miss a whole number of them.
const MISSES: f64 = 0.1;
/// Most forcing periods looked at where the period is not stated.
const MOST_PERIODS: usize = 64;

/// Finds the first cycle from the samples of a study.
pub(crate) fn first_from_samples(
    study: &Study,
    given: Option<f64>,
    (abort, observer): (&AtomicBool, &mut dyn Observer),
) -> Result<First, StudyError> {
    let samples = study.samples.as_ref().expect("read with the study");
    let table = Table { study, samples };
    let (period, periods) = table.period(given)?;
    let folded = fold(samples, study.model.states().len(), period);
    table.check_gap(&folded)?;
    let measured = Measured::of(&folded);
    if let Some(family) = family(study, &folded.smooth(1.0).profile(period), false) {
        return Err(family);
    }
    let mut why = String::new();
    for (calm, finer) in ATTEMPTS {
        let smooth = folded.smooth(calm);
        let orbit = smooth.profile(period);
        let turns = periods.unwrap_or_else(|| turns_of(&orbit));
        match corrected(study, &orbit, turns, finer) {
            Ok((problem, point, turns)) => {
                let shift = if problem.is_forced() { 0.0 } else { SHIFT };
                let distance = measured.distance(&problem.profile(&point), (&folded, period), shift);
                if distance <= ELSEWHERE {
                    let told = Told { period, estimated: given.is_none() && periods.is_none(), distance };
                    let notes = table.notes(&told, &measured, &smooth);
                    notes.iter().for_each(|note| observer.notice(Progress::Note(note)));
                    let entry = Entry::Cycle(Box::new(problem), Box::new(point));
                    return Ok(First { entry, turns, notes });
                }
                why = format!(
                    "the nearest one that was met lies {} of the range from them, root mean square",
                    percent(distance)
                );
            }
            Err(fault) if why.is_empty() => why = fault,
            Err(_) => {}
        }
    }
    // A cycle that attracts is met by simulation from its samples, however few they are where it moves fast.
    let smooth = folded.smooth(1.0);
    let mut state = vec![0.0; folded.n];
    smooth.at(0.0, &mut state);
    if let Ok(First { entry: Entry::Cycle(problem, point), turns, .. }) =
        settled(study, &state, None, (abort, &mut *observer))
    {
        let shift = if problem.is_forced() { 0.0 } else { 0.5 };
        let distance = measured.distance(&problem.profile(&point), (&folded, period), shift);
        if distance <= ELSEWHERE {
            let told = Told { period, estimated: given.is_none() && periods.is_none(), distance };
            let notes = table.notes(&told, &measured, &smooth);
            notes.iter().for_each(|note| observer.notice(Progress::Note(note)));
            return Ok(First { entry: Entry::Cycle(problem, point), turns, notes });
        }
    }
    Err(StudyError::NoCycleInSamples { reason: why })
}

/// The cycle of the model next to an orbit of some turns, told once.
fn corrected(
    study: &Study,
    orbit: &Profile,
    turns: usize,
    finer: usize,
) -> Result<(CycleProblem, CyclePoint, usize), String> {
    let value = study.start_parameters[study.free];
    let start = |orbit: &Profile, turns: usize| {
        let settings = cycle_settings(study, turns);
        let intervals = settings.mesh.fixed.unwrap_or(FIRST_INTERVALS * turns * finer);
        let profile = on_mesh_of_motion(orbit, settings.degree, intervals);
        CycleProblem::start_rough(cycle_spec(study), settings, &profile, value).map_err(|fault| fault.to_string())
    };
    let (problem, point) = start(orbit, turns)?;
    let cycle = problem.profile(&point);
    // Turns belong to the cycle, not to the noise of the samples.
    let turns = if problem.is_forced() { turns } else { turns_of(&cycle) };
    let copies = copies(&cycle, turns);
    if copies == 1 {
        return Ok((problem, point, turns));
    }
    let (problem, point) = start(&part(&cycle, copies), turns / copies)?;
    Ok((problem, point, turns / copies))
}

struct Table<'a> {
    study: &'a Study,
    samples: &'a Samples,
}

impl Table<'_> {
    fn error(&self, message: String, help: &str) -> StudyError {
        let file = match &self.study.file.start {
            Start::Samples { file, .. } => file.clone(),
            _ => String::new(),
        };
        SamplesError { file, line: None, message, help: help.into() }.into()
    }

    fn span(&self) -> f64 {
        self.samples.times[self.samples.times.len() - 1] - self.samples.times[0]
    }

    /// The period, and how many forcing periods it is where there is a forcing.
    fn period(&self, given: Option<f64>) -> Result<(f64, Option<usize>), StudyError> {
        let n = self.study.model.states().len();
        let field = self.study.model.field();
        if let Some([forcing, ..]) = field.forcing_period(&self.study.start_parameters, self.study.free) {
            let periods = self.periods(given, forcing)?;
            return Ok((periods as f64 * forcing, Some(periods)));
        }
        match given {
            Some(period) => Ok((refine(self.samples, n, period), None)),
            None => estimate(self.samples, n).map(|period| (period, None)).ok_or_else(|| {
                let help = "state the period, Samples(file: ..., period: ...), or sample a whole period or more";
                self.error("the samples do not come back: they show no period".into(), help)
            }),
        }
    }

    /// Number of forcing periods after which the samples come back.
    fn periods(&self, given: Option<f64>, forcing: f64) -> Result<usize, StudyError> {
        if let Some(period) = given {
            let periods = (period / forcing).round();
            if periods < 1.0 || (period / forcing - periods).abs() > MISSES {
                let message = format!(
                    "the stated period {} is no whole number of forcing periods of {}",
                    digits(period),
                    digits(forcing)
                );
                return Err(
                    self.error(message, "leave the period out to have it found, or set the parameters of the forcing")
                );
            }
            return Ok(periods as usize);
        }
        let most = ((self.span() / forcing + GAP).floor() as usize).min(MOST_PERIODS);
        let candidates: Vec<f64> = (1..=most).map(|k| k as f64 * forcing).collect();
        let found = best_of(self.samples, self.study.model.states().len(), &candidates).ok_or_else(|| {
            let message = format!(
                "the samples span {}, less than one forcing period of {}",
                digits(self.span()),
                digits(forcing)
            );
            self.error(message, "sample a whole period or more; `t` is the time of the forcing in the model's unit")
        })?;
        Ok((found / forcing).round() as usize)
    }

    /// The folded samples must leave no large part of the period to guesses.
    fn check_gap(&self, folded: &Folded) -> Result<(), StudyError> {
        let phases = &folded.phases;
        let round = phases[0] + 1.0 - phases[phases.len() - 1];
        let gap = phases.windows(2).map(|pair| pair[1] - pair[0]).fold(round, f64::max);
        if gap <= GAP {
            return Ok(());
        }
        let message = format!("the samples leave {} of the period without a sample", percent(gap));
        Err(self.error(message, "sample the whole period, or state the right `period`"))
    }

    fn notes(&self, told: &Told, measured: &Measured, smooth: &Smooth) -> Vec<String> {
        let noise = measured.noise(smooth);
        let of = if told.estimated { "estimated" } else { "used" };
        let mut notes = vec![format!(
            "{} samples; period {of}: {}; noise about {} of the range; the cycle of the model lies {} from them (root mean \
             square)",
            self.samples.times.len(),
            digits(told.period),
            percent(noise),
            percent(told.distance)
        )];
        if told.distance > OFF * noise + 0.01 {
            notes.push(
                "the samples lie off every cycle of the model nearby by more than their noise: check the parameters (`set`)"
                    .into(),
            );
        }
        if !self.samples.ignored.is_empty() {
            notes.push(format!("columns of the samples that were not used: {}", self.samples.ignored.join(", ")));
        }
        notes
    }
}

/// What came of the samples.
struct Told {
    period: f64,
    estimated: bool,
    distance: f64,
}

/// Sizes of the samples.
struct Measured {
    ranges: Vec<f64>,
}

impl Measured {
    fn of(folded: &Folded) -> Self {
        let values = |a: usize| folded.states.iter().skip(a).step_by(folded.n).copied();
        let range = |a: usize| values(a).fold(f64::NEG_INFINITY, f64::max) - values(a).fold(f64::INFINITY, f64::min);
        Self { ranges: (0..folded.n).map(range).collect() }
    }

    /// States that move, with their ranges.
    fn moving(&self) -> impl Iterator<Item = (usize, f64)> + '_ {
        self.ranges.iter().copied().enumerate().filter(|(_, range)| *range > 0.0)
    }

    /// Root mean square of the noise over the states, in ranges.
    fn noise(&self, smooth: &Smooth) -> f64 {
        let squares: Vec<f64> = self.moving().map(|(a, range)| (smooth.noise[a] / range).powi(2)).collect();
        (squares.iter().sum::<f64>() / squares.len().max(1) as f64).sqrt()
    }

    /// Distance of a cycle from the samples, root mean square, in ranges, in the nearest phase within `shift`.
    /// The samples may tell the cycle several times.
    fn distance(&self, cycle: &Profile, (folded, period): (&Folded, f64), shift: f64) -> f64 {
        /// Shifts looked at on either side, and rounds of them, each in the middle of the round before.
        const SHIFTS: i32 = 50;
        const ROUNDS: i32 = 3;
        let copies = (period / cycle.period).round().max(1.0);
        let mut evaluator = cycle.evaluator();
        let mut state = vec![0.0; folded.n];
        let mut apart = |shift: f64| {
            let (mut sum, mut count) = (0.0, 0.0);
            for (k, phase) in folded.phases.iter().enumerate() {
                evaluator.at(copies * phase + shift, &mut state);
                for (a, range) in self.moving() {
                    sum += folded.weights[k] * ((state[a] - folded.states[k * folded.n + a]) / range).powi(2);
                    count += folded.weights[k];
                }
            }
            (sum / count).sqrt()
        };
        let (mut best, mut at) = (apart(0.0), 0.0);
        for round in 0..ROUNDS {
            let (middle, step) = (at, shift / f64::from(SHIFTS).powi(round + 1));
            for k in -SHIFTS..=SHIFTS {
                let there = middle + f64::from(k) * step;
                let distance = apart(there);
                if distance < best {
                    (best, at) = (distance, there);
                }
            }
        }
        best
    }
}

/// A share in per cent, two digits.
fn percent(share: f64) -> String {
    let value = 100.0 * share;
    let rounded = format!("{value:.1e}").parse::<f64>().unwrap_or(value);
    format!("{rounded} %")
}
