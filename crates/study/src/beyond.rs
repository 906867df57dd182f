//! What to expect beyond the torus points of a branch, in words.
//!
//! The normal form says what is near the threshold, no more: a torus that is born stable may lock to a cycle of many turns
//! or break up a little further on (Kuznetsov 2004, Elements of Applied Bifurcation Theory, sec. 7.3).

use std::f64::consts::TAU;

use armilla_record::{Branch, Criticality, Event, EventKind};

use crate::ends::shown;
use crate::words::digits;

/// One sentence or two for each torus point of a branch, with the name of the event.
pub fn beyond(branch: &Branch) -> Vec<(String, String)> {
    let events = branch.events.iter().filter(|event| event.kind == EventKind::Torus);
    events.map(|event| (event.name.clone(), sentences(branch, event))).collect()
}

/// Unstable counts of the nearest points on both sides along the branch, and of the unstable side whether its parameter is
/// higher.
struct Sides {
    fewer: usize,
    unstable_above: Option<bool>,
}

fn sides(branch: &Branch, event: &Event) -> Option<Sides> {
    let before = branch.points.iter().rev().find(|point| point.distance < event.distance);
    let after = branch.points.iter().find(|point| point.distance > event.distance);
    let known = [before, after].into_iter().flatten();
    let fewer = known.clone().map(|point| point.unstable_count).min()?;
    let unstable = known.max_by_key(|point| point.unstable_count)?;
    // With one neighbour only, as on an edge, which side it is cannot be told from counts.
    let told = before.is_some() && after.is_some() && unstable.unstable_count > fewer;
    Some(Sides { fewer, unstable_above: told.then_some(unstable.value > event.value) })
}

fn sentences(branch: &Branch, event: &Event) -> String {
    let name = &branch.parameter.name;
    let value = shown(branch.range, event.value);
    let Sides { fewer, unstable_above } = sides(branch, event).unwrap_or(Sides { fewer: 0, unstable_above: None });
    let side = |above: bool| format!("for {name} {} {value}", if above { "above" } else { "below" });
    let unstable = unstable_above.map_or_else(|| "where the cycle is unstable".into(), side);
    let stable = unstable_above.map_or_else(|| "where the cycle is stable".into(), |above| side(!above));
    let beat = event.angle.map_or(f64::INFINITY, |angle| event.period * TAU / angle);
    let rhythm =
        format!("rotation of {} rad a period: a beat every {}", digits(event.angle.unwrap_or(0.0)), digits(beat));
    match event.criticality {
        None => format!(
            "what comes {unstable} is not decided here (see the note); cycles of several turns, tori and jumps are all \
             possible: simulate there"
        ),
        Some(_) if fewer > 0 => {
            format!("the cycle is unstable on both sides, so no torus near it is seen in a simulation ({rhythm})")
        }
        Some(Criticality::Supercritical) => format!(
            "{unstable} expect the oscillation to swell and shrink: a stable torus round the cycle, its width growing from \
             zero like the root of the distance ({rhythm}); further on it may lock to a cycle of several turns or break up"
        ),
        Some(Criticality::Subcritical) => format!(
            "{unstable} expect the motion to leave the cycle, in swings that grow ({rhythm}), for something not near it; \
             {stable} an unstable torus surrounds the cycle and closes in on it, so that disturbances may throw the motion \
             off before the threshold"
        ),
    }
}
