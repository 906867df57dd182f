//! The lowest place of a watched value inside a stride, found by cycles computed in between.
//!
//! Successive parabolic interpolation through three points (Brent 1973, Algorithms for Minimization without
//! Derivatives, ch. 5), begun with the point before the stride where there is one, or with the place of a cubic. It ends
//! with a station beyond zero, with the bottom of a valley that stays clear of zero, or with one on zero to roundoff.

use armilla_follow::Problem;
use armilla_stability::{CycleProblem, Dip};

use crate::walk::CycleStation;

/// Share of the larger end value under which the lowest value of the parabola is looked at. Values are products of
/// several multipliers, which parabolas do not follow far: half, where a tenth would do for a parabola itself.
const LOW: f64 = 0.5;
/// Value above which, at both ends, no multiplier passes and comes back inside a stride; the guards bound its change.
const NEAR: f64 = 0.6;
/// Value under which, at one end, the middle of the stride is computed where the parabola through the station before tells of
/// no low place: beyond an event that value has another sign there, and says little.
const CLOSE: f64 = 0.05;
/// Strides by which the lowest place of a parabola may lie outside of the one it was made for and still be looked for
/// inside: half a stride is what a smooth value may shift it by.
const BESIDE: f64 = 0.5;
/// Share of a stride from its ends at which it is looked for then.
const INSIDE: f64 = 0.01;
/// Share of the lowest value found that the parabola may still promise below it once the bottom is found.
const SETTLED: f64 = 0.7;
/// Value that cannot be told from zero.
const ZERO: f64 = 1e-12;
/// Share of the smaller end value that the bottom of a valley must fall below to count as one.
const BOTTOM: f64 = 0.01;
/// Cycles computed in search of the bottom.
const SEARCHES: usize = 30;

/// A value along a branch, the same smooth function at all stations between the two asked of.
pub(crate) type Value<'v> = &'v dyn Fn(&CycleStation) -> Option<f64>;

/// A point of a parabola.
type Sample = (f64, f64);

/// Looks for a place beyond zero between two stations with values of the same sign; `earlier` is the station before them,
/// for the first parabola. Without one the middle is computed.
pub(crate) fn valley(
    problem: &mut CycleProblem,
    (before, after): (&CycleStation, &CycleStation),
    earlier: Option<&CycleStation>,
    value: Value<'_>,
) -> Dip {
    search(problem, (before, after), earlier, value).unwrap_or(Dip::Clear)
}

fn search(
    problem: &mut CycleProblem,
    (before, after): (&CycleStation, &CycleStation),
    earlier: Option<&CycleStation>,
    value: Value<'_>,
) -> Option<Dip> {
    let (from, to) = (value(before)?, value(after)?);
    if !(from * to > 0.0 && from.abs().min(to.abs()) < NEAR) {
        return None;
    }
    let side = from.signum();
    let length = problem.distance(&before.point, &after.point);
    let (low, high) = ((0.0, from * side), (1.0, to * side));
    let size = low.1.max(high.1);
    let outer = earlier.and_then(|station| {
        let distance = problem.distance(&station.point, &before.point) / length;
        (distance > 0.0).then_some((-distance, value(station)? * side))
    });
    let hopeful = |outer: &Sample| {
        let lowest = lowest([*outer, low, high]);
        lowest.is_some_and(|(share, promised)| (-BESIDE..1.0 + BESIDE).contains(&share) && promised <= LOW * size)
    };
    let close = low.1.min(high.1) < CLOSE;
    let mut triple = match outer.filter(|outer| !close || hopeful(outer)) {
        Some(outer) => [outer, low, high],
        None => {
            let middle = problem.between(before, after, 0.5)?;
            [low, (0.5, value(&middle)? * side), high]
        }
    };
    let mut best: Option<Sample> = None;
    for _ in 0..SEARCHES {
        let (share, promised) = lowest(triple).filter(|(share, _)| *share > -BESIDE && *share < 1.0 + BESIDE)?;
        let settled = best.is_some_and(|best| promised > SETTLED * best.1);
        if promised > LOW * size || settled {
            return Some(Dip::Clear);
        }
        let share = share.clamp(INSIDE, 1.0 - INSIDE);
        let station = problem.between(before, after, share)?;
        let found = value(&station)? * side;
        // Beside an event that another step has told the ends themselves are as small.
        if found.abs() < ZERO.min(BOTTOM * low.1.min(high.1)) {
            return Some(Dip::Touch(Box::new(station)));
        }
        if found < 0.0 {
            return Some(Dip::Split(Box::new(station)));
        }
        // The next parabola goes through the lowest point and its neighbours.
        match around(triple, (share, found), (low, high)) {
            Some(next) => triple = next,
            None => match beside_end(problem, (before, after), value, (share, [low, high]))? {
                Ok(station) => return Some(Dip::Split(Box::new(station))),
                Err(next) => triple = next,
            },
        }
        best = Some(triple[1]);
    }
    Some(Dip::Clear)
}

