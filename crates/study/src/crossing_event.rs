//! Crossings of branches as events: pitchfork, transcritical or undecided, symmetry and side, in words.

use armilla_model::Model;
use armilla_record::{Criticality, End, EndReason, EventKind};
use armilla_stability::{CycleCrossing, CycleProblem, Meeting, Parity, Symmetry};

use crate::ends::{end, rounded_up, short};
use crate::step_events::Found;
use crate::study::Study;
use crate::walk::{CycleStation, WalkPlan};
use crate::words::digits;

/// A crossing with what a switch needs to know of it.
#[derive(Clone)]
pub(crate) struct Met {
    pub crossing: CycleCrossing,
    /// Whether both sides of the branch that crosses are different, or the mirror images of each other.
    pub both: bool,
    /// Whether the branch it was met on goes on as its own mirror image.
    pub mirror: bool,
}

/// What a look for a crossing brought.
pub(crate) enum Looked {
    Found(Box<Found>),
    /// The stations stand on two branches that do not meet.
    Gap,
    NotLocated,
}

/// The crossing between two stations.
pub(crate) fn between(
    problem: &mut CycleProblem,
    (before, after): (&CycleStation, &CycleStation),
    plan: &WalkPlan<'_>,
) -> Looked {
    match problem.locate_crossing(before, after) {
        Ok(Meeting::Crossing(crossing)) => {
            let distance = before.distance + crossing.share * (after.distance - before.distance);
            Looked::Found(Box::new(event(problem, *crossing, distance, plan)))
        }
        Ok(Meeting::Gap) => Looked::Gap,
        Err(_) => Looked::NotLocated,
    }
}

/// The crossing a station stands on.
pub(crate) fn at(problem: &mut CycleProblem, station: &CycleStation, plan: &WalkPlan<'_>) -> Option<Found> {
    let crossing = problem.locate_crossing_at(station)?;
    Some(event(problem, *crossing, station.distance, plan))
}

/// What is said of a crossing besides its numbers.
struct Told {
    kind: EventKind,
    criticality: Option<Criticality>,
    note: String,
    /// How to go on from there; none where there is nothing to follow.
    ways: Option<Ways>,
}

/// See [`Met`].
struct Ways {
    both: bool,
    mirror: bool,
}

fn event(problem: &mut CycleProblem, crossing: CycleCrossing, distance: f64, plan: &WalkPlan<'_>) -> Found {
    let [along, across] = crossing.parameter_parts;
    let Told { kind, criticality, note, ways } = match (along.vanishes(), across.vanishes()) {
        (false, false) => Told {
            kind: EventKind::Transcritical,
            criticality: None,
            note: "another branch crosses; the parameter moves along both".into(),
            ways: Some(Ways { both: true, mirror: false }),
        },
        (true, true) => Told {
            kind: EventKind::Branching,
            criticality: None,
            note: "another branch crosses; the parameter stands still along both, so the kind is not decided".into(),
            ways: Some(Ways { both: true, mirror: false }),
        },
        (from_side, _) => pitchfork(problem, &crossing, from_side, plan.study),
    };
    Found {
        kind,
        distance: plan.sign * distance,
        error: Some(crossing.error),
        period_error: Some(crossing.period_error),
        angle: Some(0.0),
        criticality,
        note,
        located: None,
        form: None,
        point: crossing.point.clone(),
        crossing: ways.map(|Ways { both, mirror }| Box::new(Met { crossing, both, mirror })),
    }
}

