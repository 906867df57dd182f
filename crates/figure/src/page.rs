//! The page: how wide, where the frame stands, axes, and the legend around it.

use crate::axis::Axis;
use crate::canvas::{Canvas, MM_PER_POINT, Stands};
use crate::error::FigureError;
use crate::geometry::{Place, Rect};
use crate::legend::{Entry, Legend, TEXT};
use crate::palette::BLACK;
use crate::spec::{WIDTHS_MM, Width};
use crate::text;

/// From this width on (mm) the legend stands beside the frame, below it otherwise.
const BESIDE_FROM_MM: f64 = 125.0;
/// Weight of frame and ticks in points.
const FRAME: f64 = 0.5;
/// Ticks point outwards, away from the data.
const TICK: f64 = 2.8;
const SHORT_TICK: f64 = 1.6;
/// Space between things that belong together, and at the rim of the page.
const SPACE: f64 = 3.0;
const LINE: f64 = 1.2 * TEXT;
/// Share of the page that a legend beside the frame may take.
const LEGEND_SHARE: f64 = 0.36;
/// Letters stand this much above the baseline, and below.
const ASCENT: f64 = 0.75;
const DESCENT: f64 = 0.25;

/// One direction of the plane, before the page is laid out.
pub(crate) struct Scale {
    pub(crate) range: (f64, f64),
    pub(crate) logarithmic: bool,
    pub(crate) quantity: String,
    pub(crate) unit: String,
}

impl Scale {
    fn axis(&self, most: usize) -> Axis {
        let (lo, hi) = self.range;
        if self.logarithmic { Axis::logarithmic(lo, hi, most) } else { Axis::linear(lo, hi, most) }
    }

    /// The axis with as many names as stand beside each other along `room`.
    fn axis_across(&self, room: f64) -> Axis {
        const CLEAR: f64 = 10.0;
        (2..=8)
            .rev()
            .map(|most| self.axis(most))
            .find(|axis| {
                let mut places: Vec<f64> = axis
                    .ticks
                    .iter()
                    .filter(|tick| tick.name.is_some())
                    .map(|tick| axis.fraction(tick.at) * room)
                    .collect();
                places.sort_by(f64::total_cmp);
                let closest = places.windows(2).map(|pair| pair[1] - pair[0]).fold(f64::MAX, f64::min);
                closest > axis.widest(TEXT) + CLEAR
            })
            .unwrap_or_else(|| self.axis(1))
    }
}

/// A page that is laid out.
pub(crate) struct Page {
    pub(crate) frame: Rect,
    x: Axis,
    y: Axis,
    x_label: Vec<String>,
    y_label: Vec<String>,
    size: (f64, f64),
    legend: Legend,
    legend_corner: Place,
}

/// Width of a page in points, checked.
pub(crate) fn points(width: Width) -> Result<f64, FigureError> {
    let asked = width.millimetres();
    if asked >= WIDTHS_MM.0 && asked <= WIDTHS_MM.1 {
        Ok(asked / MM_PER_POINT)
    } else {
        Err(FigureError::Width { asked })
    }
}

/// Whether the legend of a page of this width in points stands beside the frame.
pub(crate) fn legend_beside(width: f64) -> bool {
    width * MM_PER_POINT >= BESIDE_FROM_MM
}

/// Height of the frame on a page of this width.
pub(crate) fn frame_height(width: f64) -> f64 {
    if legend_beside(width) { 0.43 * width } else { 0.62 * width }
}

