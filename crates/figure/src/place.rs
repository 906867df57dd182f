//! Places for names near what they name, without touching anything.
//!
//! Greedy: names are placed in order, each at the first of its candidate places that is free; a name
//! without a free place is left out. Same input, same places.

use crate::geometry::{Place, Rect};

/// What is taken so far.
pub(crate) struct Taken<'a> {
    frame: Rect,
    lines: &'a [Vec<Place>],
    boxes: Vec<Rect>,
}

/// Distance kept between a name and anything else.
const GAP: f64 = 1.2;
/// Names are tried at these distances from the rim of a marker.
const REACHES: [f64; 3] = [2.0, 4.5, 7.5];

impl<'a> Taken<'a> {
    pub(crate) fn new(frame: Rect, lines: &'a [Vec<Place>]) -> Self {
        Self {
            frame,
            lines,
            boxes: Vec::new(),
        }
    }

    pub(crate) fn take(&mut self, rect: Rect) {
        self.boxes.push(rect);
    }

    fn is_free(&self, rect: &Rect) -> bool {
        let grown = rect.grown(GAP);
        self.frame.holds(&grown)
            && !self.boxes.iter().any(|other| other.meets(&grown))
            && !self.lines.iter().any(|line| {
                line.windows(2)
                    .any(|pair| grown.cut(pair[0], pair[1]).is_some())
            })
    }

    /// Takes the first free place for a name of this size around `centre`, `radius` away from it.
    pub(crate) fn beside(&mut self, centre: Place, radius: f64, size: (f64, f64)) -> Option<Rect> {
        let found = REACHES
            .iter()
            .flat_map(|reach| around(centre, radius + reach, size))
            .find(|rect| self.is_free(rect))?;
        self.take(found);
        Some(found)
    }

    /// As [`Taken::beside`], but close by only: for names of curves.
    pub(crate) fn near(&mut self, centre: Place, radius: f64, size: (f64, f64)) -> Option<Rect> {
        let found = around(centre, radius + REACHES[0], size)
            .into_iter()
            .find(|rect| self.is_free(rect))?;
        self.take(found);
        Some(found)
    }
}

/// Eight places around a centre: right, left, above, below, then the corners.
fn around((x, y): Place, away: f64, (width, height): (f64, f64)) -> [Rect; 8] {
    let (w, h) = (0.5 * width, 0.5 * height);
    let slant = std::f64::consts::FRAC_1_SQRT_2 * away;
    [
        (away + w, 0.0),
        (-away - w, 0.0),
        (0.0, -away - h),
        (0.0, away + h),
        (slant + w, -slant - h),
        (-slant - w, -slant - h),
        (slant + w, slant + h),
        (-slant - w, slant + h),
    ]
    .map(|(dx, dy)| Rect::around((x + dx, y + dy), w, h))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_never_meet_and_the_crowded_out_are_left() {
        let frame = Rect {
            left: 0.0,
            top: 0.0,
            right: 100.0,
            bottom: 60.0,
        };
        let lines = [vec![(0.0, 30.0), (100.0, 30.0)]];
        let mut taken = Taken::new(frame, &lines);
        let places: Vec<Rect> = (0..40)
            .filter_map(|_| taken.beside((50.0, 30.0), 3.0, (20.0, 7.0)))
            .collect();
        assert!(places.len() >= 4 && places.len() < 40, "{}", places.len());
        for (i, a) in places.iter().enumerate() {
            assert!(frame.holds(a) && !(a.top < 30.0 && a.bottom > 30.0));
            assert!(places[..i].iter().all(|b| !a.meets(b)));
        }
    }
}
