//! Rectangles, cutting of curves at the frame, thinning. All lengths in points (pt), y downwards.

/// A place on the page.
pub(crate) type Place = (f64, f64);

/// An upright rectangle.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Rect {
    pub(crate) left: f64,
    pub(crate) top: f64,
    pub(crate) right: f64,
    pub(crate) bottom: f64,
}

impl Rect {
    pub(crate) fn around((x, y): Place, half_width: f64, half_height: f64) -> Self {
        Self { left: x - half_width, top: y - half_height, right: x + half_width, bottom: y + half_height }
    }

    pub(crate) fn width(&self) -> f64 {
        self.right - self.left
    }

    pub(crate) fn height(&self) -> f64 {
        self.bottom - self.top
    }

    pub(crate) fn contains(&self, (x, y): Place) -> bool {
        x >= self.left && x <= self.right && y >= self.top && y <= self.bottom
    }

    pub(crate) fn holds(&self, other: &Rect) -> bool {
        self.contains((other.left, other.top)) && self.contains((other.right, other.bottom))
    }

    pub(crate) fn meets(&self, other: &Rect) -> bool {
        self.left < other.right && other.left < self.right && self.top < other.bottom && other.top < self.bottom
    }

    pub(crate) fn grown(&self, by: f64) -> Self {
        Self { left: self.left - by, top: self.top - by, right: self.right + by, bottom: self.bottom + by }
    }

    /// The part of a straight line inside (Liang & Barsky 1984, ACM Trans. Graph. 3:1).
    pub(crate) fn cut(&self, from: Place, to: Place) -> Option<(Place, Place)> {
        let (dx, dy) = (to.0 - from.0, to.1 - from.1);
        let (mut enter, mut leave) = (0.0f64, 1.0f64);
        let sides = [
            (-dx, from.0 - self.left),
            (dx, self.right - from.0),
            (-dy, from.1 - self.top),
            (dy, self.bottom - from.1),
        ];
        for (towards, room) in sides {
            if towards == 0.0 {
                if room < 0.0 {
                    return None;
                }
                continue;
            }
            let at = room / towards;
            if towards < 0.0 { enter = enter.max(at) } else { leave = leave.min(at) }
        }
        let at = |t: f64| (from.0 + t * dx, from.1 + t * dy);
        (enter <= leave)
            .then(|| (if enter == 0.0 { from } else { at(enter) }, if leave == 1.0 { to } else { at(leave) }))
    }
}

/// The parts of a line of many corners that lie inside the frame, in order.
pub(crate) fn cut_at(frame: &Rect, line: &[Place]) -> Vec<Vec<Place>> {
    let mut parts: Vec<Vec<Place>> = Vec::new();
    let mut open = false;
    for pair in line.windows(2) {
        let Some((from, to)) = frame.cut(pair[0], pair[1]) else {
            open = false;
            continue;
        };
        match parts.last_mut() {
            Some(part) if open => part.push(to),
            _ => parts.push(vec![from, to]),
        }
        open = to == pair[1];
    }
    // A line that only touches the frame from outside leaves a part without length.
    parts.retain(|part| part.iter().any(|place| *place != part[0]));
    parts
}

/// Leaves out corners that lie within `tolerance` of the line without them.
///
/// One pass with a bounded look-back: deterministic, and linear in the number of corners.
pub(crate) fn thinned(line: &[Place], tolerance: f64) -> Vec<Place> {
    const LOOK_BACK: usize = 32;
    let Some(&first) = line.first() else {
        return Vec::new();
    };
    let mut kept = vec![first];
    let mut last_kept = 0;
    for i in 1..line.len() {
        let straight = i + 1 < line.len()
            && i - last_kept < LOOK_BACK
            && (last_kept + 1..=i).all(|k| off_line(line[last_kept], line[i + 1], line[k]) <= tolerance);
        if !straight {
            kept.push(line[i]);
            last_kept = i;
        }
    }
    kept
}

/// Distance of `place` from the straight piece between two places.
fn off_line(from: Place, to: Place, place: Place) -> f64 {
    let (dx, dy) = (to.0 - from.0, to.1 - from.1);
    let length2 = dx * dx + dy * dy;
    let t = if length2 > 0.0 {
        (((place.0 - from.0) * dx + (place.1 - from.1) * dy) / length2).clamp(0.0, 1.0)
    } else {
        0.0
    };
    (place.0 - from.0 - t * dx).hypot(place.1 - from.1 - t * dy)
}

/// Length along a line of many corners.
pub(crate) fn length(line: &[Place]) -> f64 {
    line.windows(2).map(|pair| (pair[1].0 - pair[0].0).hypot(pair[1].1 - pair[0].1)).sum()
}

/// The place at `fraction` of the length, and the direction there as a unit vector.
pub(crate) fn at_fraction(line: &[Place], fraction: f64) -> Option<(Place, Place)> {
    let mut left = fraction * length(line);
    for pair in line.windows(2) {
        let (dx, dy) = (pair[1].0 - pair[0].0, pair[1].1 - pair[0].1);
        let piece = dx.hypot(dy);
        if piece > 0.0 && left <= piece {
            let direction = (dx / piece, dy / piece);
            return Some(((pair[0].0 + left * direction.0, pair[0].1 + left * direction.1), direction));
        }
        left -= piece;
    }
    None
}

#[cfg(test)]
mod tests {
    use super::*;

    const FRAME: Rect = Rect { left: 0.0, top: 0.0, right: 10.0, bottom: 10.0 };

    #[test]
    fn lines_are_cut_at_the_frame() {
        let parts = cut_at(&FRAME, &[(-5.0, 5.0), (5.0, 5.0), (5.0, 15.0), (7.0, 15.0), (7.0, 5.0)]);
        assert_eq!(parts, vec![vec![(0.0, 5.0), (5.0, 5.0), (5.0, 10.0)], vec![(7.0, 10.0), (7.0, 5.0)]]);
        assert!(cut_at(&FRAME, &[(-5.0, -1.0), (15.0, -1.0)]).is_empty());
        assert!(cut_at(&FRAME, &[(-5.0, 5.0), (5.0, -5.0)]).is_empty());
    }

    #[test]
    fn thinning_keeps_the_curve() {
        let circle: Vec<Place> =
            (0..=1000).map(|k| (k as f64 * 0.00628).sin_cos()).map(|(s, c)| (40.0 * c, 40.0 * s)).collect();
        let thin = thinned(&circle, 0.01);
        assert!(thin.len() < 250 && thin.len() > 40, "{}", thin.len());
        assert_eq!((thin[0], thin[thin.len() - 1]), (circle[0], circle[1000]));
        let off = |p: &Place| thin.windows(2).map(|w| off_line(w[0], w[1], *p)).fold(f64::MAX, f64::min);
        assert!(circle.iter().all(|p| off(p) < 0.011));
    }
}
