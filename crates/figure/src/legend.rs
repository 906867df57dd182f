//! The legend: what each line and marker means, always outside the frame.

use armilla_record::EventKind;
use plotters::style::RGBColor;

use crate::canvas::{Canvas, Pen, Stands};
use crate::geometry::Place;
use crate::marker;
use crate::palette::{BLACK, Ink, WHITE};
use crate::text;

/// Size of all lettering but names inside the frame, in points.
pub(crate) const TEXT: f64 = 8.0;
/// Size of names inside the frame: the least that publishers take.
pub(crate) const SMALL: f64 = 7.0;
/// Height of a row.
pub(crate) const ROW: f64 = 11.5;
/// Length of a line sample: two dashes and a half of 4 and 2 pt.
const SAMPLE: f64 = 16.0;
/// From sample to words.
const SPACE: f64 = 4.0;
/// From column to column.
const BETWEEN: f64 = 10.0;
/// Dash and gap in points.
const DASHES: (f64, f64) = (4.0, 2.0);
/// Radius of the circle around a number.
pub(crate) const NUMBER_RADIUS: f64 = 4.6;

/// What stands before the words.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Sample {
    Line {
        ink: Ink,
        dashed: bool,
    },
    /// A line with a numbered circle on it.
    Numbered {
        ink: Ink,
        dashed: bool,
        number: usize,
    },
    Marker(EventKind),
    /// A branch of one point.
    Dot {
        ink: Ink,
        hollow: bool,
    },
    Nothing,
}

/// One row of the legend.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Entry {
    pub(crate) sample: Sample,
    pub(crate) words: String,
}

impl Entry {
    pub(crate) fn new(sample: Sample, words: impl Into<String>) -> Self {
        Self { sample, words: words.into() }
    }

    fn width(&self) -> f64 {
        SAMPLE + SPACE + text::width(&self.words, TEXT) * text::STAND_IN
    }
}

/// Entries in columns, filled from above.
pub(crate) struct Legend {
    entries: Vec<Entry>,
    rows: usize,
}

impl Legend {
    /// One column as wide as it needs.
    pub(crate) fn beside(entries: Vec<Entry>) -> Self {
        let rows = entries.len();
        Self { entries, rows }
    }

    /// As few rows as fit into `room`.
    pub(crate) fn below(entries: Vec<Entry>, room: f64) -> Self {
        let all = entries.len();
        let entries = fitted(entries, room);
        let fits = |rows: &usize| total(&columns(&entries, *rows)) <= room;
        let rows = (1..all.max(1)).find(fits).unwrap_or(all);
        Self { entries, rows }
    }

    pub(crate) fn width(&self) -> f64 {
        total(&columns(&self.entries, self.rows))
    }

    pub(crate) fn height(&self) -> f64 {
        self.rows as f64 * ROW
    }

    /// Draws it with its upper left corner at a place.
    pub(crate) fn draw(&self, canvas: &mut Canvas, corner: Place) {
        let mut x = corner.0;
        for (column, width) in self.entries.chunks(self.rows.max(1)).zip(columns(&self.entries, self.rows)) {
            for (row, entry) in column.iter().enumerate() {
                let middle = corner.1 + (row as f64 + 0.5) * ROW;
                let words = (x + SAMPLE + SPACE, middle + 0.35 * TEXT);
                canvas.group("class=\"legend\"", |pen| pen.text(&entry.words, words, TEXT, Stands::Behind, BLACK));
                draw_sample(canvas, entry.sample, (x, middle));
            }
            x += width + BETWEEN;
        }
    }
}

/// The entries with words short enough for a column that takes all the room.
fn fitted(mut entries: Vec<Entry>, room: f64) -> Vec<Entry> {
    for entry in &mut entries {
        entry.words = text::shortened(&entry.words, TEXT, (room - SAMPLE - SPACE) / text::STAND_IN);
    }
    entries
}

fn columns(entries: &[Entry], rows: usize) -> Vec<f64> {
    entries.chunks(rows.max(1)).map(|column| column.iter().map(Entry::width).fold(0.0, f64::max)).collect()
}

fn total(columns: &[f64]) -> f64 {
    columns.iter().sum::<f64>() + BETWEEN * columns.len().saturating_sub(1) as f64
}

fn draw_sample(canvas: &mut Canvas, sample: Sample, (x, y): Place) {
    let line = [(x, y), (x + SAMPLE, y)];
    let centre = (x + 0.5 * SAMPLE, y);
    match sample {
        Sample::Nothing => {}
        Sample::Dot { ink, hollow } => canvas.group("class=\"legend\"", |pen| dot(pen, ink, hollow, centre)),
        Sample::Marker(kind) => canvas.group("class=\"legend\"", |pen| marker::draw(pen, kind, centre)),
        Sample::Line { ink, dashed } => {
            canvas.group(&line_attributes("legend", dashed), |pen| pen.line(&line, ink.color, ink.weight));
        }
        Sample::Numbered { ink, dashed, number } => {
            canvas.group(&line_attributes("legend", dashed), |pen| pen.line(&line, ink.color, ink.weight));
            canvas.group("class=\"legend\"", |pen| numbered(pen, number, centre, BLACK));
        }
    }
}

/// Attributes of a group of curves.
pub(crate) fn line_attributes(class: &str, dashed: bool) -> String {
    let joins = "stroke-linejoin=\"round\"";
    let (dash, gap) = (DASHES.0 * crate::canvas::FINE, DASHES.1 * crate::canvas::FINE);
    if dashed {
        format!("class=\"{class} unstable\" {joins} stroke-dasharray=\"{dash} {gap}\"")
    } else {
        format!("class=\"{class} stable\" {joins} stroke-linecap=\"round\"")
    }
}

/// A branch of one point: filled where it is stable, hollow where not.
pub(crate) fn dot(pen: &Pen, ink: Ink, hollow: bool, centre: Place) {
    const RADIUS: f64 = 1.7;
    if hollow { pen.ring(centre, RADIUS, ink.color, ink.weight) } else { pen.disc(centre, RADIUS, ink.color) }
}

/// A number in a small circle.
pub(crate) fn numbered(pen: &Pen, number: usize, centre: Place, color: RGBColor) {
    const OUTLINE: f64 = 0.5;
    pen.disc(centre, NUMBER_RADIUS, WHITE);
    pen.ring(centre, NUMBER_RADIUS - 0.5 * OUTLINE, color, OUTLINE);
    pen.text(&number.to_string(), (centre.0, centre.1 + 0.36 * SMALL), SMALL, Stands::Centred, color);
}
