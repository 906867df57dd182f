//! A measure of the cycle against the followed parameter.

use armilla_record::{Branch, Event, EventKind};

use crate::canvas::Canvas;
use crate::caption;
use crate::curve::{Curve, curves, event_place};
use crate::error::FigureError;
use crate::geometry::{Place, Rect};
use crate::label;
use crate::legend::{Entry, Sample, line_attributes};
use crate::marker;
use crate::measure::{Cycle, Reader};
use crate::page::{Page, Scale, frame_height, legend_beside, points};
use crate::palette::{BLACK, GREY, Ink, ink};
use crate::range::{Asked, extent};
use crate::spec::{Diagram, Measure};
use crate::stability::{Stretch, stretches};
use crate::stroke::{self, Line, Stroke};
use crate::text;

/// A branch is drawn up to its birth across a gap not wider than this share of the frame.
const WIDEST_BIRTH_GAP: f64 = 0.08;
/// Weight of the guide line at modulus one.
const GUIDE: f64 = 0.5;
/// Radius of the dot that stands for a branch of one point.
const DOT: f64 = 1.7;

/// What one branch draws.
struct Drawn {
    stretches: Vec<Stretch>,
    /// The curves of each component of the measure.
    curves: Vec<Vec<Curve>>,
}

/// An event that gets a marker.
pub(crate) struct Mark<'a> {
    pub(crate) event: &'a Event,
    /// Its places in drawn numbers, one for each curve of the measure that is inside.
    pub(crate) places: Vec<Place>,
    /// The number of a target.
    pub(crate) number: Option<usize>,
}

/// Draws the diagram as SVG text.
pub(crate) fn draw(diagram: &Diagram, branches: &[Branch]) -> Result<String, FigureError> {
    let first = &branches[0];
    let reader = Reader::new(diagram, &first.states)?;
    let asked = Asked::new(diagram.x, diagram.y, reader.logarithmic)?;
    let width = points(diagram.width)?;
    let mut drawn: Vec<Drawn> = branches
        .iter()
        .map(|branch| Drawn::new(branch, &reader))
        .collect();
    join_births(&mut drawn, branches, &reader);
    let whole: Vec<Vec<Place>> = drawn
        .iter()
        .flat_map(|drawn| drawn.lines().map(|(_, line)| line))
        .collect();
    let window = asked
        .window(&whole, &dots(&drawn))
        .ok_or_else(|| nothing_inside(&reader, &drawn))?;
    let lines: Vec<Line> = drawn
        .iter()
        .enumerate()
        .flat_map(|(owner, drawn)| drawn.lines().map(move |line| (owner, line)))
        .filter_map(|(owner, (dashed, line))| Line::inside(&window, owner, dashed, &line))
        .collect();
    let marks = marks(branches, &drawn, &reader, &window);
    let guide =
        (diagram.measure == Measure::LargestMultiplier && window.top < 0.0 && window.bottom > 0.0)
            .then_some(0.0);
    let scales = scales(first, &reader, &window);
    let shown = Shown {
        branches,
        drawn: &drawn,
        lines: &lines,
        marks: &marks,
        window: &window,
    };
    let page = Page::new(
        width,
        &scales.0,
        &scales.1,
        shown.legend(width, guide.is_some()),
    );
    let mut canvas = page.canvas();
    if let Some(level) = guide {
        let ends = [
            page.place((window.left, level)),
            page.place((window.right, level)),
        ];
        canvas.group("class=\"guide\"", |pen| pen.line(&ends, GREY, GUIDE));
    }
    shown.draw(&mut canvas, &page, diagram.names);
    let title = format!(
        "{}: {} against {}",
        text::clean(&first.model_title),
        plain_label(&reader),
        caption::quantity(&first.parameter)
    );
    Ok(canvas.finish(&title, &description(branches, &reader)))
}

impl Drawn {
    fn new(branch: &Branch, reader: &Reader) -> Self {
        let stretches = stretches(branch);
        let curves = (0..reader.curves())
            .map(|component| curves(branch, reader, component, &stretches))
            .collect();
        Self { stretches, curves }
    }

    /// Each stretch of equal stability as one line, with whether it is dashed.
    fn lines(&self) -> impl Iterator<Item = (bool, Vec<Place>)> + '_ {
        self.curves.iter().flatten().flat_map(|curve| {
            let mut joined: Vec<(bool, Stretch)> = Vec::new();
            for stretch in self.reaching(curve) {
                let dashed = stretch.unstable_count > 0;
                match joined.last_mut() {
                    Some((style, last)) if *style == dashed && last.to == stretch.from => {
                        last.to = stretch.to
                    }
                    _ => joined.push((dashed, stretch)),
                }
            }
            joined
                .into_iter()
                .map(|(dashed, stretch)| (dashed, curve.line(&stretch)))
                .filter(|(_, line)| line.len() > 1)
        })
    }

    /// The stretches, the outer ones drawn out to the ends of the curve: a birth or an event may lie
    /// a little beyond the last point.
    fn reaching(&self, curve: &Curve) -> Vec<Stretch> {
        let mut stretches = self.stretches.clone();
        if let (Some((from, to)), false) = (curve.ends(), stretches.is_empty()) {
            let last = stretches.len() - 1;
            stretches[0].from = stretches[0].from.min(from);
            stretches[last].to = stretches[last].to.max(to);
        }
        stretches
    }

    fn at(&self, component: usize, distance: f64) -> Option<Place> {
        self.curves[component]
            .iter()
            .find_map(|curve| curve.at(distance))
    }

    fn dots(&self) -> impl Iterator<Item = Place> + '_ {
        self.curves
            .iter()
            .flatten()
            .filter(|curve| curve.is_dot())
            .flat_map(Curve::places)
    }
}

