//! Places for names near what they name, without touching anything.
//!
//! Greedy: names are placed in order, each at the first of its candidate places that is free; a name
//! without a free place is left out. Same input, same places.

use crate::canvas::Stands;
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
        Self { frame, lines, boxes: Vec::new() }
    }

    pub(crate) fn take(&mut self, rect: Rect) {
        self.boxes.push(rect);
    }

    fn is_free(&self, rect: &Rect) -> bool {
        let grown = rect.grown(GAP);
        self.frame.holds(&grown)
            && !self.boxes.iter().any(|other| other.meets(&grown))
            && !self.lines.iter().any(|line| line.windows(2).any(|pair| grown.cut(pair[0], pair[1]).is_some()))
    }

    /// Takes the first free spot for something of this size around `centre`, `radius` away from it.
    pub(crate) fn beside(&mut self, centre: Place, radius: f64, size: (f64, f64)) -> Option<Spot> {
        self.first(REACHES.iter().flat_map(|reach| around(centre, radius + reach, size)))
    }

    /// As [`Taken::beside`], but close by only: for names of curves.
    pub(crate) fn near(&mut self, centre: Place, radius: f64, size: (f64, f64)) -> Option<Spot> {
        self.first(around(centre, radius + REACHES[0], size).into_iter())
    }

    fn first(&mut self, mut spots: impl Iterator<Item = Spot>) -> Option<Spot> {
        let found = spots.find(|spot| self.is_free(&spot.rect))?;
        self.take(found.rect);
        Some(found)
    }
}

/// Where a name stands, and which end of it is held fast: the one towards what it names.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Spot {
    pub(crate) rect: Rect,
    pub(crate) stands: Stands,
}

impl Spot {
    /// The place on the baseline of letters of this size.
    pub(crate) fn baseline(&self, size: f64) -> Place {
        /// Share of the size below the baseline.
        const DESCENT: f64 = 0.22;
        let x = match self.stands {
            Stands::Behind => self.rect.left,
            Stands::Before => self.rect.right,
            Stands::Centred | Stands::Upwards => self.centre().0,
        };
        (x, self.rect.bottom - DESCENT * size)
    }

    pub(crate) fn centre(&self) -> Place {
        (0.5 * (self.rect.left + self.rect.right), 0.5 * (self.rect.top + self.rect.bottom))
    }
}

/// Eight spots around a centre: right, left, above, below, then the corners.
fn around((x, y): Place, away: f64, (width, height): (f64, f64)) -> [Spot; 8] {
    use Stands::{Before, Behind, Centred};
    let (w, h) = (0.5 * width, 0.5 * height);
    let slant = std::f64::consts::FRAC_1_SQRT_2 * away;
    [
        (away + w, 0.0, Behind),
        (-away - w, 0.0, Before),
        (0.0, -away - h, Centred),
        (0.0, away + h, Centred),
        (slant + w, -slant - h, Behind),
        (-slant - w, -slant - h, Before),
        (slant + w, slant + h, Behind),
        (-slant - w, slant + h, Before),
    ]
    .map(|(dx, dy, stands)| Spot { rect: Rect::around((x + dx, y + dy), w, h), stands })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_never_meet_and_the_crowded_out_are_left() {
        let frame = Rect { left: 0.0, top: 0.0, right: 100.0, bottom: 60.0 };
        let lines = [vec![(0.0, 30.0), (100.0, 30.0)]];
        let mut taken = Taken::new(frame, &lines);
        let spots: Vec<Spot> = (0..40).filter_map(|_| taken.beside((50.0, 30.0), 3.0, (20.0, 7.0))).collect();
        assert!(spots.len() >= 2 && spots.len() < 40, "{}", spots.len());
        for (i, Spot { rect, .. }) in spots.iter().enumerate() {
            assert!(frame.holds(rect) && !(rect.top < 30.0 && rect.bottom > 30.0));
            assert!(spots[..i].iter().all(|other| !rect.meets(&other.rect)));
        }
    }
}
