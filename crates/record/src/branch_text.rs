//! The branch file: a [`Branch`] as sealed RON text, to the last bit and back.
//!
//! The layout is written by hand, because a branch is mostly long lists of numbers, which a general
//! pretty printer puts one a line; it is read by the derived reader of the data types. What is written
//! or read has passed [`crate::check::check_branch`].

use std::io;
use std::path::Path;

use crate::atomic::write_atomic;
use crate::check::check_branch;
use crate::pen::{Layout, Pen};
use crate::seal::{head, open_sealed, write_sealed};
use crate::{Branch, End, EndReason, Event, Multiplier, Point, Profile, Quantity, RecordError};

pub(crate) const WHAT: &str = "branch";

/// Format version of the branch files this crate writes.
pub const BRANCH_FORMAT: u32 = 3;

/// Writes a branch file, atomically.
///
/// # Errors
/// [`RecordError::Inconsistent`] for a branch that contradicts itself, or what the machine refused.
pub fn write_branch_file(path: &Path, branch: &Branch) -> Result<(), RecordError> {
    check_branch(branch).map_err(|what| RecordError::inconsistent(path, what))?;
    write_atomic(path, |out| {
        write_sealed(out, &head(WHAT, BRANCH_FORMAT), |out| branch_text(&mut Pen::new(out, Layout::Lines), branch))
    })
}

/// Reads a branch from the bytes of its file; `path` is for messages.
///
/// # Errors
/// [`RecordError::Format`], [`RecordError::Damaged`], [`RecordError::Malformed`] or
/// [`RecordError::Inconsistent`].
pub fn parse_branch(path: &Path, bytes: &[u8]) -> Result<Branch, RecordError> {
    let text = open_sealed(path, bytes, WHAT, BRANCH_FORMAT)?;
    let mut branch: Branch = ron::from_str(text).map_err(|error| RecordError::Malformed {
        path: path.to_path_buf(),
        line: error.span.start.line,
        column: error.span.start.col,
        what: error.code.to_string(),
    })?;
    // Fields that earlier formats do not have take the values that say so; from here on the branch is one of today's.
    if (1..BRANCH_FORMAT).contains(&branch.format) {
        branch.format = BRANCH_FORMAT;
    }
    check_branch(&branch).map_err(|what| RecordError::inconsistent(path, what))?;
    Ok(branch)
}

fn branch_text(pen: &mut Pen<'_>, branch: &Branch) -> io::Result<()> {
    pen.open("(")?;
    branch_head(pen, branch)?;
    list(pen, "points", &branch.points, point_text)?;
    list(pen, "events", &branch.events, event_text)?;
    pen.field("ends")?;
    pen.open("(")?;
    for end in [&branch.ends.0, &branch.ends.1] {
        pen.line()?;
        end_text(pen, end)?;
        pen.raw(",")?;
    }
    pen.close("),")?;
    list(pen, "profiles", &branch.profiles, |pen, stored| {
        pen.open("(")?;
        pen.field("point")?;
        pen.count(stored.point)?;
        pen.raw(",")?;
        pen.field("profile")?;
        profile_text(pen, &stored.profile)?;
        pen.raw(",")?;
        pen.close(")")
    })?;
    pen.field("of")?;
    pen.variant(branch.of.word())?;
    pen.raw(",")?;
    pen.close(")")?;
    pen.raw("\n")
}

