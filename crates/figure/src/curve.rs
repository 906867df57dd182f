//! A branch as smooth curves: points and located events, joined along the distance.

use armilla_record::{Branch, Event, EventKind};

use crate::geometry::Place;
use crate::interpolate::{hermite, slopes};
use crate::measure::{Cycle, Reader, sound};
use crate::stability::{Stretch, least_count_at};

/// A curve without a gap, in drawn numbers.
#[derive(Clone, Debug, Default)]
pub(crate) struct Curve {
    s: Vec<f64>,
    x: Vec<f64>,
    y: Vec<f64>,
    slopes: (Vec<f64>, Vec<f64>),
}

/// A vertex: distance and place.
type Vertex = (f64, Place);

impl Curve {
    fn new(vertices: &[Vertex]) -> Self {
        let s: Vec<f64> = vertices.iter().map(|vertex| vertex.0).collect();
        let x: Vec<f64> = vertices.iter().map(|vertex| vertex.1.0).collect();
        let y: Vec<f64> = vertices.iter().map(|vertex| vertex.1.1).collect();
        let slopes = (slopes(&s, &x), slopes(&s, &y));
        Self { s, x, y, slopes }
    }

    pub(crate) fn places(&self) -> impl DoubleEndedIterator<Item = Place> + '_ {
        self.x.iter().copied().zip(self.y.iter().copied())
    }

    /// Whether the curve is one place only.
    pub(crate) fn is_dot(&self) -> bool {
        self.s.len() == 1
    }

    fn spans(&self, s: f64) -> bool {
        self.s.first().is_some_and(|first| s >= *first) && self.s.last().is_some_and(|last| s <= *last)
    }

    /// The place at a distance.
    pub(crate) fn at(&self, s: f64) -> Option<Place> {
        if !self.spans(s) {
            return None;
        }
        let k = self.s.partition_point(|knot| *knot <= s).clamp(1, self.s.len().max(2) - 1) - 1;
        if k + 1 >= self.s.len() {
            return Some((self.x[k], self.y[k]));
        }
        let length = self.s[k + 1] - self.s[k];
        let u = (s - self.s[k]) / length;
        let along = |v: &[f64], m: &[f64]| hermite((v[k], v[k + 1]), (m[k], m[k + 1]), length, u);
        Some((along(&self.x, &self.slopes.0), along(&self.y, &self.slopes.1)))
    }

    /// The corners of the curve over the part of a stretch that it covers.
    pub(crate) fn line(&self, stretch: &Stretch) -> Vec<Place> {
        let (Some(&first), Some(&last)) = (self.s.first(), self.s.last()) else {
            return Vec::new();
        };
        let (from, to) = (stretch.from.max(first), stretch.to.min(last));
        if from >= to {
            return Vec::new();
        }
        let inner = self.s[self.s.partition_point(|s| *s <= from)..].iter().copied().take_while(|s| *s < to);
        let knots: Vec<f64> = std::iter::once(from).chain(inner).chain([to]).collect();
        let parts = self.parts();
        let mut line: Vec<Place> = self.at(from).into_iter().collect();
        for pair in knots.windows(2) {
            let place = |k: usize| {
                if k == parts { pair[1] } else { pair[0] + (pair[1] - pair[0]) * k as f64 / parts as f64 }
            };
            line.extend((1..=parts).filter_map(|k| self.at(place(k))));
        }
        line
    }

    /// Straight parts between two vertices: few vertices get many, so that a whole curve has some thousand corners
    /// before those that are not needed are left out.
    fn parts(&self) -> usize {
        const CORNERS: usize = 4000;
        (CORNERS / self.s.len()).clamp(12, 160)
    }

    /// Adds a place at the end that is nearest to it, where a branch was born.
    ///
    /// The distance to it is not recorded; it is taken in proportion to the gap as seen in a frame of
    /// `size`. Nothing is added across a gap wider than `widest` (a share of the frame).
    pub(crate) fn joined(self, place: Place, size: Place, widest: f64) -> Self {
        let n = self.s.len();
        let gap = |a: Place, b: Place| ((a.0 - b.0) / size.0).hypot((a.1 - b.1) / size.1);
        let mut vertices: Vec<Vertex> = self.s.iter().copied().zip(self.places()).collect();
        if n < 2 {
            return self;
        }
        let at_begin = gap(vertices[0].1, place) <= gap(vertices[n - 1].1, place);
        let (end, next) = if at_begin { (0, 1) } else { (n - 1, n - 2) };
        let (open, step) = (gap(vertices[end].1, place), gap(vertices[end].1, vertices[next].1));
        // Closer than a hundredth of a percent of the frame nothing would show.
        if open > widest || open < 1e-4 || step == 0.0 {
            return self;
        }
        let distance = vertices[end].0 + (vertices[end].0 - vertices[next].0) * open / step;
        vertices.insert(if at_begin { 0 } else { n }, (distance, place));
        Self::new(&vertices)
    }

    /// The first and the last distance.
    pub(crate) fn ends(&self) -> Option<(f64, f64)> {
        Some((*self.s.first()?, *self.s.last()?))
    }
}

/// The curves of one measure along a branch: more than one where numbers are missing between.
pub(crate) fn curves(branch: &Branch, reader: &Reader, component: usize, stretches: &[Stretch]) -> Vec<Curve> {
    let mut entries: Vec<(f64, Option<Place>)> = branch
        .points
        .iter()
        .filter(|point| point.distance.is_finite())
        .map(|point| {
            let y = reader.drawn(&Cycle::of_point(point), component);
            (point.distance, y.filter(|_| sound(&point.value)).map(|y| (point.value, y)))
        })
        .collect();
    let events = branch.events.iter().filter(|event| event.kind.is_threshold() && event.distance.is_finite());
    // Only what lies between the points: an event at an open end has its own reason and no curve beyond.
    let at_events = events.filter_map(|event| {
        event_place(event, reader, component, stretches).map(|place| (event.distance, Some(place)))
    });
    entries.extend(at_events);
    entries.sort_by(|a, b| a.0.total_cmp(&b.0));
    let length = entries.last().map_or(0.0, |last| last.0 - entries[0].0);
    let mut runs: Vec<Vec<Vertex>> = vec![Vec::new()];
    for (s, place) in entries {
        let run = runs.last_mut().expect("starts with one run");
        match place {
            None if !run.is_empty() => runs.push(Vec::new()),
            None => {}
            // Closer than this two vertices have no slope between them that means anything.
            Some(_) if run.last().is_some_and(|last| s - last.0 <= 1e-9 * length) => {}
            Some(place) => run.push((s, place)),
        }
    }
    runs.iter().filter(|run| !run.is_empty()).map(|run| Curve::new(run)).collect()
}

/// Where an event lies by its own numbers.
pub(crate) fn event_place(event: &Event, reader: &Reader, component: usize, stretches: &[Stretch]) -> Option<Place> {
    // The critical multiplier lies on the unit circle; it is the largest where none is outside.
    let critical = (is_critical(event.kind) && least_count_at(stretches, event.distance) == Some(0)).then_some(0.0);
    let y = reader.drawn(&Cycle::of_event(event, critical), component)?;
    sound(&event.value).then_some((event.value, y))
}

/// Kinds at which a multiplier crosses the unit circle at this very place.
fn is_critical(kind: EventKind) -> bool {
    use EventKind::{Branching, Doubling, Fold, Pitchfork, Torus, Transcritical};
    matches!(kind, Fold | Doubling | Torus | Pitchfork | Transcritical | Branching)
}