fn dots(drawn: &[Drawn]) -> Vec<Place> {
    drawn.iter().flat_map(Drawn::dots).collect()
}

/// Draws each branch up to the event it was born at, if that is on another branch given.
fn join_births(drawn: &mut [Drawn], branches: &[Branch], reader: &Reader) {
    let places = drawn
        .iter()
        .flat_map(|drawn| drawn.curves.iter().flatten())
        .flat_map(Curve::places);
    let Some((x, y)) = extent(places) else { return };
    let size = (x.1 - x.0, y.1 - y.0);
    if size.0 <= 0.0 || size.1 <= 0.0 {
        return;
    }
    for (index, branch) in branches.iter().enumerate() {
        let Some(born_at) = &branch.born_at else {
            continue;
        };
        let Some(event) = branches
            .iter()
            .flat_map(|other| &other.events)
            .find(|event| event.name == *born_at)
        else {
            continue;
        };
        let turns = branch
            .points
            .first()
            .map_or(event.turns, |point| point.turns);
        let times = turns as f64 / event.turns.max(1) as f64;
        // Both sides meet where the critical multiplier is on the unit circle.
        let log_modulus = drawn[index]
            .stretches
            .iter()
            .any(|stretch| stretch.unstable_count == 0)
            .then_some(0.0);
        let cycle = Cycle::of_event(event, log_modulus).repeated(times);
        for component in 0..reader.curves() {
            let Some(y) = reader
                .drawn(&cycle, component)
                .filter(|_| event.value.is_finite())
            else {
                continue;
            };
            for curve in &mut drawn[index].curves[component] {
                *curve = std::mem::take(curve).joined((event.value, y), size, WIDEST_BIRTH_GAP);
            }
        }
    }
}

fn marks<'a>(
    branches: &'a [Branch],
    drawn: &[Drawn],
    reader: &Reader,
    window: &Rect,
) -> Vec<Mark<'a>> {
    let mut targets = 0;
    let mut marks = Vec::new();
    for (branch, drawn) in branches.iter().zip(drawn) {
        for event in &branch.events {
            let number = (event.kind == EventKind::Target).then(|| {
                targets += 1;
                targets
            });
            if !event.kind.is_threshold() && number.is_none() {
                continue;
            }
            let place = |component| {
                event_place(event, reader, component, &drawn.stretches)
                    .or_else(|| drawn.at(component, event.distance))
            };
            let places: Vec<Place> = (0..reader.curves())
                .filter_map(place)
                .filter(|place| window.contains(*place))
                .collect();
            if !places.is_empty() {
                marks.push(Mark {
                    event,
                    places,
                    number,
                });
            }
        }
    }
    marks
}

fn scales(first: &Branch, reader: &Reader, window: &Rect) -> (Scale, Scale) {
    let x = Scale {
        range: (window.left, window.right),
        logarithmic: false,
        quantity: text::quantity(&first.parameter.label),
        unit: first.parameter.unit.clone(),
    };
    let y = Scale {
        range: (window.top, window.bottom),
        logarithmic: reader.logarithmic,
        quantity: reader.label(),
        unit: reader.unit().to_string(),
    };
    (x, y)
}

/// Everything inside the window.
struct Shown<'a> {
    branches: &'a [Branch],
    drawn: &'a [Drawn],
    lines: &'a [Line],
    marks: &'a [Mark<'a>],
    window: &'a Rect,
}