/// A crossing along one branch of which the parameter stands still: a pair of branches is born, or cycles fill a continuum.
fn pitchfork(problem: &mut CycleProblem, crossing: &CycleCrossing, from_side: bool, study: &Study) -> Told {
    // The direction in which the parameter stands still is the one that breaks a symmetry, if any is broken.
    let turned = if from_side { crossing.clone().turned() } else { crossing.clone() };
    let broken = problem.broken_symmetry(&crossing.point, &turned.tangents[1].row.nodes);
    let said = pitchfork_words(broken.as_ref(), &study.model);
    let side = side(problem, &turned, study);
    if side == Side::Continuum {
        let note = "cycles fill a continuum at this one value: the branch that crosses is not followed".into();
        return Told { kind: EventKind::Branching, criticality: None, note, ways: None };
    }
    let criticality = match side {
        Side::Stable => Some(Criticality::Supercritical),
        Side::Unstable => Some(Criticality::Subcritical),
        _ => None,
    };
    let note = if from_side { format!("met from the branch that is born here; {said}") } else { said };
    // Of two sides that a symmetry exchanges one is enough.
    let ways = Ways { both: from_side || broken.is_none(), mirror: from_side && broken.is_some() };
    Told { kind: EventKind::Pitchfork, criticality, note, ways: Some(ways) }
}

fn pitchfork_words(broken: Option<&(Symmetry, Parity)>, model: &Model) -> String {
    match broken {
        Some((symmetry, parity)) if symmetry.half_period => format!(
            "breaks the symmetry {}; half-period multiplier {} to within {}",
            symmetry_words(symmetry, model),
            digits(parity.multiplier),
            rounded_up(parity.residue.max(f64::EPSILON)),
        ),
        Some((symmetry, _)) => format!("breaks the symmetry {}", symmetry_words(symmetry, model)),
        None => "a pair of branches is born, though no symmetry that exchanges them was found".into(),
    }
}

/// A symmetry in the names of the states: what moves, and when.
pub(crate) fn symmetry_words(symmetry: &Symmetry, model: &Model) -> String {
    /// States named one by one; of more a reader sees the rule, or the beginning.
    const NAMED: usize = 4;
    let name = |index: usize| model.states()[index].name.as_str();
    let moved = symmetry.image.iter().enumerate().filter(|(i, (j, sign))| i != j || *sign < 0.0);
    let image = |(i, (j, sign)): (usize, &(usize, f64))| {
        format!("{} -> {}{}", name(i), if *sign < 0.0 { "-" } else { "" }, name(*j))
    };
    let mut listed: Vec<String> = moved.map(image).collect();
    let flips = symmetry.image.iter().enumerate().all(|(i, (j, sign))| i == *j && *sign < 0.0);
    let words = if flips && listed.len() > NAMED {
        "every state changes its sign".to_string()
    } else {
        let more = listed.len().saturating_sub(NAMED);
        listed.truncate(NAMED);
        let rest = if more > 0 { format!(" and {more} more") } else { String::new() };
        listed.join(", ") + &rest
    };
    format!("{words}{}", if symmetry.half_period { " half a period later" } else { "" })
}

/// What is born at a pitchfork.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Side {
    /// Stable cycles where the other branch is not, as far as the critical multiplier goes.
    Stable,
    /// The reverse.
    Unstable,
    /// Nothing moves with the parameter.
    Continuum,
    Unknown,
}

fn side(problem: &mut CycleProblem, crossing: &CycleCrossing, study: &Study) -> Side {
    /// |log mu| that multipliers beside a crossing are known to.
    const ONE: f64 = 1e-7;
    let Ok(mut crossed) = problem.cross(crossing) else { return Side::Unknown };
    let Some(exchange) = crossed.exchange(0) else { return Side::Unknown };
    let still = crossing.error + study.file.accuracy * (study.range.1 - study.range.0);
    match () {
        () if exchange.abs() <= ONE && crossed.offset(0).abs() <= still => Side::Continuum,
        () if exchange < 0.0 => Side::Stable,
        () => Side::Unstable,
    }
}

/// The end of a walk at an event beyond which it would go on as its own mirror image.
pub(crate) fn mirror_image(study: &Study, event: &Found) -> Option<End> {
    event.crossing.as_ref().filter(|met| met.mirror)?;
    let value = event.point.unknowns.parameter;
    let words = format!(
        "meets the symmetric branch in a pitchfork at {} = {} and goes on as its own mirror image, which is not computed twice",
        study.file.follow.parameter,
        short(study, value)
    );
    Some(end(EndReason::ReturnsToParent, value, words))
}