impl Page {
    pub(crate) fn new(width: f64, x: &Scale, y: &Scale, entries: Vec<Entry>) -> Self {
        let beside = legend_beside(width).then(|| Legend::beside(entries.clone()));
        let beside = beside.filter(|legend| legend.width() <= LEGEND_SHARE * width);
        let height = beside.as_ref().map_or(0.0, Legend::height).max(frame_height(width));
        let y_axis = y.axis(((height / 24.0) as usize).max(2));
        let (y_name, y_unit) = y_axis.label(&y.quantity, &y.unit);
        let y_label = text::two_lines(&y_name, &y_unit, TEXT, height / text::STAND_IN);
        let left = SPACE + y_label.len() as f64 * LINE + SPACE + y_axis.widest(TEXT) + SPACE + TICK;
        let top = SPACE + 0.5 * TEXT;
        let taken_right = beside.as_ref().map_or(0.0, |legend| legend.width() + 2.0 * SPACE);
        let room = |margin: f64| width - left - margin - taken_right;
        // The last number may hang over the end of the axis by half its width.
        let guess = x.axis_across(room(10.0));
        let margin = (0.5 * guess.widest(TEXT)).max(SPACE) + SPACE;
        let x_axis = x.axis_across(room(margin));
        let frame = Rect { left, top, right: left + room(margin), bottom: top + height };
        let (x_name, x_unit) = x_axis.label(&x.quantity, &x.unit);
        let x_label = text::two_lines(&x_name, &x_unit, TEXT, frame.width() / text::STAND_IN);
        let below = frame.bottom + TICK + SPACE + LINE + x_label.len() as f64 * LINE + 2.0 * SPACE;
        let (legend, legend_corner, bottom) = match beside {
            Some(legend) => (legend, (frame.right + margin + SPACE, frame.top), below),
            None => {
                let legend = Legend::below(entries, width - 2.0 * SPACE);
                // In line with the frame, or further left where it is wide.
                let indent = left.min(width - SPACE - legend.width());
                let bottom = below + legend.height() + SPACE;
                (legend, (indent, below), bottom)
            }
        };
        Self { frame, x: x_axis, y: y_axis, x_label, y_label, size: (width, bottom), legend, legend_corner }
    }

    /// Where drawn numbers stand on the page.
    pub(crate) fn place(&self, (x, y): Place) -> Place {
        (
            self.frame.left + self.x.fraction(x) * self.frame.width(),
            self.frame.bottom - self.y.fraction(y) * self.frame.height(),
        )
    }

    pub(crate) fn canvas(&self) -> Canvas {
        Canvas::new(self.size.0, self.size.1)
    }

    /// Frame, ticks, names and legend.
    pub(crate) fn draw(&self, canvas: &mut Canvas) {
        let Rect { left, top, right, bottom } = self.frame;
        canvas.group("class=\"frame\" stroke-linejoin=\"miter\"", |pen| {
            let corners = [(left, top), (right, top), (right, bottom), (left, bottom), (left, top), (right, top)];
            pen.line(&corners, BLACK, FRAME);
            for tick in &self.x.ticks {
                let x = left + self.x.fraction(tick.at) * self.frame.width();
                let long = if tick.name.is_some() { TICK } else { SHORT_TICK };
                pen.line(&[(x, bottom), (x, bottom + long)], BLACK, FRAME);
            }
            for tick in &self.y.ticks {
                let y = bottom - self.y.fraction(tick.at) * self.frame.height();
                let long = if tick.name.is_some() { TICK } else { SHORT_TICK };
                pen.line(&[(left - long, y), (left, y)], BLACK, FRAME);
            }
        });
        self.draw_lettering(canvas);
        self.legend.draw(canvas, self.legend_corner);
    }

    fn draw_lettering(&self, canvas: &mut Canvas) {
        let Rect { left, bottom, .. } = self.frame;
        let x_baseline = bottom + TICK + SPACE + ASCENT * TEXT;
        canvas.group("class=\"axes\"", |pen| {
            for tick in &self.x.ticks {
                let x = left + self.x.fraction(tick.at) * self.frame.width();
                if let Some(name) = &tick.name {
                    pen.text(name, (x, x_baseline), TEXT, Stands::Centred, BLACK);
                }
            }
            for tick in &self.y.ticks {
                let y = bottom - self.y.fraction(tick.at) * self.frame.height();
                if let Some(name) = &tick.name {
                    pen.text(name, (left - TICK - SPACE, y + 0.36 * TEXT), TEXT, Stands::Before, BLACK);
                }
            }
            let middle = (0.5 * (left + self.frame.right), 0.5 * (self.frame.top + bottom));
            for (k, line) in self.x_label.iter().enumerate() {
                let baseline = x_baseline + DESCENT * TEXT + (k as f64 + 1.0) * LINE;
                pen.text(line, (middle.0, baseline), TEXT, Stands::Centred, BLACK);
            }
            for (k, line) in self.y_label.iter().enumerate() {
                let baseline = SPACE + ASCENT * TEXT + k as f64 * LINE;
                pen.text(line, (baseline, middle.1), TEXT, Stands::Upwards, BLACK);
            }
        });
    }
}
