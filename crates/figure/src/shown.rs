//! A diagram's curves, dots, markers and legend.

use armilla_record::{Branch, EventKind, Solutions};

use crate::canvas::Canvas;
use crate::drawn::{Drawn, Mark};
use crate::geometry::{Place, Rect};
use crate::label::Labels;
use crate::legend::{Entry, ROW, Sample, dot, line_attributes};
use crate::marker;
use crate::page::{Page, frame_height, legend_beside};
use crate::palette::{AT_REST, BLACK, GREY, Ink, ink};
use crate::stroke::{self, Line, Stroke};
use crate::text;

/// Weight of the guide line at modulus one.
const GUIDE: f64 = 0.5;

/// Everything inside the window.
pub(crate) struct Shown<'a> {
    pub(crate) branches: &'a [Branch],
    pub(crate) drawn: &'a [Drawn],
    pub(crate) lines: &'a [Line],
    pub(crate) marks: &'a [Mark<'a>],
    pub(crate) window: &'a Rect,
    /// The line of modulus one, in drawn numbers.
    pub(crate) guide: Option<[Place; 2]>,
}

impl Shown<'_> {
    fn is_at_rest(&self, owner: usize) -> bool {
        self.branches[owner].of == Solutions::Equilibria
    }

    fn ink(&self, owner: usize) -> Ink {
        if self.is_at_rest(owner) { AT_REST } else { ink(owner) }
    }

    fn dots_of(&self, owner: usize) -> impl Iterator<Item = (Place, bool)> + '_ {
        self.drawn[owner].dots().filter(|(dot, _)| self.window.contains(*dot))
    }

    /// Branches of which something is inside.
    fn owners(&self) -> Vec<usize> {
        (0..self.branches.len())
            .filter(|owner| self.lines.iter().any(|line| line.owner == *owner) || self.dots_of(*owner).next().is_some())
            .collect()
    }

    /// What every line and marker means.
    pub(crate) fn legend(&self, width: f64) -> Vec<Entry> {
        let mut entries = self.style_entries();
        if self.owners().into_iter().any(|owner| self.is_at_rest(owner)) {
            entries.push(Entry::new(Sample::Line { ink: AT_REST, dashed: false }, "equilibria"));
        }
        if self.guide.is_some() {
            let ink = Ink { color: GREY, weight: GUIDE };
            entries.push(Entry::new(Sample::Line { ink, dashed: false }, "modulus one"));
        }
        let mut kinds: Vec<EventKind> = self.marks.iter().map(|mark| mark.event.kind).collect();
        kinds.sort();
        kinds.dedup();
        let rows = most_branches(width, entries.len() + kinds.len());
        entries.extend(self.branch_entries(rows));
        entries.extend(kinds.iter().map(|kind| Entry::new(Sample::Marker(*kind), marker::words(*kind))));
        entries
    }

    /// The line styles and dots that occur.
    fn style_entries(&self) -> Vec<Entry> {
        let ink = Ink { color: BLACK, weight: 1.0 };
        let styles = [(false, "stable"), (true, "unstable")];
        let lines = styles.iter().filter(|(dashed, _)| self.lines.iter().any(|line| line.dashed == *dashed));
        let lines = lines.map(|(dashed, words)| Entry::new(Sample::Line { ink, dashed: *dashed }, *words));
        let has_dot = |hollow: bool| (0..self.drawn.len()).any(|owner| self.dots_of(owner).any(|dot| dot.1 == hollow));
        let dots = styles.iter().filter(|(hollow, _)| has_dot(*hollow));
        let dots = dots.map(|(hollow, words)| {
            Entry::new(Sample::Dot { ink, hollow: *hollow }, format!("{words}, a single point"))
        });
        lines.chain(dots).collect()
    }

    /// One row for each branch, none where there is only one; what exceeds `most` rows is told by its number.
    fn branch_entries(&self, most: usize) -> Vec<Entry> {
        let owners = self.owners();
        if owners.len() < 2 {
            return Vec::new();
        }
        let listed = if owners.len() > most { most.saturating_sub(1).max(1) } else { owners.len() };
        let row = |owner: &usize| {
            let name = text::clean(&self.branches[*owner].name);
            Entry::new(Sample::Line { ink: self.ink(*owner), dashed: false }, name)
        };
        let mut entries: Vec<Entry> = owners[..listed].iter().map(row).collect();
        if owners.len() > listed {
            entries.push(Entry::new(Sample::Nothing, format!("+{} more branches", owners.len() - listed)));
        }
        entries
    }

    /// Draws the page; `names` says whether events and branches are named.
    pub(crate) fn draw(&self, canvas: &mut Canvas, page: &Page, names: bool) {
        let guide: Vec<Place> =
            self.guide.iter().flat_map(|line| line.iter().map(|place| page.place(*place))).collect();
        if !guide.is_empty() {
            canvas.group("class=\"guide\"", |pen| pen.line(&guide, GREY, GUIDE));
        }
        let strokes: Vec<Stroke> = self.lines.iter().map(|line| line.on_page(page, self.ink(line.owner))).collect();
        stroke::draw(canvas, &strokes);
        let owners = self.owners();
        for owner in &owners {
            canvas.group(&line_attributes("dot", false), |pen| {
                self.dots_of(*owner).for_each(|(place, hollow)| dot(pen, self.ink(*owner), hollow, page.place(place)));
            });
        }
        page.draw(canvas);
        self.draw_markers(canvas, page);
        let several = if owners.len() > 1 { owners } else { Vec::new() };
        let named: Vec<(usize, String)> =
            several.iter().map(|owner| (*owner, text::clean(&self.branches[*owner].name))).collect();
        let mut lines: Vec<Vec<Place>> = strokes.iter().flat_map(|stroke| stroke.parts.iter().cloned()).collect();
        lines.push(guide);
        let mut labels = Labels::new(canvas, page, &lines, self.marks);
        labels.number_targets(self.marks);
        if names {
            labels.name_events(self.marks);
            labels.name_branches(&strokes, &named);
        }
    }

    fn draw_markers(&self, canvas: &mut Canvas, page: &Page) {
        canvas.group("class=\"markers\"", |pen| {
            // Targets first: a threshold at the same place stays visible.
            for target in [true, false] {
                for mark in self.marks.iter().filter(|mark| mark.number.is_some() == target) {
                    mark.places.iter().for_each(|place| marker::draw(pen, mark.event.kind, page.place(*place)));
                }
            }
        });
    }
}

/// How many rows of the legend branches may take beside `others`.
fn most_branches(width: f64, others: usize) -> usize {
    const BELOW: usize = 8;
    const LEAST: usize = 4;
    if !legend_beside(width) {
        return BELOW;
    }
    ((frame_height(width) / ROW) as usize).saturating_sub(others).max(LEAST)
}
