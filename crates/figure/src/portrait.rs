//! Orbits in the plane of two states.

use armilla_record::{Branch, Event, EventKind, Profile};

use crate::canvas::{Canvas, Pen};
use crate::caption;
use crate::error::FigureError;
use crate::geometry::{Place, at_fraction, length};
use crate::legend::{Entry, NUMBER_RADIUS, Sample, dot, numbered};
use crate::measure::{find, sound};
use crate::page::{Page, Scale, points};
use crate::palette::{Ink, ink, lettering};
use crate::place::Taken;
use crate::range::{Asked, extent};
use crate::spec::Portrait;
use crate::stability::{least_count_at, stretches};
use crate::stroke::{self, Line, Stroke, name_size};
use crate::text;

/// More orbits than colours cannot be told apart.
const MOST: usize = 7;

/// An event with the orbit that it keeps.
struct Orbit<'a> {
    event: &'a Event,
    profile: &'a Profile,
    unstable: bool,
    /// The number of a target, as in diagrams of the same branches.
    number: Option<usize>,
    line: Vec<Place>,
}

/// Draws the portrait as SVG text.
pub(crate) fn draw(portrait: &Portrait, branches: &[Branch]) -> Result<String, FigureError> {
    let first = &branches[0];
    let [right, up] = &portrait.axes;
    let states = (find(&first.states, right)?, find(&first.states, up)?);
    let asked = Asked::new(portrait.x, portrait.y, false)?;
    let width = points(portrait.width)?;
    let all = kept(branches);
    let left_out = if portrait.orbits.is_empty() { all.len().saturating_sub(MOST) } else { 0 };
    let mut orbits = chosen(all, &portrait.orbits)?;
    orbits.iter_mut().for_each(|orbit| orbit.line = line(orbit.profile, states));
    let lines: Vec<Vec<Place>> = orbits.iter().map(|orbit| orbit.line.clone()).collect();
    let window = asked.window(&lines, &[]);
    // Where nothing moves, as with the zero solution of a linear equation under a forcing, each orbit is a place.
    let still: Vec<Place> =
        if window.is_some() { Vec::new() } else { lines.iter().filter_map(|line| place(line)).collect() };
    let window = window.or_else(|| asked.window(&[], &still)).ok_or_else(|| nothing_inside(portrait, &lines))?;
    let cut: Vec<Line> = orbits
        .iter()
        .enumerate()
        .filter_map(|(owner, orbit)| Line::inside(&window, owner, orbit.unstable, &orbit.line))
        .collect();
    let scale = |state: usize, range| Scale {
        range,
        logarithmic: false,
        quantity: text::quantity(&first.states[state].label),
        unit: first.states[state].unit.clone(),
    };
    let (x, y) = (scale(states.0, (window.left, window.right)), scale(states.1, (window.top, window.bottom)));
    let mut entries = legend(&orbits, &cut, left_out);
    let black = Ink { color: crate::palette::BLACK, weight: 1.0 };
    if !still.is_empty() {
        entries.push(Entry::new(Sample::Dot { ink: black, hollow: false }, "orbits that do not move"));
    }
    let page = Page::new(width, &x, &y, entries);
    let mut canvas = page.canvas();
    let strokes: Vec<Stroke> = cut.iter().map(|line| line.on_page(&page, ink(line.owner))).collect();
    stroke::draw(&mut canvas, &strokes);
    if !still.is_empty() {
        canvas.group("class=\"dots\"", |pen| still.iter().for_each(|at| dot(pen, black, false, page.place(*at))));
    }
    canvas.group("class=\"arrows\"", |pen| strokes.iter().for_each(|stroke| arrow(pen, stroke)));
    page.draw(&mut canvas);
    name_orbits(&mut canvas, &page, &strokes, &orbits);
    let title = format!(
        "{}: orbits in the plane of {} and {}",
        text::clean(&first.model_title),
        caption::quantity(&first.states[states.0]),
        caption::quantity(&first.states[states.1])
    );
    Ok(canvas.finish(&title, &description(branches, &orbits, left_out)))
}

/// All orbits kept at events, in the order of branches and events.
fn kept(branches: &[Branch]) -> Vec<Orbit<'_>> {
    let mut targets = 0;
    let mut orbits = Vec::new();
    for branch in branches {
        let stretches = stretches(branch);
        for event in &branch.events {
            let number = (event.kind == EventKind::Target).then(|| {
                targets += 1;
                targets
            });
            let Some(profile) = event.profile.as_ref().filter(|profile| profile.validate().is_ok()) else {
                continue;
            };
            let count = least_count_at(&stretches, event.distance)
                .or_else(|| branch.points.first().map(|point| point.unstable_count));
            orbits.push(Orbit {
                event,
                profile,
                unstable: count.is_some_and(|count| count > 0),
                number,
                line: Vec::new(),
            });
        }
    }
    orbits
}

fn chosen<'a>(orbits: Vec<Orbit<'a>>, asked: &[String]) -> Result<Vec<Orbit<'a>>, FigureError> {
    if orbits.is_empty() {
        return Err(FigureError::NoOrbits);
    }
    if asked.is_empty() {
        return Ok(orbits.into_iter().take(MOST).collect());
    }
    let known: Vec<String> = orbits.iter().map(|orbit| orbit.event.name.clone()).collect();
    if let Some(name) = asked.iter().find(|name| !known.contains(name)) {
        return Err(FigureError::UnknownOrbit { asked: name.clone(), known });
    }
    Ok(orbits.into_iter().filter(|orbit| asked.contains(&orbit.event.name)).collect())
}