impl Shown<'_> {
    fn dots_of(&self, owner: usize) -> impl Iterator<Item = Place> + '_ {
        self.drawn[owner]
            .dots()
            .filter(|dot| self.window.contains(*dot))
    }

    /// Branches of which something is inside.
    fn owners(&self) -> Vec<usize> {
        (0..self.branches.len())
            .filter(|owner| {
                self.lines.iter().any(|line| line.owner == *owner)
                    || self.dots_of(*owner).next().is_some()
            })
            .collect()
    }

    fn is_stable_dot(&self, owner: usize) -> bool {
        self.branches[owner]
            .points
            .first()
            .is_none_or(|point| point.is_stable())
    }

    fn legend(&self, width: f64, with_guide: bool) -> Vec<Entry> {
        let plain = Ink {
            color: BLACK,
            weight: 1.0,
        };
        let mut entries = Vec::new();
        for (dashed, words) in [(false, "stable"), (true, "unstable")] {
            if self.lines.iter().any(|line| line.dashed == dashed) {
                entries.push(Entry::new(Sample::Line { ink: plain, dashed }, words));
            }
        }
        let mut kinds: Vec<EventKind> = self.marks.iter().map(|mark| mark.event.kind).collect();
        kinds.sort();
        kinds.dedup();
        let markers: Vec<Entry> = kinds
            .iter()
            .map(|kind| Entry::new(Sample::Marker(*kind), marker::words(*kind)))
            .collect();
        if with_guide {
            let ink = Ink {
                color: GREY,
                weight: GUIDE,
            };
            entries.push(Entry::new(
                Sample::Line { ink, dashed: false },
                "modulus one",
            ));
        }
        let rows = most_branches(width, entries.len() + markers.len());
        entries.extend(self.branch_entries(rows));
        entries.extend(markers);
        entries
    }

    /// One row for each branch, none where there is only one; what exceeds `most` rows is told by its number.
    fn branch_entries(&self, most: usize) -> Vec<Entry> {
        let owners = self.owners();
        if owners.len() < 2 {
            return Vec::new();
        }
        let listed = if owners.len() > most {
            most.saturating_sub(1).max(1)
        } else {
            owners.len()
        };
        let row = |owner: &usize| {
            let name = format!("branch {}", text::clean(&self.branches[*owner].name));
            Entry::new(
                Sample::Line {
                    ink: ink(*owner),
                    dashed: false,
                },
                name,
            )
        };
        let mut entries: Vec<Entry> = owners[..listed].iter().map(row).collect();
        if owners.len() > listed {
            entries.push(Entry::new(
                Sample::Nothing,
                format!("+{} more branches", owners.len() - listed),
            ));
        }
        entries
    }

    fn draw(&self, canvas: &mut Canvas, page: &Page, names: bool) {
        let strokes: Vec<Stroke> = self
            .lines
            .iter()
            .map(|line| line.on_page(page, ink(line.owner)))
            .collect();
        stroke::draw(canvas, &strokes);
        for owner in self.owners() {
            let class = line_attributes("dot", false);
            let hollow = !self.is_stable_dot(owner);
            for dot in self.dots_of(owner) {
                let (place, ink) = (page.place(dot), ink(owner));
                canvas.group(&class, |pen| {
                    if hollow {
                        pen.ring(place, DOT, ink.color, ink.weight)
                    } else {
                        pen.disc(place, DOT, ink.color)
                    }
                });
            }
        }
        page.draw(canvas);
        canvas.group("class=\"markers\"", |pen| {
            // Targets first: a threshold at the same place stays visible.
            for target in [true, false] {
                for mark in self
                    .marks
                    .iter()
                    .filter(|mark| mark.number.is_some() == target)
                {
                    mark.places
                        .iter()
                        .for_each(|place| marker::draw(pen, mark.event.kind, page.place(*place)));
                }
            }
        });
        let owners = self.owners();
        let branches: Vec<(usize, String)> = match owners.len() {
            0 | 1 => Vec::new(),
            _ => owners
                .iter()
                .map(|owner| (*owner, text::clean(&self.branches[*owner].name)))
                .collect(),
        };
        label::draw(
            canvas,
            page,
            &strokes,
            self.marks,
            if names { Some(&branches) } else { None },
        );
    }
}

/// How many rows of the legend branches may take beside `others`.
fn most_branches(width: f64, others: usize) -> usize {
    const BELOW: usize = 8;
    const LEAST: usize = 4;
    if !legend_beside(width) {
        return BELOW;
    }
    ((frame_height(width) / crate::legend::ROW) as usize)
        .saturating_sub(others)
        .max(LEAST)
}

fn nothing_inside(reader: &Reader, drawn: &[Drawn]) -> FigureError {
    let extent = extent(
        drawn
            .iter()
            .flat_map(|drawn| drawn.curves.iter().flatten())
            .flat_map(Curve::places),
    );
    let shown = |(lo, hi): (f64, f64)| {
        if reader.logarithmic {
            (10f64.powf(lo), 10f64.powf(hi))
        } else {
            (lo, hi)
        }
    };
    FigureError::NothingInside {
        what: plain_label(reader),
        x: extent.map(|extent| extent.0),
        y: extent.map(|extent| shown(extent.1)),
    }
}

/// The label of the measure without the marks of its setting.
fn plain_label(reader: &Reader) -> String {
    text::clean(&reader.label())
}

fn description(branches: &[Branch], reader: &Reader) -> String {
    let spread = if matches!(reader.label().split(' ').next(), Some("spread")) {
        " Spread is the root mean square about the mean."
    } else {
        ""
    };
    format!(
        "{} of cycles against {}; solid: stable, dashed: unstable; thresholds carry one marker shape for each kind.{spread} {} {}",
        plain_label(reader),
        caption::quantity(&branches[0].parameter),
        caption::setting(branches),
        caption::not_searched(branches)
    )
}
