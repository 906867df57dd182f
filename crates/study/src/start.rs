//! From the start of a study to a first cycle or equilibrium.

use std::sync::atomic::AtomicBool;

use armilla_flow::{SettleOptions, Verdict, settle};
use armilla_model::Batch;
use armilla_record::Profile;
use armilla_stability::{CycleProblem, CycleSpec};

use crate::branch::Entry;
use crate::equilibrium_start::{equilibrium_at, near_states};
use crate::error::StudyError;
use crate::families::{family, family_at_rest};
use crate::file::{Start, Values};
use crate::progress::{Observer, Progress};
use crate::settings::cycle_settings;
use crate::study::Study;
use crate::words::{digits, listed, settling_words, unsettled_words};

/// The first cycle or equilibrium with the problem it belongs to.
pub(crate) struct First {
    pub entry: Entry,
    /// Turns of a cycle; 1 for an equilibrium, as of the cycles born there.
    pub turns: usize,
    /// Anything the user must know about the start.
    pub notes: Vec<String>,
}

/// Intervals per turn of the first guess; the mesh is then chosen from the accuracy.
pub(crate) const FIRST_INTERVALS: usize = 40;

/// |log mu| of a second multiplier at 1 on a cycle of a family, as far as a badly conditioned cycle tells.
const OF_A_FAMILY: f64 = 1e-4;

/// Finds the first cycle or equilibrium.
pub(crate) fn first_solution(
    study: &Study,
    abort: &AtomicBool,
    observer: &mut dyn Observer,
) -> Result<First, StudyError> {
    let transient = match &study.file.start {
        Start::Settle { transient, .. } => *transient,
        Start::Samples { period, .. } => return crate::samples::first_from_samples(study, *period, (abort, observer)),
        Start::Equilibrium { near } => return first_equilibrium(study, near),
    };
    check_rates(study)?;
    settled(study, &study.model.begin(), transient, (abort, observer))
}

/// The cycle that the motion settles on from a state at time 0.
pub(crate) fn settled(
    study: &Study,
    begin: &[f64],
    transient: Option<f64>,
    (abort, observer): (&AtomicBool, &mut dyn Observer),
) -> Result<First, StudyError> {
    observer.notice(Progress::Settling);
    let field = study.model.field();
    let forcing_period = field.forcing_period(&study.start_parameters, study.free).map(|[period, ..]| period);
    let options = SettleOptions { transient, forcing_period, abort, ..SettleOptions::default() };
    let settled = settle(field.as_ref(), &study.start_parameters, begin, &options)
        .map_err(|error| StudyError::Settling { words: settling_words(&error, &study.model), error })?;
    let notes: Vec<String> = settled.pushes.iter().map(|push| push_note(study, push)).collect();
    notes.iter().for_each(|note| observer.notice(Progress::Note(note)));
    let cycle = match settled.verdict {
        Verdict::Cycle(cycle) => cycle,
        Verdict::Equilibrium(rest) => {
            let at_rest = || StudyError::SettlesAtRest { growth: rest.growth(), states: named(study, &rest.state) };
            let (problem, point) = equilibrium_at(study, &rest.state).map_err(|_| at_rest())?;
            let entry = Entry::Equilibrium(Box::new(problem), Box::new(point));
            return Ok(First { entry, turns: 1, notes });
        }
        other => return Err(StudyError::DidNotSettle { evidence: unsettled_words(&other, &study.model) }),
    };
    let settled_turns = cycle.turns.max(1);
    let copies = copies(&cycle.orbit, settled_turns);
    let turns = settled_turns / copies;
    let settings = cycle_settings(study, turns);
    let intervals = settings.mesh.fixed.unwrap_or(FIRST_INTERVALS * turns);
    let profile = part(&cycle.profile(settings.degree, intervals * copies), copies);
    let spec = cycle_spec(study);
    let value = study.start_parameters[study.free];
    let (mut problem, point) = CycleProblem::start(spec, settings, &profile, value).map_err(|fault| {
        let no_cycle = || StudyError::NoCycle { reason: fault.to_string() };
        family(study, &profile, cycle.neutral).unwrap_or_else(no_cycle)
    })?;
    // Newton's method may find one of a family all the same; all of them have a second multiplier at 1.
    let near_one = problem.spectrum(&point).ok().and_then(|spectrum| spectrum.nearest_to_one());
    if near_one.is_some_and(|log| log.abs() < OF_A_FAMILY)
        && let Some(family) = family(study, &profile, false)
    {
        return Err(family);
    }
    Ok(First { entry: Entry::Cycle(Box::new(problem), Box::new(point)), turns, notes })
}