/// The closed orbit as corners; numbers that are not finite are left out.
fn line(profile: &Profile, (right, up): (usize, usize)) -> Vec<Place> {
    /// Corners on a degree-m piece that turns as a polynomial of degree m can.
    const PER_DEGREE: usize = 4;
    /// Corners of a whole orbit below which it would look like a polygon.
    const LEAST: usize = 1200;
    if right.max(up) >= profile.n_states {
        return Vec::new();
    }
    let parts = (PER_DEGREE * profile.degree).max(LEAST.div_ceil(profile.intervals()));
    let mut evaluator = profile.evaluator();
    let mut states = vec![0.0; profile.n_states];
    let mut line = Vec::with_capacity(parts * profile.intervals() + 1);
    for interval in 0..profile.intervals() {
        for k in usize::from(interval > 0)..=parts {
            evaluator.in_interval(interval, k as f64 / parts as f64, &mut states);
            line.push((states[right], states[up]));
        }
    }
    line.retain(|(x, y)| sound(x) && sound(y));
    line
}

/// Where an orbit stays that does not move; none for one that does.
fn place(line: &[Place]) -> Option<Place> {
    let first = *line.first()?;
    line.iter().all(|place| *place == first).then_some(first)
}

fn legend(orbits: &[Orbit], cut: &[Line], left_out: usize) -> Vec<Entry> {
    let black = Ink { color: crate::palette::BLACK, weight: 1.0 };
    let mut entries = Vec::new();
    for (dashed, words) in [(false, "stable, or at its limit"), (true, "unstable")] {
        if cut.iter().any(|line| line.dashed == dashed) {
            entries.push(Entry::new(Sample::Line { ink: black, dashed }, words));
        }
    }
    entries.extend(cut.iter().map(|line| {
        let orbit = &orbits[line.owner];
        let (ink, dashed) = (ink(line.owner), line.dashed);
        let sample = match orbit.number {
            Some(number) => Sample::Numbered { ink, dashed, number },
            None => Sample::Line { ink, dashed },
        };
        Entry::new(sample, text::clean(&orbit.event.name))
    }));
    if left_out > 0 {
        entries.push(Entry::new(Sample::Nothing, format!("+{left_out} more orbits, not drawn")));
    }
    entries
}

/// An arrowhead in the sense of time, on the longest part.
fn arrow(pen: &Pen, stroke: &Stroke) {
    const LENGTH: f64 = 5.0;
    const HALF_WIDTH: f64 = 1.9;
    /// Away from the start, where orbits of one family come closest.
    const WHERE: f64 = 0.15;
    let Some(part) = stroke.parts.iter().max_by(|a, b| length(a).total_cmp(&length(b))) else {
        return;
    };
    if length(part) < 4.0 * LENGTH {
        return;
    }
    // The chord over the head's own length keeps its tip on a curved line.
    let whole = length(part);
    let (Some((tail, _)), Some((tip, _))) =
        (at_fraction(part, WHERE - 0.5 * LENGTH / whole), at_fraction(part, WHERE + 0.5 * LENGTH / whole))
    else {
        return;
    };
    let (dx, dy) = (tip.0 - tail.0, tip.1 - tail.1);
    let size = dx.hypot(dy).max(f64::MIN_POSITIVE);
    let (across_x, across_y) = (-dy / size * HALF_WIDTH, dx / size * HALF_WIDTH);
    pen.area(&[tip, (tail.0 + across_x, tail.1 + across_y), (tail.0 - across_x, tail.1 - across_y)], stroke.ink.color);
}

fn name_orbits(canvas: &mut Canvas, page: &Page, strokes: &[Stroke], orbits: &[Orbit]) {
    let lines: Vec<Vec<Place>> = strokes.iter().flat_map(|stroke| stroke.parts.iter().cloned()).collect();
    let mut taken = Taken::new(page.frame, &lines);
    for stroke in strokes {
        let orbit = &orbits[stroke.owner];
        let name = text::clean(&orbit.event.name);
        let size = orbit.number.map_or(name_size(&name), |_| (2.0 * NUMBER_RADIUS, 2.0 * NUMBER_RADIUS));
        let Some(spot) = stroke::room_beside(&mut taken, stroke, size) else { continue };
        let color = lettering(stroke.ink.color);
        match orbit.number {
            Some(number) => canvas.group("class=\"names\"", |pen| numbered(pen, number, spot.centre(), color)),
            None => stroke::write_name(canvas, &spot, &name, color),
        }
    }
}

fn nothing_inside(portrait: &Portrait, lines: &[Vec<Place>]) -> FigureError {
    let extent = extent(lines.iter().flatten().copied());
    let [right, up] = &portrait.axes;
    FigureError::NothingInside {
        what: format!("the orbits in {right} and {up}"),
        x: extent.map(|extent| extent.0),
        y: extent.map(|extent| extent.1),
    }
}

fn description(branches: &[Branch], orbits: &[Orbit], left_out: usize) -> String {
    let parameter = &branches[0].parameter;
    let drawn: Vec<String> = orbits
        .iter()
        .map(|orbit| {
            let value = crate::number::plain(orbit.event.value);
            format!("{} at {} = {value}", text::clean(&orbit.event.name), text::clean(&parameter.label))
        })
        .collect();
    let rest = if left_out > 0 { format!(" {left_out} more orbits are kept and not drawn.") } else { String::new() };
    format!(
        "Orbits of {} ({}); dashed: unstable; arrows point in the sense of time.{rest} {} {}",
        drawn.join(", "),
        caption::quantity(parameter),
        caption::setting(branches),
        caption::not_searched(branches)
    )
}
