//! Colours and line weights.
//!
//! Okabe & Ito (2002, modified 2008), "Color universal design", without yellow, which thin lines do not carry, and with
//! a dark brown of our own in place of black, in which the legend shows the line styles.
//! Colour never stands alone: neighbouring branches differ in weight too, and carry their names.

use plotters::style::RGBColor;

pub(crate) const BLACK: RGBColor = RGBColor(0, 0, 0);
pub(crate) const WHITE: RGBColor = RGBColor(255, 255, 255);
/// For guide lines that are no data.
pub(crate) const GREY: RGBColor = RGBColor(150, 150, 150);

const LINES: [RGBColor; 7] = [
    RGBColor(0x00, 0x72, 0xB2), // blue
    RGBColor(0xD5, 0x5E, 0x00), // vermilion
    RGBColor(0x00, 0x9E, 0x73), // bluish green
    RGBColor(0x5C, 0x3A, 0x00), // dark brown
    RGBColor(0xCC, 0x79, 0xA7), // reddish purple
    RGBColor(0xE6, 0x9F, 0x00), // orange
    RGBColor(0x56, 0xB4, 0xE9), // sky blue
];

/// Weights in points; none below the half point that publishers ask for. Their number shares no divisor with that of
/// the colours, so that 21 lines pass before a pair comes again.
const WEIGHTS: [f64; 3] = [1.0, 1.5, 0.7];

/// How equilibria are drawn: thin and grey beside the cycles, which carry the colours; dark enough for dashes.
pub(crate) const AT_REST: Ink = Ink { color: RGBColor(80, 80, 80), weight: 0.7 };

/// How the `index`-th line is drawn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Ink {
    pub(crate) color: RGBColor,
    pub(crate) weight: f64,
}

pub(crate) fn ink(index: usize) -> Ink {
    Ink { color: LINES[index % LINES.len()], weight: WEIGHTS[index % WEIGHTS.len()] }
}

/// The same hue, dark enough for 7 pt letters on white.
pub(crate) fn lettering(color: RGBColor) -> RGBColor {
    let RGBColor(r, g, b) = color;
    // Rec. 601 luma; above half of white, letters of this size fade in grey print.
    let luma = 0.299 * f64::from(r) + 0.587 * f64::from(g) + 0.114 * f64::from(b);
    const DARK: f64 = 100.0;
    let scale = (DARK / luma.max(1.0)).min(1.0);
    let darker = |part: u8| (f64::from(part) * scale).round() as u8;
    RGBColor(darker(r), darker(g), darker(b))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Rec. 601 luma of the colour, as a grey copier sees it.
    fn luma(RGBColor(r, g, b): RGBColor) -> f64 {
        0.299 * f64::from(r) + 0.587 * f64::from(g) + 0.114 * f64::from(b)
    }

    #[test]
    fn neighbouring_lines_differ_in_grey_print() {
        for index in 0..50 {
            let (a, b) = (ink(index), ink(index + 1));
            assert!((a.weight / b.weight).ln().abs() > 0.3, "{index}");
            assert!((0..index).all(|earlier| index - earlier >= 21 || ink(earlier) != a));
        }
        assert!((0..7).all(|index| luma(lettering(ink(index).color)) <= 101.0));
    }
}
