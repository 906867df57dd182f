//! The cubic through values and slopes at both ends of a stride.

use crate::problem::Watched;

/// A cubic on the unit interval, `value + x (slope + x (c2 + x c3))`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Hermite {
    start: f64,
    slope: f64,
    c2: f64,
    c3: f64,
}

impl Hermite {
    /// The cubic with the given values and slopes at 0 and 1.
    pub fn new((from, start): (f64, f64), (to, stop): (f64, f64)) -> Self {
        Self {
            start: from,
            slope: start,
            c2: 3.0 * (to - from) - 2.0 * start - stop,
            c3: 2.0 * (from - to) + start + stop,
        }
    }

    /// The cubic of a watched value over a stride of a length; none where a slope is not known.
    pub fn over(length: f64, before: Watched, after: Watched) -> Option<Self> {
        Some(Self::new((before.value, length * before.slope?), (after.value, length * after.slope?)))
    }

    /// Its value.
    pub fn at(self, x: f64) -> f64 {
        self.start + x * (self.slope + x * (self.c2 + x * self.c3))
    }

    /// Places strictly inside the interval where it is stationary.
    pub fn stationary(self) -> [Option<f64>; 2] {
        // Zeros of slope + 2 c2 x + 3 c3 x^2, both in the forms that do not cancel.
        let square = self.c2 * self.c2 - 3.0 * self.c3 * self.slope;
        if !(square >= 0.0) {
            return [None, None];
        }
        let sum = -(self.c2 + square.sqrt().copysign(self.c2));
        let inside = |x: f64| (x > 0.0 && x < 1.0).then_some(x);
        [inside(self.slope / sum), inside(sum / (3.0 * self.c3))]
    }

    /// Where inside the interval it comes nearest to zero, seen from the side of its start, or farthest beyond; with its
    /// value there. None where it is nearest at an end.
    pub fn lowest(self) -> Option<(f64, f64)> {
        let side = 1.0f64.copysign(self.start);
        let places = self.stationary().into_iter().flatten().map(|x| (x, self.at(x)));
        places
            .min_by(|a, b| (side * a.1).total_cmp(&(side * b.1)))
            .filter(|(_, value)| side * value < side * self.at(1.0) && side * value < side * self.start)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: the parabola (x - 1/2)^2 - 1/100 and the cubic x^3 - x + 1, whose stationary place is 1/sqrt 3.
    #[test]
    fn stationary_places_are_exact() {
        let bubble = Hermite::new((0.24, -1.0), (0.24, 1.0));
        let (x, value) = bubble.lowest().expect("a lowest place");
        assert!((x - 0.5).abs() < 1e-15 && (value + 0.01).abs() < 1e-15, "{x} {value}");
        let (x, value) = Hermite::new((1.0, -1.0), (1.0, 2.0)).lowest().expect("a lowest place");
        let exact = 1.0 / 3.0f64.sqrt();
        assert!((x - exact).abs() < 1e-15 && (value - (exact.powi(3) - exact + 1.0)).abs() < 1e-15, "{x} {value}");
        // The mirror image, and one that falls all the way.
        let (x, value) = Hermite::new((-0.24, 1.0), (-0.24, -1.0)).lowest().expect("a lowest place");
        assert!((x - 0.5).abs() < 1e-15 && (value - 0.01).abs() < 1e-15, "{x} {value}");
        assert_eq!(Hermite::new((1.0, -0.5), (0.5, -0.5)).lowest(), None);
        let unknown = Watched { value: 1.0, slope: None };
        assert_eq!(Hermite::over(1.0, unknown, unknown), None);
    }
}
