//! The main job: start, follow, locate, switch, write.

use std::collections::VecDeque;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, Ordering};

use armilla_figure::Figure;
use armilla_record::{Branch, CascadeRow, EndReason, EventKind, Reached, RecordError, Results, Threshold};
use armilla_stability::{Born, CycleProblem, SwitchFault};

use crate::branch::{Entry, Finished, Lineage, Parent, Run, Switchable, Way, follow_branch};
use crate::cascade::cascade;
use crate::crossings::leave_out_known;
use crate::equilibrium_births::{Crossings, ends_where_born, enter};
use crate::error::StudyError;
use crate::joins::Atlas;
use crate::neutral::neutral_note;
use crate::progress::Observer;
use crate::start::first_solution;
use crate::step_events::LOCATED_BY_BRACKET;
use crate::study::Study;

/// How a run is to be done.
pub struct TraceOptions<'a> {
    /// Results folder; beside the study where absent.
    pub folder: Option<PathBuf>,
    /// Whether an existing results folder may be replaced.
    pub replace: bool,
    /// Follows every branch to its first doubling only: the doubling sequence in the shortest time.
    pub cascade: bool,
    /// Ends the run cleanly when set.
    pub abort: &'a AtomicBool,
}

/// What a run brought.
#[derive(Debug)]
pub struct Traced {
    /// All branches, in order of descent.
    pub branches: Vec<Branch>,
    /// Where everything was written.
    pub folder: PathBuf,
    /// What was asked and not reached, one sentence each.
    pub shortfalls: Vec<String>,
    /// The doubling sequence with its limit, where three doublings or more follow each other.
    pub cascade: Vec<CascadeRow>,
    /// Notes on the start.
    pub notes: Vec<String>,
    /// Whether the user stopped the run.
    pub interrupted: bool,
}

/// A branch waiting to be followed.
pub(crate) struct Waiting {
    pub lineage: Lineage,
    entry: Entry,
}

impl Waiting {
    /// Parameter value at which it begins.
    fn birth_value(&self) -> f64 {
        match &self.entry {
            Entry::Cycle(_, point) => point.unknowns.parameter,
            Entry::Birth(born) | Entry::Hopf(born, _) => born.birth.unknowns.parameter,
            Entry::Equilibrium(_, point) => point.parameter,
            Entry::Crossing(_, from) => from.birth.parameter,
            Entry::CyclesCross(crossed) => crossed.birth.unknowns.parameter,
        }
    }
}

