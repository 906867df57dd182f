//! Names of events, numbers of targets and names of branches, where there is room.

use crate::canvas::Canvas;
use crate::drawn::Mark;
use crate::geometry::{Place, Rect};
use crate::legend::{NUMBER_RADIUS, numbered};
use crate::marker::RADIUS;
use crate::page::Page;
use crate::palette::BLACK;
use crate::place::{Spot, Taken};
use crate::stroke::{Stroke, name_curve, name_size, write_name};
use crate::text;

/// Names longer than this share of the frame would stand for the picture.
const LONGEST: f64 = 0.45;

/// Writes names into a page, whatever finds room first.
pub(crate) struct Labels<'a, 'b> {
    canvas: &'a mut Canvas,
    page: &'a Page,
    taken: Taken<'b>,
}

impl<'a, 'b> Labels<'a, 'b> {
    /// Room is what lines and markers leave inside the frame.
    pub(crate) fn new(canvas: &'a mut Canvas, page: &'a Page, lines: &'b [Vec<Place>], marks: &[Mark]) -> Self {
        let mut taken = Taken::new(page.frame, lines);
        for place in marks.iter().flat_map(|mark| &mark.places) {
            taken.take(Rect::around(page.place(*place), RADIUS, RADIUS));
        }
        Self { canvas, page, taken }
    }

    /// Numbers in circles beside the targets.
    pub(crate) fn number_targets(&mut self, marks: &[Mark]) {
        for mark in marks {
            let Some(number) = mark.number else { continue };
            let size = (2.0 * NUMBER_RADIUS, 2.0 * NUMBER_RADIUS);
            if let Some(spot) = self.first_free(mark, size) {
                self.canvas.group("class=\"names\"", |pen| numbered(pen, number, spot.centre(), BLACK));
            }
        }
    }

    /// Full names beside the thresholds.
    pub(crate) fn name_events(&mut self, marks: &[Mark]) {
        for mark in marks.iter().filter(|mark| mark.number.is_none()) {
            let name = text::clean(&mark.event.name);
            if !self.fits(&name) {
                continue;
            }
            if let Some(spot) = self.first_free(mark, name_size(&name)) {
                write_name(self.canvas, &spot, &name, BLACK);
            }
        }
    }

    /// Names beside the branches.
    pub(crate) fn name_branches(&mut self, strokes: &[Stroke], branches: &[(usize, String)]) {
        for (owner, name) in branches {
            if self.fits(name) {
                name_curve(self.canvas, &mut self.taken, strokes, (*owner, name));
            }
        }
    }

    fn fits(&self, name: &str) -> bool {
        name_size(name).0 <= LONGEST * self.page.frame.width()
    }

    /// An event on two curves is named once.
    fn first_free(&mut self, mark: &Mark, size: (f64, f64)) -> Option<Spot> {
        mark.places.iter().find_map(|place| self.taken.beside(self.page.place(*place), RADIUS, size))
    }
}
