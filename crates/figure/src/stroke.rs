//! Curves on the page, and names beside them.

use plotters::style::RGBColor;

use crate::canvas::Canvas;
use crate::geometry::{Place, Rect, at_fraction, cut_at, length, thinned};
use crate::legend::{SMALL, line_attributes};
use crate::page::Page;
use crate::palette::{Ink, lettering};
use crate::place::{Spot, Taken};
use crate::text;

/// Corners closer than this to the curve without them are left out (points; 3.5 micrometres).
const THIN: f64 = 0.01;

/// One curve in one style, cut at the frame, on the page.
pub(crate) struct Stroke {
    /// Which branch or orbit it belongs to.
    pub(crate) owner: usize,
    pub(crate) ink: Ink,
    pub(crate) dashed: bool,
    pub(crate) parts: Vec<Vec<Place>>,
}

/// A curve in drawn numbers, cut at the window already.
pub(crate) struct Line {
    pub(crate) owner: usize,
    pub(crate) dashed: bool,
    pub(crate) parts: Vec<Vec<Place>>,
}

impl Line {
    /// Cuts a line at the window; none if nothing of it is inside.
    pub(crate) fn inside(window: &Rect, owner: usize, dashed: bool, line: &[Place]) -> Option<Self> {
        let parts = cut_at(window, line);
        (!parts.is_empty()).then_some(Self { owner, dashed, parts })
    }

    pub(crate) fn on_page(&self, page: &Page, ink: Ink) -> Stroke {
        let placed = |part: &Vec<Place>| {
            let line: Vec<Place> = part.iter().map(|place| page.place(*place)).collect();
            thinned(&line, THIN)
        };
        Stroke { owner: self.owner, ink, dashed: self.dashed, parts: self.parts.iter().map(placed).collect() }
    }
}

pub(crate) fn draw(canvas: &mut Canvas, strokes: &[Stroke]) {
    for stroke in strokes {
        canvas.group(&line_attributes("curve", stroke.dashed), |pen| {
            for part in &stroke.parts {
                pen.line(part, stroke.ink.color, stroke.ink.weight);
            }
        });
    }
}

/// Room for a name inside the frame.
pub(crate) fn name_size(name: &str) -> (f64, f64) {
    (text::width(name, SMALL) * text::STAND_IN, SMALL)
}

/// Writes a name where room was found.
pub(crate) fn write_name(canvas: &mut Canvas, spot: &Spot, name: &str, color: RGBColor) {
    canvas.group("class=\"names\"", |pen| pen.text(name, spot.baseline(SMALL), SMALL, spot.stands, color));
}

/// A free spot for something of this size beside the longest part of a curve.
pub(crate) fn room_beside(taken: &mut Taken, stroke: &Stroke, size: (f64, f64)) -> Option<Spot> {
    /// Shorter parts than this (points) cannot be told apart by a name.
    const SHORTEST: f64 = 18.0;
    const FRACTIONS: [f64; 11] = [0.5, 0.4, 0.6, 0.3, 0.7, 0.2, 0.8, 0.1, 0.9, 0.04, 0.96];
    let part = stroke.parts.iter().max_by(|a, b| length(a).total_cmp(&length(b)))?;
    if length(part) < SHORTEST {
        return None;
    }
    FRACTIONS.iter().find_map(|fraction| {
        let (place, _) = at_fraction(part, *fraction)?;
        taken.near(place, 0.5 * stroke.ink.weight, size)
    })
}

/// Writes the name of a branch beside one of its curves, the longest first.
pub(crate) fn name_curve(canvas: &mut Canvas, taken: &mut Taken, strokes: &[Stroke], (owner, name): (usize, &str)) {
    let longest = |stroke: &Stroke| stroke.parts.iter().map(|part| length(part)).fold(0.0, f64::max);
    let mut own: Vec<&Stroke> = strokes.iter().filter(|stroke| stroke.owner == owner).collect();
    own.sort_by(|a, b| longest(b).total_cmp(&longest(a)));
    for stroke in own {
        if let Some(spot) = room_beside(taken, stroke, name_size(name)) {
            write_name(canvas, &spot, name, lettering(stroke.ink.color));
            return;
        }
    }
}