/// Does the study and writes its results.
///
/// # Errors
/// [`StudyError`]; nothing was written unless it is a fault of the machine in the middle of the run, and then
/// everything finished before is kept.
pub fn trace(study: &Study, options: &TraceOptions<'_>, observer: &mut dyn Observer) -> Result<Traced, StudyError> {
    let folder = options.folder.clone().unwrap_or_else(|| study.results_folder());
    let mut results = Results::create(&folder, options.replace)?;
    let first = first_solution(study, options.abort, observer)?;
    results.write_study(&study.understood())?;
    let mut traced = Traced {
        branches: Vec::new(),
        folder: results.folder().to_path_buf(),
        shortfalls: Vec::new(),
        cascade: Vec::new(),
        notes: first.notes,
        interrupted: false,
    };
    let lineage = Lineage { name: "a".into(), born_at: None, doublings: 0, turns: first.turns, line: Vec::new() };
    let mut queue = VecDeque::from([Waiting { lineage, entry: first.entry }]);
    let mut crossings = Crossings::default();
    let mut points_left = study.file.pursue.points;
    let mut atlas = Atlas::default();
    while let Some(waiting) = queue.pop_front() {
        let mut keep = |event: &armilla_record::Event| results.write_event(event).map_err(StudyError::from);
        let mut run = Run {
            study,
            abort: options.abort,
            observer: &mut *observer,
            keep: &mut keep,
            to_first_doubling: options.cascade,
            points_left,
            atlas: &atlas,
        };
        let lineage = waiting.lineage.clone();
        let mut finished = match follow_branch(&mut run, &lineage, waiting.entry) {
            Ok(finished) => finished,
            Err(StudyError::NoCycle { reason } | StudyError::NoEquilibrium { reason }) if lineage.born_at.is_some() => {
                traced.shortfalls.push(format!("branch {} could not be followed: {reason}", lineage.name));
                continue;
            }
            Err(fault) => return Err(fault),
        };
        points_left = run.points_left;
        leave_out_known(&mut finished, &traced.branches, &mut queue);
        if let Parent::Cycles(problem) = &finished.problem {
            atlas.add(std::mem::take(&mut finished.followed), problem);
        }
        drop_other_end(study, &lineage, &mut finished.branch, &mut queue);
        drop_born_here(study, &mut finished.branch, &mut queue);
        let met = crossings.sift(study, &mut finished);
        queue.retain(|waiting| waiting.lineage.born_at.as_ref().is_none_or(|event| !met.contains(event)));
        results.write_branch(&finished.branch)?;
        if options.abort.load(Ordering::Relaxed) {
            traced.branches.push(finished.branch);
            break;
        }
        let room = study.file.pursue.branches.saturating_sub(traced.branches.len() + 1 + queue.len());
        queue.extend(children(study, &lineage, &finished, room, &mut traced.shortfalls));
        traced.branches.push(finished.branch);
        results.write_thresholds(&Threshold::rows(&traced.branches))?;
        if points_left == 0 {
            break;
        }
    }
    traced.interrupted = options.abort.load(Ordering::Relaxed);
    for waiting in &queue {
        let why = if traced.interrupted { "the run was stopped" } else { "all points allowed by `pursue` were used" };
        traced.shortfalls.push(format!("branch {} was not followed: {why}", waiting.lineage.name));
    }
    traced.notes.extend(neutral_note(&traced.branches));
    conclude(study, results, traced, options.cascade)
}

/// A doubled branch that returns to its parent at another doubling of it has been followed from both: the branch that
/// waits to be entered there is the same one.
fn drop_other_end(study: &Study, lineage: &Lineage, branch: &mut Branch, queue: &mut VecDeque<Waiting>) {
    let (Some(born_at), EndReason::ReturnsToParent) = (&lineage.born_at, &branch.ends.1.reason) else { return };
    let parent = born_at.split('/').next().unwrap_or_default();
    let value = branch.ends.1.value;
    let gap = |waiting: &Waiting| (waiting.birth_value() - value).abs();
    let sibling = |waiting: &&Waiting| {
        waiting.lineage.turns == lineage.turns
            && waiting.lineage.born_at.as_ref().is_some_and(|event| event.split('/').next() == Some(parent))
    };
    // The return was extrapolated from the last point; it is off by less than it is away from it.
    let width = study.range.1 - study.range.0;
    let away = branch.points.last().map_or(0.0, |point| (point.value - value).abs());
    let same = away.clamp(1e-6 * width, 1e-2 * width);
    let nearest = queue.iter().filter(sibling).min_by(|a, b| gap(a).total_cmp(&gap(b)));
    let Some(name) = nearest.filter(|w| gap(w) < same).map(|w| w.lineage.name.clone()) else {
        return;
    };
    if let Some(at) = queue.iter().position(|waiting| waiting.lineage.name == name)
        && let Some(waiting) = queue.remove(at)
        && let Some(met) = &waiting.lineage.born_at
    {
        branch.ends.1.value = waiting.birth_value();
        branch.ends.1.words = format!("returns to its parent at {met}; the branch born there is this one");
    }
}

/// A branch of cycles that ends at a Hopf point where another waits to be entered has been followed from both ends.
fn drop_born_here(study: &Study, branch: &mut Branch, queue: &mut VecDeque<Waiting>) {
    let here = |waiting: &Waiting| ends_where_born(study, branch, &waiting.entry);
    if let Some(at) = queue.iter().position(here)
        && let Some(waiting) = queue.remove(at)
        && let Some(met) = &waiting.lineage.born_at
    {
        branch.ends.1.words.push_str(&format!("; this is {met}, and the branch born there is this one"));
    }
}

