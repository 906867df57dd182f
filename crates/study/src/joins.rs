//! Branches that have been followed, so that none is followed twice.
//!
//! A walk that comes onto a branch already followed shows the same cycle as it at the same parameter value, perhaps with
//! another phase or told several times. At a crossing two branches share one cycle; on the same branch the next one is
//! shared too. So two points in a row count.

use armilla_record::Point;
use armilla_stability::{CyclePoint, CycleProblem, Symmetry};

/// Numbers of node values kept of all branches together: 160 MB. Branches beyond are followed without being known again.
const KEPT: usize = 20_000_000;
/// Share of the largest relative change of period or extremes from one point to the next by which a point between may lie
/// off their chord: a stride turns by less than half a radian, and half of that would be a quarter.
const BENDING: f64 = 0.25;
/// Relative difference of extremes that says nothing: cycles are known to less, and extremes may jump from one bump to
/// another of the same height.
const ALIKE: f64 = 1e-4;

/// What is known of a cycle without looking at it.
struct Seen {
    value: f64,
    period: f64,
    maxima: Vec<f64>,
    minima: Vec<f64>,
    cycle: CyclePoint,
}

/// A branch as it has been followed.
#[derive(Default)]
pub(crate) struct Followed {
    name: String,
    seen: Vec<Seen>,
}

/// All branches of cycles followed so far.
#[derive(Default)]
pub(crate) struct Atlas {
    followed: Vec<Followed>,
    kept: usize,
    /// Symmetries of the model, once there is a cycle to look for them about.
    mirrors: Option<Vec<Symmetry>>,
}

/// A branch met again.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct MetAgain {
    pub branch: String,
    /// The symmetry whose image of the branch it is, if not the branch itself.
    pub mirror: Option<Symmetry>,
}

impl Atlas {
    /// Adds a finished branch and, from the first one, the symmetries of its model.
    pub(crate) fn add(&mut self, followed: Followed, problem: &CycleProblem) {
        let cycle = followed.seen.last().map(|seen| &seen.cycle);
        if let (None, Some(cycle)) = (&self.mirrors, cycle) {
            self.mirrors = Some(problem.mirrors(cycle));
        }
        let size: usize = followed.seen.iter().map(|seen| seen.cycle.unknowns.nodes.len()).sum();
        if self.kept + size <= KEPT {
            self.kept += size;
            self.followed.push(followed);
        }
    }

    /// The branch that a cycle lies on, if it has been followed.
    pub(crate) fn branch_of(&self, problem: &mut CycleProblem, point: &Point, cycle: &CyclePoint) -> Option<MetAgain> {
        let mut holder = |point: &Point, cycle: &CyclePoint| {
            self.followed.iter().find(|branch| branch.holds(problem, point, cycle)).map(|branch| branch.name.clone())
        };
        if let Some(branch) = holder(point, cycle) {
            return Some(MetAgain { branch, mirror: None });
        }
        self.mirrors.iter().flatten().find_map(|symmetry| {
            let branch = holder(&image_of(point, symmetry), &symmetry.image_of(cycle))?;
            Some(MetAgain { branch, mirror: Some(symmetry.clone()) })
        })
    }
}

/// The looks of a point's image.
fn image_of(point: &Point, symmetry: &Symmetry) -> Point {
    let (mut maxima, mut minima) = (Vec::new(), Vec::new());
    for (index, sign) in &symmetry.image {
        let (high, low) = (sign * point.maxima[*index], sign * point.minima[*index]);
        maxima.push(high.max(low));
        minima.push(high.min(low));
    }
    Point { maxima, minima, ..point.clone() }
}

impl Followed {
    /// A branch from its points in order and their cycles.
    pub(crate) fn of(name: &str, points: &[Point], cycles: Vec<CyclePoint>) -> Self {
        let seen = points.iter().zip(cycles).map(|(point, cycle)| Seen {
            value: point.value,
            period: point.period,
            maxima: point.maxima.clone(),
            minima: point.minima.clone(),
            cycle,
        });
        Self { name: name.to_string(), seen: seen.collect() }
    }

    fn holds(&self, problem: &mut CycleProblem, point: &Point, cycle: &CyclePoint) -> bool {
        self.seen
            .windows(2)
            .filter(|pair| pair[0].is_like(point, &pair[1]))
            .any(|pair| problem.meets(cycle, (&pair[0].cycle, &pair[1].cycle)))
    }
}

impl Seen {
    /// Whether a point may lie between this one and the next by the looks of it.
    fn is_like(&self, point: &Point, next: &Self) -> bool {
        let share = (point.value - self.value) / (next.value - self.value);
        if !(0.0..=1.0).contains(&share) {
            return false;
        }
        let mix = |a: f64, b: f64| a + share * (b - a);
        let n = point.maxima.len();
        let ranges: Vec<f64> = (0..n).map(|k| self.maxima[k] - self.minima[k]).collect();
        let moves = (0..n).map(|k| {
            let moved = (next.maxima[k] - self.maxima[k]).abs().max((next.minima[k] - self.minima[k]).abs());
            moved / ranges[k].max(f64::MIN_POSITIVE)
        });
        let moved = moves.fold((next.period / self.period).ln().abs(), f64::max).min(1.0);
        let allowed = BENDING * moved + ALIKE;
        let ratio = point.period / mix(self.period, next.period);
        let whole = ratio.max(1.0 / ratio);
        let fits = |value: f64, wanted: f64, k: usize| (value - wanted).abs() <= allowed * ranges[k];
        (whole / whole.round() - 1.0).abs() <= allowed
            && (0..n).all(|k| {
                fits(point.maxima[k], mix(self.maxima[k], next.maxima[k]), k)
                    && fits(point.minima[k], mix(self.minima[k], next.minima[k]), k)
            })
    }
}