fn first_equilibrium(study: &Study, near: &Values) -> Result<First, StudyError> {
    if study.model.forcing().is_some() {
        return Err(StudyError::NotInThisVersion {
            what: "an equilibrium of a forced model",
            instead: "a model whose rates use the time `t` does not rest; start on a cycle: start: Settle(at: { ... })",
        });
    }
    let (problem, point) = equilibrium_at(study, &near_states(study, near))?;
    let notes = match family_at_rest(study, &point.state) {
        Some(StudyError::Families { reason, .. }) => {
            vec![format!("cycles of this model come in families ({reason}) and none is followed")]
        }
        _ => Vec::new(),
    };
    let entry = Entry::Equilibrium(Box::new(problem), Box::new(point));
    Ok(First { entry, turns: 1, notes })
}

/// The model as the cycle problem needs it.
pub(crate) fn cycle_spec(study: &Study) -> CycleSpec {
    CycleSpec {
        field: study.model.field(),
        parameters: study.parameters.clone(),
        free: study.free,
        typical: study.model.begin().iter().map(|value| value.abs()).collect(),
        parameter_scale: study.range.1 - study.range.0,
    }
}

/// How many copies of one cycle a settled motion is: 1 as a rule, more where something beside the cycle itself (a state
/// that dies out) kept it from closing earlier.
pub(crate) fn copies(orbit: &Profile, turns: usize) -> usize {
    /// Distance of shifted copies, relative to the range of each state that moves, that tells them apart: a doubled
    /// cycle nearer than that to its threshold could not have settled.
    const SAME: f64 = 1e-6;
    /// A state that moves less than this share of its own size does not decide.
    const STILL: f64 = 1e-9;
    let extremes = orbit.extremes();
    let decides = |(low, high): &(f64, f64)| high - low > STILL * high.abs().max(low.abs());
    let largest = extremes.iter().map(|(low, high)| high - low).fold(0.0, f64::max);
    let alike = |count: usize| {
        let mut evaluator = orbit.evaluator();
        let (mut here, mut there) = (vec![0.0; orbit.n_states], vec![0.0; orbit.n_states]);
        orbit.node_times().iter().all(|time| {
            evaluator.at(*time, &mut here);
            evaluator.at(time + 1.0 / count as f64, &mut there);
            let near = |((a, b), (low, high)): ((&f64, &f64), &(f64, f64))| {
                !decides(&(*low, *high)) || high - low < STILL * largest || (a - b).abs() < SAME * (high - low)
            };
            here.iter().zip(&there).zip(&extremes).all(near)
        })
    };
    (2..=turns).rev().find(|count| turns.is_multiple_of(*count) && alike(*count)).unwrap_or(1)
}

/// The first of `copies` equal parts of a profile, with its mesh.
pub(crate) fn part(profile: &Profile, copies: usize) -> Profile {
    if copies == 1 {
        return profile.clone();
    }
    let intervals = (profile.intervals() / copies).max(1);
    let mut first = Profile {
        n_states: profile.n_states,
        degree: profile.degree,
        period: profile.period / copies as f64,
        mesh: (0..=intervals).map(|i| i as f64 / intervals as f64).collect(),
        values: Vec::new(),
    };
    let mut evaluator = profile.evaluator();
    let mut state = vec![0.0; profile.n_states];
    for time in first.node_times() {
        evaluator.at(time / copies as f64, &mut state);
        first.values.extend_from_slice(&state);
    }
    first
}

/// States with their names.
pub(crate) fn named(study: &Study, values: &[f64]) -> Vec<(String, f64)> {
    study.model.states().iter().map(|state| state.name.clone()).zip(values.iter().copied()).collect()
}

pub(crate) fn check_rates(study: &Study) -> Result<(), StudyError> {
    let begin = study.model.begin();
    let mut rates = vec![0.0; begin.len()];
    let batch = Batch { len: 1, time: &[0.0], states: &begin, parameters: &study.start_parameters };
    study.model.field().evaluator(&[]).rates(batch, &mut rates);
    match rates.iter().position(|rate| !rate.is_finite()) {
        None => Ok(()),
        Some(index) => Err(StudyError::RateAtStart {
            state: study.model.states()[index].name.clone(),
            formula: study.model.rates().get(index).map(|formula| formula.text.clone()).unwrap_or_default(),
            states: named(study, &begin),
        }),
    }
}

fn push_note(study: &Study, push: &armilla_flow::Push) -> String {
    let states = listed(&named(study, &push.equilibrium.state));
    format!("the start sat on an unstable state of rest ({states}) and was pushed off it by {}", digits(push.size))
}