/// The branches born at the events of a finished one.
fn children(
    study: &Study,
    lineage: &Lineage,
    finished: &Finished,
    room: usize,
    shortfalls: &mut Vec<String>,
) -> Vec<Waiting> {
    let mut children = Vec::new();
    for Switchable { event, way } in &finished.births {
        if matches!(way, Way::Doubling { .. }) && lineage.doublings >= study.file.pursue.doublings {
            continue;
        }
        if children.len() >= room {
            shortfalls.push(format!(
                "the branch born at {event} was not followed: `pursue` allows {} branches",
                study.file.pursue.branches
            ));
            continue;
        }
        let entry = match &finished.problem {
            Parent::Cycles(problem) => enter_from_cycles(problem, way).map_err(|fault| fault.to_string()),
            Parent::Equilibria(problem) => enter(study, problem, way),
        };
        match entry {
            Err(fault) => shortfalls.push(format!("at {event} {fault}")),
            // Born on the edge of the range and leading out of it: nothing to follow.
            Ok(Entry::Birth(born) | Entry::Hopf(born, _)) if is_outside(study, &born) => {}
            Ok(entry) => children.push(Waiting { lineage: child_lineage(lineage, event, way), entry }),
        }
    }
    children
}

/// The way onto what is born at an event of cycles.
fn enter_from_cycles(problem: &CycleProblem, way: &Way) -> Result<Entry, SwitchFault> {
    Ok(match way {
        Way::Doubling { located, form } => Entry::Birth(Box::new(problem.double(located, form.as_ref())?)),
        Way::CyclesCross(met) if met.both => Entry::CyclesCross(Box::new(problem.cross(&met.crossing)?)),
        // The other side is the mirror image.
        Way::CyclesCross(met) => Entry::Birth(Box::new(problem.cross(&met.crossing)?.born())),
        // Events of equilibria are met on branches of equilibria.
        Way::Hopf { .. } | Way::Crossing { .. } => return Err(SwitchFault),
    })
}

/// Whether a branch begins outside the asked range though it is born on its edge.
fn is_outside(study: &Study, born: &Born) -> bool {
    let value = born.point.unknowns.parameter;
    value < study.range.0 || value > study.range.1
}

fn child_lineage(parent: &Lineage, event: &str, way: &Way) -> Lineage {
    // `a/doubling1` gives birth to `a.doubling1`.
    let (name, born_at) = (event.replace('/', "."), Some(event.to_string()));
    match way {
        Way::Doubling { .. } => Lineage {
            name,
            born_at,
            doublings: parent.doublings + 1,
            turns: 2 * parent.turns,
            line: parent.line.iter().copied().chain([way.threshold()]).collect(),
        },
        Way::CyclesCross(_) => {
            Lineage { name, born_at, doublings: parent.doublings, turns: parent.turns, line: Vec::new() }
        }
        Way::Hopf { .. } | Way::Crossing { .. } => Lineage { name, born_at, doublings: 0, turns: 1, line: Vec::new() },
    }
}

/// Sorts, writes tables and figures, and says what was not reached.
fn conclude(study: &Study, mut results: Results, mut traced: Traced, cascade_only: bool) -> Result<Traced, StudyError> {
    let order = armilla_record::descent_order(&traced.branches);
    let mut slots: Vec<Option<Branch>> = traced.branches.drain(..).map(Some).collect();
    traced.branches = order.into_iter().filter_map(|index| slots[index].take()).collect();
    results.write_thresholds(&Threshold::rows(&traced.branches))?;
    traced.cascade = cascade(&traced.branches);
    if !traced.cascade.is_empty() {
        results.write_cascade(&traced.cascade)?;
    }
    traced.shortfalls.extend(shortfalls(study, &traced.branches, cascade_only));
    let failed = write_figures(&study.file.figures, &traced.branches, &mut results)?;
    traced.shortfalls.extend(failed);
    results.finish()?;
    Ok(traced)
}

