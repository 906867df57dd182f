//! Crossings of branches as events: pitchfork, transcritical or undecided, symmetry and side, in words.

use armilla_model::Model;
use armilla_record::{Criticality, End, EndReason, EventKind};
use armilla_stability::{Crossing, CycleProblem, Meeting, Parity, Symmetry};

use crate::ends::{end, rounded_up, short};
use crate::step_events::Found;
use crate::study::Study;
use crate::walk::{CycleStation, WalkPlan};
use crate::words::digits;

/// A crossing with what a switch needs to know of it.
#[derive(Clone)]
pub(crate) struct Met {
    pub crossing: Crossing,
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

fn event(problem: &mut CycleProblem, crossing: Crossing, distance: f64, plan: &WalkPlan<'_>) -> Found {
    let model = &plan.study.model;
    let [along, across] = crossing.parameter_parts;
    // The direction in which the parameter stands still is the one that breaks a symmetry, if any is broken.
    let critical = &crossing.tangents[usize::from(!along.vanishes())];
    let broken = problem.broken_symmetry(&crossing.point, &critical.row.nodes);
    let (kind, said) = match (along.vanishes(), across.vanishes()) {
        (false, false) => (EventKind::Transcritical, "another branch crosses, the parameter moves along both".to_string()),
        (true, true) => (
            EventKind::Branching,
            "another branch crosses; the parameter stands still along both, so the kind is not decided".to_string(),
        ),
        _ => (EventKind::Pitchfork, pitchfork_words(broken.as_ref(), model)),
    };
    let from_side = kind == EventKind::Pitchfork && along.vanishes();
    let mirrored = kind == EventKind::Pitchfork && broken.is_some();
    let criticality = if kind == EventKind::Pitchfork { side(problem, &crossing, from_side) } else { None };
    Found {
        kind,
        distance: plan.sign * distance,
        error: Some(crossing.error),
        period_error: Some(crossing.period_error),
        angle: Some(0.0),
        criticality,
        note: if from_side { format!("met from the branch that is born here; {said}") } else { said },
        located: None,
        form: None,
        point: crossing.point.clone(),
        crossing: Some(Box::new(Met { crossing, both: from_side || !mirrored, mirror: from_side && mirrored })),
    }
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
    let name = |index: usize| model.states()[index].name.as_str();
    let moved = symmetry.image.iter().enumerate().filter(|(i, (j, sign))| i != j || *sign < 0.0);
    let image = |(i, (j, sign)): (usize, &(usize, f64))| format!("{} -> {}{}", name(i), if *sign < 0.0 { "-" } else { "" }, name(*j));
    let listed: Vec<String> = moved.map(image).collect();
    let when = if symmetry.half_period { " half a period later" } else { "" };
    format!("{}{when}", listed.join(", "))
}

/// On which side the pair is born: stable beside the crossing where the other branch is not, or the reverse.
fn side(problem: &mut CycleProblem, crossing: &Crossing, from_side: bool) -> Option<Criticality> {
    // From its side the tangents are told the other way round; the born branch is the one the walk is on.
    let mut turned = crossing.clone();
    if from_side {
        turned.tangents.swap(0, 1);
    }
    let exchange = problem.cross(&turned).ok()?.exchange(0)?;
    match () {
        () if exchange < 0.0 => Some(Criticality::Supercritical),
        () if exchange > 0.0 => Some(Criticality::Subcritical),
        () => None,
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
