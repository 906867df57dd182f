//! Names of events, numbers of targets and names of branches, where there is room.

use crate::canvas::{Canvas, Stands};
use crate::diagram::Mark;
use crate::geometry::{Place, Rect};
use crate::legend::{NUMBER_RADIUS, SMALL, numbered};
use crate::marker::RADIUS;
use crate::page::Page;
use crate::palette::BLACK;
use crate::place::Taken;
use crate::stroke::{Stroke, baseline, name_curve, name_size};
use crate::text;

/// Writes everything that finds room: targets first, then events, then branches.
///
/// Without `branches` only the numbers of targets are written.
pub(crate) fn draw(
    canvas: &mut Canvas,
    page: &Page,
    strokes: &[Stroke],
    marks: &[Mark],
    branches: Option<&[(usize, String)]>,
) {
    let lines: Vec<Vec<Place>> = strokes
        .iter()
        .flat_map(|stroke| stroke.parts.iter().cloned())
        .collect();
    let mut taken = Taken::new(page.frame, &lines);
    for place in marks.iter().flat_map(|mark| &mark.places) {
        taken.take(Rect::around(page.place(*place), RADIUS, RADIUS));
    }
    for mark in marks {
        let Some(number) = mark.number else { continue };
        let size = (2.0 * NUMBER_RADIUS, 2.0 * NUMBER_RADIUS);
        if let Some(rect) = first_free(&mut taken, page, mark, size) {
            let centre = (
                0.5 * (rect.left + rect.right),
                0.5 * (rect.top + rect.bottom),
            );
            canvas.group("class=\"names\"", |pen| {
                numbered(pen, number, centre, BLACK)
            });
        }
    }
    let Some(branches) = branches else { return };
    for mark in marks.iter().filter(|mark| mark.number.is_none()) {
        let name = text::clean(&mark.event.name);
        if let Some(rect) = first_free(&mut taken, page, mark, name_size(&name)) {
            canvas.group("class=\"names\"", |pen| {
                pen.text(&name, baseline(&rect), SMALL, Stands::Behind, BLACK)
            });
        }
    }
    for (owner, name) in branches {
        name_curve(canvas, &mut taken, strokes, (*owner, name));
    }
}

/// An event on two curves is named once.
fn first_free(taken: &mut Taken, page: &Page, mark: &Mark, size: (f64, f64)) -> Option<Rect> {
    mark.places
        .iter()
        .find_map(|place| taken.beside(page.place(*place), RADIUS, size))
}