/// Draws figures into a results folder; returns what could not be drawn, in sentences.
pub(crate) fn write_figures(
    figures: &[Figure],
    branches: &[Branch],
    results: &mut Results,
) -> Result<Vec<String>, StudyError> {
    let mut failed = Vec::new();
    let (mut diagrams, mut portraits) = (0, 0);
    for figure in figures {
        let name = match figure {
            Figure::Diagram(_) => {
                diagrams += 1;
                format!("diagram{diagrams}")
            }
            Figure::Portrait(_) => {
                portraits += 1;
                format!("portrait{portraits}")
            }
        };
        match figure.draw(branches) {
            Ok(svg) => results.write_figure(&name, &svg)?,
            Err(fault) => failed.push(format!("figure {name} was not drawn: {fault}")),
        }
    }
    Ok(failed)
}

/// Draws the figures of a results folder again from its branch files.
///
/// # Errors
/// [`StudyError`] where the folder cannot be read or written.
pub fn redraw(folder: &Path) -> Result<Vec<String>, StudyError> {
    let mut results = Results::open(folder)?;
    let text = results.read_study()?;
    let shown = folder.join("study.ron").display().to_string();
    let file = crate::study::parse(armilla_model::Source { file: &shown, text: &text })?;
    let branches = results.read_all_branches()?;
    if branches.is_empty() {
        return Err(RecordError::NotResults { path: folder.to_path_buf(), why: "it holds no branch yet".into() }.into());
    }
    write_figures(&file.figures, &branches, &mut results)
}

fn shortfalls(study: &Study, branches: &[Branch], cascade_only: bool) -> Vec<String> {
    let mut found = Vec::new();
    for branch in branches {
        for end in [&branch.ends.0, &branch.ends.1] {
            let reached = matches!(
                end.reason,
                EndReason::Edge
                    | EndReason::Closed
                    | EndReason::Equilibrium { .. }
                    | EndReason::ReturnsToParent
                    | EndReason::Joins { .. }
                    | EndReason::Continuum
                    | EndReason::Unbounded
                    | EndReason::PeriodBlowUp
            );
            if !reached && !cascade_only {
                found.push(format!("branch {} stops early: {}", branch.name, end.words));
            }
        }
        for event in branch.events.iter().filter(|event| event.kind == EventKind::Unresolved) {
            found.push(format!("{} is unresolved: {}", event.name, event.note));
        }
        let bracketed =
            branch.events.iter().filter(|event| event.kind == EventKind::Doubling && event.note == LOCATED_BY_BRACKET);
        for event in bracketed {
            found.push(format!(
                "the branch born at {} was not entered: its doubling is known by a bracket only",
                event.name
            ));
        }
        found.extend(missed_accuracy(study, branch));
    }
    for target in &study.file.targets {
        // An edge or the start at the same value is the cycle that was wanted there too.
        let wanted = |event: &armilla_record::Event| {
            matches!(event.kind, EventKind::Target | EventKind::Edge | EventKind::Start) && event.value == *target
        };
        let met = branches.iter().flat_map(|branch| &branch.events).any(wanted);
        if !met {
            found.push(format!("no cycle was met at the target {} = {target}", study.file.follow.parameter));
        }
    }
    found
}

/// What the points of a branch say that miss the accuracy.
fn missed_accuracy(study: &Study, branch: &Branch) -> Option<String> {
    let missed = branch.points.iter().filter(|point| point.profile_error > study.file.accuracy);
    let worst = missed.max_by(|a, b| a.profile_error.total_cmp(&b.profile_error))?;
    let why = match worst.reached {
        Reached::GivenMesh => "the mesh fixed by the study is too coarse",
        Reached::MeshLimit => "the largest mesh allowed is too coarse",
        Reached::Rough => {
            "finer meshes did not help, as where rates have kinks or a cycle comes very near a state of rest"
        }
        _ => "rounding stands in the way",
    };
    Some(format!("branch {} reaches a profile error of {:.1e} only: {why}", branch.name, worst.profile_error))
}
