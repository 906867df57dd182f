//! What must hold for a branch besides its shape in the file.
//!
//! The same rules guard writing and reading, so that what is on disk can be trusted by every reader.

use std::collections::HashSet;
use std::f64::consts::PI;

use crate::branch_text::BRANCH_FORMAT;
use crate::descent::split_event;
use crate::file_name::{NAMES_ALLOWED, is_branch_name};
use crate::{Branch, Event, EventKind, Multiplier, Point, Solutions};

/// The first contradiction found in a branch, in words.
pub(crate) fn check_branch(branch: &Branch) -> Result<(), String> {
    check_head(branch)?;
    let n = branch.states.len();
    for (k, point) in branch.points.iter().enumerate() {
        check_point(point, n, branch.of).map_err(|what| format!("point {k}: {what}"))?;
    }
    in_order("points", branch.points.iter().map(|point| point.distance))?;
    let mut names = HashSet::new();
    for event in &branch.events {
        check_event(event, branch).map_err(|what| format!("event {}: {what}", event.name))?;
        if !names.insert(&event.name) {
            return Err(format!("two events are named {}", event.name));
        }
    }
    in_order("events", branch.events.iter().map(|event| event.distance))?;
    for end in [&branch.ends.0, &branch.ends.1] {
        finite("value of an end", end.value)?;
        if let crate::EndReason::Equilibrium { value } = end.reason {
            finite("parameter value of the equilibrium at an end", value)?;
        }
    }
    check_profiles(branch)
}

fn check_head(branch: &Branch) -> Result<(), String> {
    if branch.format != BRANCH_FORMAT {
        return Err(format!("the format is {BRANCH_FORMAT}, the branch says {}", branch.format));
    }
    if !is_branch_name(&branch.name) {
        return Err(format!("`{}` is no name of a branch: {NAMES_ALLOWED}", branch.name));
    }
    if let Some(event) = &branch.born_at
        && split_event(event).is_none()
    {
        return Err(format!("`{event}`, where the branch was born, is no name of an event"));
    }
    let (from, to) = branch.range;
    finite("lower end of the range", from)?;
    finite("upper end of the range", to)?;
    if from > to {
        return Err(format!("the range ({from}, {to}) does not ascend"));
    }
    for (name, value) in &branch.fixed {
        finite(&format!("value of {name}"), *value)?;
    }
    finite("accuracy", branch.accuracy)?;
    if branch.accuracy <= 0.0 {
        return Err("the accuracy is not positive".into());
    }
    if branch.states.is_empty() || branch.points.is_empty() {
        return Err("a branch has at least one state and one point".into());
    }
    Ok(())
}

fn check_point(point: &Point, n: usize, of: Solutions) -> Result<(), String> {
    finite("value", point.value)?;
    finite("period", point.period)?;
    finite("distance", point.distance)?;
    // The audits may have overflowed, which the reader should see; they are always numbers.
    not_nan("trivial_defect", point.trivial_defect)?;
    not_nan("liouville_defect", point.liouville_defect)?;
    not_nan("profile_error", point.profile_error)?;
    for (name, values) in
        [("maxima", &point.maxima), ("minima", &point.minima), ("means", &point.means), ("spreads", &point.spreads)]
    {
        measures(name, values, n)?;
        if values.is_empty() {
            return Err(format!("{name} are missing"));
        }
    }
    let (of, what) = match of {
        Solutions::Cycles => (point.multipliers.len(), "multipliers"),
        Solutions::Equilibria => (point.eigenvalues.len(), "eigenvalues"),
    };
    if point.unstable_count > of {
        return Err(format!("more {what} are unstable than there are"));
    }
    if of != point.multipliers.len() + point.eigenvalues.len() {
        return Err("cycles have multipliers, equilibria have eigenvalues, none has both".into());
    }
    for eigenvalue in &point.eigenvalues {
        finite("real part of an eigenvalue", eigenvalue.re)?;
        finite("imaginary part of an eigenvalue", eigenvalue.im)?;
    }
    if let Some(unresolved) = point.unresolved {
        finite("modulus below which multipliers are not resolved", unresolved.below)?;
        not_nan("log_sum of the multipliers that are not resolved", unresolved.log_sum)?;
        if unresolved.below > 0.0 || unresolved.count == 0 {
            return Err("multipliers that are not resolved are some, and inside the unit circle".into());
        }
    }
    point.multipliers.iter().try_for_each(check_multiplier)
}

fn check_multiplier(multiplier: &Multiplier) -> Result<(), String> {
    // Minus infinity stands for a multiplier that is exactly zero.
    if multiplier.log_modulus.is_nan() || multiplier.log_modulus == f64::INFINITY {
        return Err(format!("log_modulus of a multiplier is {}", multiplier.log_modulus));
    }
    if !(multiplier.angle > -PI && multiplier.angle <= PI) {
        return Err(format!("angle {} of a multiplier lies outside (-pi, pi]", multiplier.angle));
    }
    Ok(())
}

fn check_event(event: &Event, branch: &Branch) -> Result<(), String> {
    let named = split_event(&event.name).is_some_and(|(name, kind, _)| name == branch.name && kind == event.kind);
    if !named {
        return Err(format!("the name must be {}/{}<number>", branch.name, event.kind.word()));
    }
    finite("value", event.value)?;
    finite("distance", event.distance)?;
    if event.kind == EventKind::PeriodBlowUp {
        not_nan("period", event.period)?;
    } else {
        finite("period", event.period)?;
    }
    for (name, value) in [("error", event.error), ("period_error", event.period_error), ("angle", event.angle)] {
        finite(name, value.unwrap_or(0.0))?;
    }
    let n = branch.states.len();
    measures("maxima", &event.maxima, n)?;
    measures("minima", &event.minima, n)?;
    measures("means", &event.means, n)?;
    measures("spreads", &event.spreads, n)?;
    let Some(profile) = &event.profile else { return Ok(()) };
    profile.validate().map_err(|fault| fault.to_string())?;
    if profile.n_states == n { Ok(()) } else { Err(format!("a profile of {} states among {n}", profile.n_states)) }
}

fn check_profiles(branch: &Branch) -> Result<(), String> {
    let n = branch.states.len();
    let mut next = 0;
    for stored in &branch.profiles {
        let k = stored.point;
        if k < next || k >= branch.points.len() {
            return Err(format!("profiles must belong to ascending points of the branch, found point {k}"));
        }
        next = k + 1;
        stored.profile.validate().map_err(|fault| format!("profile of point {k}: {fault}"))?;
        if stored.profile.n_states != n {
            return Err(format!("profile of point {k}: {} states among {n}", stored.profile.n_states));
        }
    }
    Ok(())
}

/// A measure for each state, or none where there is no cycle.
fn measures(name: &str, values: &[f64], n: usize) -> Result<(), String> {
    if !values.is_empty() && values.len() != n {
        return Err(format!("{} {name} for {n} states", values.len()));
    }
    values.iter().try_for_each(|&value| finite(name, value))
}

fn in_order(what: &str, distances: impl Iterator<Item = f64>) -> Result<(), String> {
    let mut before = f64::NEG_INFINITY;
    for distance in distances {
        if distance < before {
            return Err(format!("the {what} are not in the order along the branch: {distance} after {before}"));
        }
        before = distance;
    }
    Ok(())
}

fn finite(name: &str, value: f64) -> Result<(), String> {
    if value.is_finite() { Ok(()) } else { Err(format!("{name} is {value}, not a finite number")) }
}

fn not_nan(name: &str, value: f64) -> Result<(), String> {
    if value.is_nan() { Err(format!("{name} is not a number")) } else { Ok(()) }
}