/// Looks between the lower end and a point for a place below that end: one beyond zero, or three points around a low place.
fn beside_end(
    problem: &mut CycleProblem,
    (before, after): (&CycleStation, &CycleStation),
    value: Value<'_>,
    (from, ends): (f64, [Sample; 2]),
) -> Option<Result<CycleStation, [Sample; 3]>> {
    /// Halvings of the distance to the end: two events a sixteenth of it apart are found.
    const HALVINGS: usize = 4;
    let (end, side) = (if ends[0].1 < ends[1].1 { ends[0] } else { ends[1] }, value(before)?.signum());
    if end.1 >= CLOSE {
        return None;
    }
    let mut inner: Option<Sample> = None;
    let mut share = from;
    for _ in 0..HALVINGS {
        share = 0.5 * (share + end.0);
        let station = problem.between(before, after, share)?;
        let found = value(&station)? * side;
        if found < 0.0 {
            return Some(Ok(station));
        }
        if let Some(inner) = inner.filter(|_| found < end.1) {
            return Some(Err(if end.0 > share { [inner, (share, found), end] } else { [end, (share, found), inner] }));
        }
        inner = Some((share, found));
    }
    None
}

/// Where the parabola through three points is lowest, and its value there; none where it has no lowest place.
fn lowest([a, b, c]: [Sample; 3]) -> Option<Sample> {
    let slope = |from: Sample, to: Sample| (to.1 - from.1) / (to.0 - from.0);
    let first = slope(b, c);
    let second = (first - slope(a, b)) / (c.0 - a.0);
    if !(second > 0.0) {
        return None;
    }
    // v = b + (x - x_b) (first + (x - x_c) second).
    let x = 0.5 * (b.0 + c.0 - first / second);
    Some((x, b.1 + (x - b.0) * (first + (x - c.0) * second)))
}

/// The lowest of the points seen with its neighbours on both sides.
fn around(triple: [Sample; 3], new: Sample, (low, high): (Sample, Sample)) -> Option<[Sample; 3]> {
    let mut points: Vec<Sample> = triple.into_iter().chain([new, low, high]).filter(|point| point.0 >= 0.0).collect();
    points.sort_by(|a, b| a.0.total_cmp(&b.0));
    points.dedup_by(|a, b| a.0 == b.0);
    let lowest = (0..points.len()).min_by(|a, b| points[*a].1.total_cmp(&points[*b].1))?;
    // The lowest at an end: it falls towards the end, and no further.
    (lowest > 0 && lowest + 1 < points.len()).then(|| [points[lowest - 1], points[lowest], points[lowest + 1]])
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: a parabola has one lowest place, whichever points are taken.
    #[test]
    fn parabolas_are_exact() {
        let v = |x: f64| 3.0 * (x - 0.4).powi(2) - 0.01;
        let (x, value) = lowest([-1.0, 0.0, 1.0].map(|x| (x, v(x)))).expect("a lowest place");
        assert!((x - 0.4).abs() < 1e-14 && (value + 0.01).abs() < 1e-14);
        assert_eq!(lowest([-1.0, 0.0, 1.0].map(|x| (x, -v(x)))), None);
    }

    #[test]
    fn the_lowest_is_kept_with_its_neighbours() {
        let (low, high) = ((0.0, 1.0), (1.0, 1.0));
        let triple = around([(-1.0, 4.0), low, high], (0.4, 0.2), (low, high)).expect("inside");
        assert_eq!(triple, [low, (0.4, 0.2), high]);
        let triple = around(triple, (0.3, 0.1), (low, high)).expect("inside");
        assert_eq!(triple, [low, (0.3, 0.1), (0.4, 0.2)]);
        assert_eq!(around([(-1.0, 4.0), low, high], (0.4, 2.0), (low, high)), None);
    }
}
