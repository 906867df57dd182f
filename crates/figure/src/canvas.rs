//! From places in points to SVG text, through plotters' SVG writer.
//!
//! That writer knows whole pixels only, and neither groups nor dashes. So everything is drawn on a canvas
//! [`FINE`] times finer than a point, of which only the printed width and height are rewritten, and each group
//! is written by itself and wrapped in a `<g>` that carries what the writer cannot say.

use plotters::backend::SVGBackend;
use plotters::coord::Shift;
use plotters::drawing::{DrawingArea, IntoDrawingArea};
use plotters::element::{Circle, PathElement, Polygon, Text};
use plotters::style::text_anchor::{HPos, Pos, VPos};
use plotters::style::{Color, FontDesc, FontFamily, FontStyle, FontTransform, RGBColor, ShapeStyle, TextStyle};

use crate::geometry::Place;
use crate::text::marked_up;

/// Canvas units in a point: a unit is 3.5 micrometres, far below what print resolves.
pub(crate) const FINE: f64 = 100.0;
/// Millimetres in a (desktop publishing) point.
pub(crate) const MM_PER_POINT: f64 = 25.4 / 72.0;
/// What plotters divides every font size by.
const FONT_DIVISOR: f64 = 1.24;
/// Where plotters puts the baseline of text anchored at its top, in units of the font size.
const TOP_TO_BASELINE: f64 = 0.76;

const FONTS: &str = "Arial, Helvetica, sans-serif";

/// Where a text stands relative to its place, which is always on the baseline.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Stands {
    Behind,
    Centred,
    Before,
    /// Centred, read from below.
    Upwards,
}

/// Draws into one group. Lengths in points.
pub(crate) struct Pen<'a, 'b> {
    area: &'a DrawingArea<SVGBackend<'b>, Shift>,
}

/// What plotters' writer into a `String` returns is always `Ok`.
const INFALLIBLE: &str = "writing into a String cannot fail";

fn unit(length: f64) -> i32 {
    (length * FINE).round() as i32
}

fn pixel((x, y): Place) -> (i32, i32) {
    (unit(x), unit(y))
}

impl Pen<'_, '_> {
    pub(crate) fn line(&self, line: &[Place], color: RGBColor, weight: f64) {
        let style = ShapeStyle { color: color.to_rgba(), filled: false, stroke_width: unit(weight) as u32 };
        let corners: Vec<(i32, i32)> = line.iter().copied().map(pixel).collect();
        self.area.draw(&PathElement::new(corners, style)).expect(INFALLIBLE);
    }

    pub(crate) fn area(&self, corners: &[Place], color: RGBColor) {
        let corners: Vec<(i32, i32)> = corners.iter().copied().map(pixel).collect();
        self.area.draw(&Polygon::new(corners, color)).expect(INFALLIBLE);
    }

    pub(crate) fn disc(&self, centre: Place, radius: f64, color: RGBColor) {
        self.area.draw(&Circle::new(pixel(centre), unit(radius), color.filled())).expect(INFALLIBLE);
    }

    pub(crate) fn ring(&self, centre: Place, radius: f64, color: RGBColor, weight: f64) {
        let style = ShapeStyle { color: color.to_rgba(), filled: false, stroke_width: unit(weight) as u32 };
        self.area.draw(&Circle::new(pixel(centre), unit(radius), style)).expect(INFALLIBLE);
    }

    pub(crate) fn text(&self, text: &str, (x, y): Place, size: f64, stands: Stands, color: RGBColor) {
        let (anchor, transform) = match stands {
            Stands::Behind => (HPos::Left, FontTransform::None),
            Stands::Centred => (HPos::Center, FontTransform::None),
            Stands::Before => (HPos::Right, FontTransform::None),
            Stands::Upwards => (HPos::Center, FontTransform::Rotate270),
        };
        let top = match stands {
            Stands::Upwards => (x - TOP_TO_BASELINE * size, y),
            _ => (x, y - TOP_TO_BASELINE * size),
        };
        let font =
            FontDesc::new(FontFamily::Name(FONTS), FINE * size * FONT_DIVISOR, FontStyle::Normal).transform(transform);
        let style = TextStyle::from(font).color(&color).pos(Pos::new(anchor, VPos::Top));
        self.area.draw(&Text::new(text.to_string(), pixel(top), style)).expect(INFALLIBLE);
    }
}

/// A page being drawn.
pub(crate) struct Canvas {
    size: (f64, f64),
    body: String,
}

impl Canvas {
    /// A page of this width and height in points.
    pub(crate) fn new(width: f64, height: f64) -> Self {
        Self { size: (width, height), body: String::new() }
    }

    fn pixels(&self) -> (u32, u32) {
        ((self.size.0 * FINE).round() as u32, (self.size.1 * FINE).round() as u32)
    }

    /// Adds a group; `attributes` are written as they stand.
    pub(crate) fn group(&mut self, attributes: &str, draw: impl FnOnce(&Pen)) {
        let mut written = String::new();
        {
            let area = SVGBackend::with_string(&mut written, self.pixels()).into_drawing_area();
            draw(&Pen { area: &area });
            area.present().expect(INFALLIBLE);
        }
        let opening = format!("<g {attributes}>\n");
        let empty = self.body.len() + opening.len();
        self.body.push_str(&opening);
        let mut lines = written.lines().filter(|line| !line.starts_with("<svg") && *line != "</svg>");
        while let Some(line) = lines.next() {
            if line.starts_with("<text") {
                // The words stand on their own line, escaped, so none of it begins with `<`.
                let words = marked_up(lines.next().unwrap_or_default());
                // Some readers drop a space between letters of two sizes unless told not to.
                let kept = if words.contains('<') { "<text xml:space=\"preserve\"" } else { "<text" };
                self.body.push_str(&line.replacen("<text", kept, 1));
                self.body.push_str(&words);
                self.body.push_str(lines.next().unwrap_or_default());
            } else {
                self.body.push_str(line);
            }
            self.body.push('\n');
        }
        if self.body.len() == empty {
            self.body.truncate(empty - opening.len());
        } else {
            self.body.push_str("</g>\n");
        }
    }

    /// The whole file.
    pub(crate) fn finish(self, title: &str, description: &str) -> String {
        let (width, height) = self.pixels();
        let mm = |pixels: u32| format!("{:.3}mm", f64::from(pixels) / FINE * MM_PER_POINT);
        format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{}\" height=\"{}\" viewBox=\"0 0 {width} {height}\">\n\
             <title>{}</title>\n<desc>{}</desc>\n\
             <rect x=\"0\" y=\"0\" width=\"{width}\" height=\"{height}\" fill=\"#FFFFFF\"/>\n{}</svg>\n",
            mm(width),
            mm(height),
            escaped(title),
            escaped(description),
            self.body
        )
    }
}

/// Text for the inside of an XML element.
fn escaped(text: &str) -> String {
    text.replace('&', "&amp;").replace('<', "&lt;").replace('>', "&gt;")
}
