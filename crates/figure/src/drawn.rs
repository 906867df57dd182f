//! What each branch draws, before it is known which part of the plane is shown.

use armilla_record::{Branch, Event, EventKind};

use crate::curve::{Curve, curves, event_place};
use crate::geometry::{Place, Rect};
use crate::measure::{Cycle, Reader};
use crate::range::extent;
use crate::stability::{Stretch, least_count_at, stretches};

/// A branch is drawn up to its birth across a gap not wider than this share of the frame.
const WIDEST_BIRTH_GAP: f64 = 0.08;

/// What one branch draws.
pub(crate) struct Drawn {
    stretches: Vec<Stretch>,
    /// The curves of each component of the measure.
    curves: Vec<Vec<Curve>>,
    /// Unstable count of the first point, for branches of one point.
    first_count: usize,
}

/// An event that gets a marker.
pub(crate) struct Mark<'a> {
    pub(crate) event: &'a Event,
    /// Its places in drawn numbers, one for each curve of the measure that is inside.
    pub(crate) places: Vec<Place>,
    /// The number of a target.
    pub(crate) number: Option<usize>,
}

impl Drawn {
    pub(crate) fn new(branch: &Branch, reader: &Reader) -> Self {
        let stretches = stretches(branch);
        let curves = (0..reader.curves()).map(|component| curves(branch, reader, component, &stretches)).collect();
        let first_count = branch.points.first().map_or(0, |point| point.unstable_count);
        Self { stretches, curves, first_count }
    }

    /// Each stretch of equal stability as one line, with whether it is dashed.
    pub(crate) fn lines(&self) -> impl Iterator<Item = (bool, Vec<Place>)> + '_ {
        self.curves.iter().flatten().flat_map(|curve| {
            let mut joined: Vec<(bool, Stretch)> = Vec::new();
            for stretch in self.reaching(curve) {
                let dashed = stretch.unstable_count > 0;
                match joined.last_mut() {
                    Some((style, last)) if *style == dashed && last.to == stretch.from => last.to = stretch.to,
                    _ => joined.push((dashed, stretch)),
                }
            }
            joined
                .into_iter()
                .map(|(dashed, stretch)| (dashed, curve.line(&stretch)))
                .filter(|(_, line)| line.len() > 1)
        })
    }

    /// The stretches, the outer ones drawn out to the ends of the curve: a birth or an event may lie
    /// a little beyond the last point.
    fn reaching(&self, curve: &Curve) -> Vec<Stretch> {
        let mut stretches = self.stretches.clone();
        if let (Some((from, to)), false) = (curve.ends(), stretches.is_empty()) {
            let last = stretches.len() - 1;
            stretches[0].from = stretches[0].from.min(from);
            stretches[last].to = stretches[last].to.max(to);
        }
        stretches
    }

    fn at(&self, component: usize, distance: f64) -> Option<Place> {
        self.curves[component].iter().find_map(|curve| curve.at(distance))
    }

    /// Places that stand alone, with whether the cycle there is unstable.
    pub(crate) fn dots(&self) -> impl Iterator<Item = (Place, bool)> + '_ {
        let lone = self.curves.iter().flatten().filter(|curve| curve.is_dot());
        lone.flat_map(move |curve| {
            let count = curve.ends().and_then(|(s, _)| least_count_at(&self.stretches, s));
            curve.places().map(move |place| (place, count.unwrap_or(self.first_count) > 0))
        })
    }
}

pub(crate) fn dots(drawn: &[Drawn]) -> Vec<Place> {
    drawn.iter().flat_map(Drawn::dots).map(|(place, _)| place).collect()
}

/// All vertices of all curves.
pub(crate) fn places(drawn: &[Drawn]) -> impl Iterator<Item = Place> + '_ {
    drawn.iter().flat_map(|drawn| drawn.curves.iter().flatten()).flat_map(Curve::places)
}

/// Draws each branch up to the event it was born at, if that is on another branch given.
pub(crate) fn join_births(drawn: &mut [Drawn], branches: &[Branch], reader: &Reader) {
    let Some((x, y)) = extent(places(drawn)) else { return };
    let size = (x.1 - x.0, y.1 - y.0);
    if size.0 <= 0.0 || size.1 <= 0.0 {
        return;
    }
    for (index, branch) in branches.iter().enumerate() {
        let Some(born_at) = &branch.born_at else {
            continue;
        };
        let Some(event) = branches.iter().flat_map(|other| &other.events).find(|event| event.name == *born_at) else {
            continue;
        };
        let turns = branch.points.first().map_or(event.turns, |point| point.turns);
        let times = turns as f64 / event.turns.max(1) as f64;
        // Both sides meet where the critical multiplier is on the unit circle.
        let log_modulus = drawn[index].stretches.iter().any(|stretch| stretch.unstable_count == 0).then_some(0.0);
        let cycle = Cycle::of_event(event, log_modulus).repeated(times);
        for component in 0..reader.curves() {
            let Some(y) = reader.drawn(&cycle, component).filter(|_| event.value.is_finite()) else {
                continue;
            };
            for curve in &mut drawn[index].curves[component] {
                *curve = std::mem::take(curve).joined((event.value, y), size, WIDEST_BIRTH_GAP);
            }
        }
    }
}

/// The thresholds and targets inside the window, in the order of branches and events.
pub(crate) fn marks<'a>(branches: &'a [Branch], drawn: &[Drawn], reader: &Reader, window: &Rect) -> Vec<Mark<'a>> {
    let mut targets = 0;
    let mut marks = Vec::new();
    for (branch, drawn) in branches.iter().zip(drawn) {
        for event in &branch.events {
            let number = (event.kind == EventKind::Target).then(|| {
                targets += 1;
                targets
            });
            if !event.kind.is_threshold() && number.is_none() {
                continue;
            }
            let place = |component| {
                event_place(event, reader, component, &drawn.stretches).or_else(|| drawn.at(component, event.distance))
            };
            let places: Vec<Place> =
                (0..reader.curves()).filter_map(place).filter(|place| window.contains(*place)).collect();
            if !places.is_empty() {
                marks.push(Mark { event, places, number });
            }
        }
    }
    marks
}