/// A field that holds a list of long values.
fn list<T>(
    pen: &mut Pen<'_>,
    name: &str,
    items: &[T],
    mut write: impl FnMut(&mut Pen<'_>, &T) -> io::Result<()>,
) -> io::Result<()> {
    pen.field(name)?;
    if items.is_empty() {
        return pen.raw("[],");
    }
    pen.open("[")?;
    for item in items {
        pen.line()?;
        write(pen, item)?;
        pen.raw(",")?;
    }
    pen.close("],")
}

/// What the branch is about, before its numbers.
fn branch_head(pen: &mut Pen<'_>, branch: &Branch) -> io::Result<()> {
    pen.field("format")?;
    pen.raw(&branch.format.to_string())?;
    pen.raw(",")?;
    text_field(pen, "armilla", &branch.armilla)?;
    text_field(pen, "name", &branch.name)?;
    pen.field("born_at")?;
    match &branch.born_at {
        Some(event) => {
            pen.raw("Some(")?;
            pen.text(event)?;
            pen.raw("),")?;
        }
        None => pen.raw("None,")?,
    }
    text_field(pen, "model_title", &branch.model_title)?;
    text_field(pen, "model_fingerprint", &branch.model_fingerprint)?;
    list(pen, "states", &branch.states, quantity_text)?;
    pen.field("parameter")?;
    quantity_text(pen, &branch.parameter)?;
    pen.raw(",")?;
    pen.field("range")?;
    pen.raw("(")?;
    pen.float(branch.range.0)?;
    pen.raw(", ")?;
    pen.float(branch.range.1)?;
    pen.raw("),")?;
    list(pen, "fixed", &branch.fixed, |pen, (name, value)| {
        pen.raw("(")?;
        pen.text(name)?;
        pen.raw(", ")?;
        pen.float(*value)?;
        pen.raw(")")
    })?;
    pen.field("accuracy")?;
    pen.float(branch.accuracy)?;
    pen.raw(",")
}

fn text_field(pen: &mut Pen<'_>, name: &str, text: &str) -> io::Result<()> {
    pen.field(name)?;
    pen.text(text)?;
    pen.raw(",")
}

fn quantity_text(pen: &mut Pen<'_>, quantity: &Quantity) -> io::Result<()> {
    pen.raw("(")?;
    for (k, (name, text)) in
        [("name", &quantity.name), ("label", &quantity.label), ("unit", &quantity.unit)].iter().enumerate()
    {
        pen.raw(if k == 0 { "" } else { ", " })?;
        pen.name(name)?;
        pen.text(text)?;
    }
    pen.raw(")")
}

fn end_text(pen: &mut Pen<'_>, end: &End) -> io::Result<()> {
    pen.raw("(")?;
    pen.name("reason")?;
    pen.variant(end.reason.word())?;
    match &end.reason {
        EndReason::Equilibrium { value } => {
            pen.raw("(")?;
            pen.name("value")?;
            pen.float(*value)?;
            pen.raw(")")?;
        }
        EndReason::Joins { branch } => {
            pen.raw("(")?;
            pen.name("branch")?;
            pen.text(branch)?;
            pen.raw(")")?;
        }
        _ => {}
    }
    pen.raw(", ")?;
    pen.name("value")?;
    pen.float(end.value)?;
    pen.raw(", ")?;
    pen.name("words")?;
    pen.text(&end.words)?;
    pen.raw(")")
}

/// Named numbers on the line begun.
fn named_floats(pen: &mut Pen<'_>, numbers: &[(&str, f64)]) -> io::Result<()> {
    for (k, (name, value)) in numbers.iter().enumerate() {
        pen.raw(if k == 0 { "" } else { " " })?;
        pen.name(name)?;
        pen.float(*value)?;
        pen.raw(",")?;
    }
    Ok(())
}

/// Named counts on the line begun.
fn named_counts(pen: &mut Pen<'_>, counts: &[(&str, usize)]) -> io::Result<()> {
    for (k, (name, value)) in counts.iter().enumerate() {
        pen.raw(if k == 0 { "" } else { " " })?;
        pen.name(name)?;
        pen.count(*value)?;
        pen.raw(",")?;
    }
    Ok(())
}

fn measures(pen: &mut Pen<'_>, lists: [(&str, &[f64]); 4]) -> io::Result<()> {
    for (name, values) in lists {
        pen.field(name)?;
        pen.floats(values, 1)?;
        pen.raw(",")?;
    }
    Ok(())
}

fn point_text(pen: &mut Pen<'_>, point: &Point) -> io::Result<()> {
    pen.open("(")?;
    pen.line()?;
    let place = [("value", point.value), ("period", point.period), ("distance", point.distance)];
    named_floats(pen, &place)?;
    pen.raw(" ")?;
    named_counts(pen, &[("turns", point.turns), ("unstable_count", point.unstable_count)])?;
    pen.line()?;
    named_floats(
        pen,
        &[
            ("trivial_defect", point.trivial_defect),
            ("liouville_defect", point.liouville_defect),
            ("profile_error", point.profile_error),
        ],
    )?;
    measures(
        pen,
        [("maxima", &point.maxima), ("minima", &point.minima), ("means", &point.means), ("spreads", &point.spreads)],
    )?;
    list(pen, "multipliers", &point.multipliers, multiplier_text)?;
    pen.line()?;
    named_counts(pen, &[("intervals", point.intervals), ("degree", point.degree)])?;
    pen.raw(" ")?;
    for (name, word) in [("choice", point.choice.word()), ("reached", point.reached.word())] {
        pen.name(name)?;
        pen.variant(word)?;
        pen.raw(",")?;
        pen.raw(if name == "choice" { " " } else { "" })?;
    }
    pen.field("unresolved")?;
    match point.unresolved {
        Some(unresolved) => {
            pen.raw("Some((")?;
            named_counts(pen, &[("count", unresolved.count)])?;
            pen.raw(" ")?;
            named_floats(pen, &[("below", unresolved.below), ("log_sum", unresolved.log_sum)])?;
            pen.raw(")),")?;
        }
        None => pen.raw("None,")?,
    }
    list(pen, "eigenvalues", &point.eigenvalues, |pen, eigenvalue| {
        pen.raw("(")?;
        pen.name("re")?;
        pen.float(eigenvalue.re)?;
        pen.raw(", ")?;
        pen.name("im")?;
        pen.float(eigenvalue.im)?;
        pen.raw(")")
    })?;
    pen.close(")")
}

fn multiplier_text(pen: &mut Pen<'_>, multiplier: &Multiplier) -> io::Result<()> {
    pen.raw("(")?;
    pen.name("log_modulus")?;
    pen.float(multiplier.log_modulus)?;
    pen.raw(", ")?;
    pen.name("angle")?;
    pen.float(multiplier.angle)?;
    pen.raw(")")
}

/// An event with its cycle.
pub(crate) fn event_text(pen: &mut Pen<'_>, event: &Event) -> io::Result<()> {
    pen.open("(")?;
    text_field(pen, "name", &event.name)?;
    pen.field("kind")?;
    pen.variant(event.kind.word())?;
    pen.raw(",")?;
    pen.line()?;
    named_floats(pen, &[("value", event.value), ("period", event.period), ("distance", event.distance)])?;
    pen.raw(" ")?;
    named_counts(pen, &[("turns", event.turns)])?;
    for (name, value) in [("error", event.error), ("period_error", event.period_error), ("angle", event.angle)] {
        pen.field(name)?;
        pen.optional(value)?;
        pen.raw(",")?;
    }
    pen.field("criticality")?;
    match event.criticality {
        Some(side) => pen.raw(&format!("Some({}),", side.word()))?,
        None => pen.raw("None,")?,
    }
    text_field(pen, "note", &event.note)?;
    measures(
        pen,
        [("maxima", &event.maxima), ("minima", &event.minima), ("means", &event.means), ("spreads", &event.spreads)],
    )?;
    pen.field("profile")?;
    match &event.profile {
        Some(profile) => {
            pen.raw("Some(")?;
            profile_text(pen, profile)?;
            pen.raw("),")?;
        }
        None => pen.raw("None,")?,
    }
    pen.close(")")
}

fn profile_text(pen: &mut Pen<'_>, profile: &Profile) -> io::Result<()> {
    pen.open("(")?;
    pen.line()?;
    named_floats(pen, &[("period", profile.period)])?;
    pen.raw(" ")?;
    named_counts(pen, &[("n_states", profile.n_states), ("degree", profile.degree)])?;
    pen.field("mesh")?;
    pen.floats(&profile.mesh, 1)?;
    pen.raw(",")?;
    pen.field("values")?;
    pen.floats(&profile.values, profile.n_states)?;
    pen.raw(",")?;
    pen.close(")")
}
