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
/// From sample to words, and from column to column.
const SPACE: f64 = 4.0;
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
        Self {
            sample,
            words: words.into(),
        }
    }

    fn width(&self) -> f64 {
        SAMPLE + SPACE + text::width(&self.words, TEXT)
    }
}

/// Entries in columns.
pub(crate) struct Legend {
    entries: Vec<Entry>,
    columns: usize,
    column_width: f64,
}

impl Legend {
    /// One column no wider than `room`.
    pub(crate) fn beside(entries: Vec<Entry>, room: f64) -> Self {
        Self::in_columns(entries, room, |_| 1)
    }

    /// As many columns as fit into `room`.
    pub(crate) fn below(entries: Vec<Entry>, room: f64) -> Self {
        Self::in_columns(entries, room, |width| {
            (((room + 3.0 * SPACE) / (width + 3.0 * SPACE)) as usize).max(1)
        })
    }

    fn in_columns(mut entries: Vec<Entry>, room: f64, columns: impl Fn(f64) -> usize) -> Self {
        for entry in &mut entries {
            entry.words = text::shortened(&entry.words, TEXT, room - SAMPLE - SPACE);
        }
        let column_width = entries.iter().map(Entry::width).fold(0.0, f64::max);
        let columns = columns(column_width).min(entries.len().max(1));
        Self {
            entries,
            columns,
            column_width,
        }
    }

    pub(crate) fn width(&self) -> f64 {
        self.columns as f64 * (self.column_width + 3.0 * SPACE) - 3.0 * SPACE
    }

    fn rows(&self) -> usize {
        self.entries.len().div_ceil(self.columns)
    }

    pub(crate) fn height(&self) -> f64 {
        self.rows() as f64 * ROW
    }

    /// Draws it with its upper left corner at a place.
    pub(crate) fn draw(&self, canvas: &mut Canvas, corner: Place) {
        let rows = self.rows().max(1);
        for (k, entry) in self.entries.iter().enumerate() {
            let x = corner.0 + (k / rows) as f64 * (self.column_width + 3.0 * SPACE);
            let middle = corner.1 + ((k % rows) as f64 + 0.5) * ROW;
            canvas.group("class=\"legend\"", |pen| {
                pen.text(
                    &entry.words,
                    (x + SAMPLE + SPACE, middle + 0.35 * TEXT),
                    TEXT,
                    Stands::Behind,
                    BLACK,
                );
            });
            draw_sample(canvas, entry.sample, (x, middle));
        }
    }
}

fn draw_sample(canvas: &mut Canvas, sample: Sample, (x, y): Place) {
    let line = [(x, y), (x + SAMPLE, y)];
    let centre = (x + 0.5 * SAMPLE, y);
    match sample {
        Sample::Nothing => {}
        Sample::Marker(kind) => {
            canvas.group("class=\"legend\"", |pen| marker::draw(pen, kind, centre))
        }
        Sample::Line { ink, dashed } => {
            canvas.group(&line_attributes("legend", dashed), |pen| {
                pen.line(&line, ink.color, ink.weight)
            });
        }
        Sample::Numbered {
            ink,
            dashed,
            number,
        } => {
            canvas.group(&line_attributes("legend", dashed), |pen| {
                pen.line(&line, ink.color, ink.weight)
            });
            canvas.group("class=\"legend\"", |pen| {
                numbered(pen, number, centre, BLACK)
            });
        }
    }
}

/// Attributes of a group of curves.
pub(crate) fn line_attributes(class: &str, dashed: bool) -> String {
    let joins = "stroke-linejoin=\"round\"";
    let (dash, gap) = (
        DASHES.0 * crate::canvas::FINE,
        DASHES.1 * crate::canvas::FINE,
    );
    if dashed {
        format!("class=\"{class} unstable\" {joins} stroke-dasharray=\"{dash} {gap}\"")
    } else {
        format!("class=\"{class} stable\" {joins} stroke-linecap=\"round\"")
    }
}

/// A number in a small circle.
pub(crate) fn numbered(pen: &Pen, number: usize, centre: Place, color: RGBColor) {
    const OUTLINE: f64 = 0.5;
    pen.disc(centre, NUMBER_RADIUS, WHITE);
    pen.ring(centre, NUMBER_RADIUS - 0.5 * OUTLINE, color, OUTLINE);
    pen.text(
        &number.to_string(),
        (centre.0, centre.1 + 0.36 * SMALL),
        SMALL,
        Stands::Centred,
        color,
    );
}
