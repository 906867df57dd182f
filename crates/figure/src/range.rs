//! Which part of the plane is shown.

use crate::axis::around;
use crate::error::FigureError;
use crate::geometry::{Place, Rect, cut_at};

/// The asked ranges in drawn numbers, none where the data decide.
pub(crate) struct Asked {
    pub(crate) x: Option<(f64, f64)>,
    pub(crate) y: Option<(f64, f64)>,
}

impl Asked {
    /// Checks the ranges of a figure; a logarithmic scale goes upwards only.
    pub(crate) fn new(x: Option<(f64, f64)>, y: Option<(f64, f64)>, logarithmic: bool) -> Result<Self, FigureError> {
        let x = x.map(|range| checked("x", range, false)).transpose()?;
        let y = y.map(|range| checked("y", range, logarithmic)).transpose()?;
        Ok(Self { x, y })
    }

    /// The window that shows the data, given as lines and single places; none where nothing is inside.
    pub(crate) fn window(&self, lines: &[Vec<Place>], dots: &[Place]) -> Option<Rect> {
        let all = (f64::NEG_INFINITY, f64::INFINITY);
        let (x, y) = (self.x.unwrap_or(all), self.y.unwrap_or(all));
        let asked = Rect { left: x.0, right: x.1, top: y.0, bottom: y.1 };
        let parts = lines.iter().flat_map(|line| cut_at(&asked, line)).flatten();
        let (x_seen, y_seen) = extent(parts.chain(dots.iter().copied().filter(|dot| asked.contains(*dot))))?;
        let (left, right) = self.x.unwrap_or_else(|| around(x_seen.0, x_seen.1));
        let (top, bottom) = self.y.unwrap_or_else(|| around(y_seen.0, y_seen.1));
        Some(Rect { left, right, top, bottom })
    }
}

fn checked(field: &'static str, asked: (f64, f64), logarithmic: bool) -> Result<(f64, f64), FigureError> {
    let (lo, hi) = if logarithmic { (asked.0.log10(), asked.1.log10()) } else { asked };
    // Narrower than this the scale itself is lost in roundoff, or below the smallest normal numbers.
    let wide = hi - lo > (1e-12 * lo.abs().max(hi.abs())).max(1.0 / crate::axis::LARGEST);
    let sound = crate::measure::sound(&lo) && crate::measure::sound(&hi);
    if sound && wide { Ok((lo, hi)) } else { Err(FigureError::Range { field, asked, logarithmic }) }
}

/// Smallest and largest of both coordinates.
pub(crate) fn extent(places: impl Iterator<Item = Place>) -> Option<((f64, f64), (f64, f64))> {
    places.fold(None, |extent, (x, y)| {
        let ((left, right), (low, high)) = extent.unwrap_or(((x, x), (y, y)));
        Some(((left.min(x), right.max(x)), (low.min(y), high.max(y))))
    })
}
