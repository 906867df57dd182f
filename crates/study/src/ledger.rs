//! The stability ledger: every change of the number of unstable multipliers is accounted for by events.
//!
//! Between two points of a branch these may change: the direction of the parameter (f), the sign of `Prod (mu + 1)` (d),
//! that of `Prod (mu - 1)` (b), that of `Prod (|mu|^2 - 1)` over complex pairs (t), and the unstable count. A multiplier
//! passes +1 at a fold, so f and b go together: the sign of one over the other is an orientation that a branch keeps
//! (it is that of the determinant of the cycle's equations bordered by the tangent; Keller 1977, in Applications of
//! Bifurcation Theory, 359). Where it changes, another branch crosses, or the step has landed on a neighbour of the
//! branch: of two branches that come near each other one has the other orientation.
//!
//! The count changes by one at a fold and at a doubling and by two at a torus point. Where a step does not add up, it is
//! cut in halves until each part does; what is left at the resolution is an event by itself.

use armilla_follow::Problem;
use armilla_stability::{CycleProblem, WATCH_BRANCHING, WATCH_DOUBLING, WATCH_FOLD, WATCH_TORUS};

use crate::walk::CycleStation;

/// What changes between two stations.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Change {
    /// The parameter turns back.
    pub turns: bool,
    /// An odd number of multipliers passes -1.
    pub doubles: bool,
    /// An odd number of multipliers passes +1.
    pub passes_one: bool,
    /// A pair passes the unit circle, or ceases to be complex outside of it.
    pub pair: bool,
    /// By how much the unstable count changes.
    pub count: usize,
}

impl Change {
    pub(crate) fn between(before: &CycleStation, after: &CycleStation) -> Self {
        let sign = |index: usize| before.watch.values[index].value * after.watch.values[index].value < 0.0;
        let passes_one = sign(WATCH_BRANCHING);
        // Where the parameter stands still to roundoff over a whole stride (in the middle of a canard explosion, say) its
        // direction flips at random, and no multiplier passes 1.
        let idle = [before, after].iter().all(|station| station.watch.values[WATCH_FOLD].value.abs() <= IDLE);
        Self {
            turns: sign(WATCH_FOLD) && (passes_one || !idle),
            doubles: sign(WATCH_DOUBLING),
            passes_one,
            pair: sign(WATCH_TORUS),
            count: before.watch.unstable_count.abs_diff(after.watch.unstable_count),
        }
    }

    /// The parameter turns back and no multiplier changes side: the mirror image of the branch goes on from there.
    pub(crate) fn only_turns(self) -> bool {
        self == Self { turns: true, ..Self::NONE }
    }

    /// Nothing but what a branch that crosses explains: a multiplier passes +1 and the parameter goes on, or the parameter
    /// turns back and no multiplier changes side.
    pub(crate) fn may_cross(self) -> bool {
        self.only_turns() || self == Self { passes_one: true, count: 1, ..Self::NONE }
    }

    /// A multiplier passes +1 and the parameter goes on.
    pub(crate) fn loses_orientation(self) -> bool {
        self.turns != self.passes_one
    }

    /// Whether folds, doublings and torus points, at most one of each, account for the change. A torus point in the same
    /// step as another leaves the count ambiguous; a shorter stride separates them.
    pub(crate) fn is_explained(self) -> bool {
        let single = usize::from(self.turns) + usize::from(self.doubles);
        if self.loses_orientation() {
            return false;
        }
        match (single, self.pair) {
            (0, false) => self.count == 0,
            // A pair that becomes real outside the circle takes the function with it, but passes nothing.
            (0, true) => self.count == 0 || self.count == 2,
            (_, false) => self.count <= single && self.count % 2 == single % 2,
            (_, true) => false,
        }
    }

    /// Whether anything changes.
    pub(crate) fn is_none(self) -> bool {
        self == Self::NONE
    }

    const NONE: Self = Self { turns: false, doubles: false, passes_one: false, pair: false, count: 0 };
}

/// Parameter component of the unit tangent that no true turning stays below at both ends of a step.
const IDLE: f64 = 1e-6;

/// Parameter component of the tangent and value of the branching function within which a station stands on a fold as far
/// as multipliers can tell: there two of them are 1, each to half the digits.
const ON_FOLD: (f64, f64) = (1e-4, 1e-5);

/// Watched value that is zero to roundoff: the station stands on an event, and its sign is noise.
const ON_EVENT: f64 = 1e-10;

/// Whether the side of each multiplier is known at a station.
pub(crate) fn is_sure(station: &CycleStation) -> bool {
    is_off_folds(station) && ![WATCH_DOUBLING, WATCH_TORUS, WATCH_BRANCHING].into_iter().any(|i| stands_on(station, i))
}

/// Whether a station stands on an event of the doubling, torus or branching function.
pub(crate) fn stands_on(station: &CycleStation, index: usize) -> bool {
    station.watch.values[index].value.abs() <= ON_EVENT
}

pub(crate) fn is_off_folds(station: &CycleStation) -> bool {
    let value = |index: usize| station.watch.values[index].value.abs();
    value(WATCH_FOLD) > ON_FOLD.0 || value(WATCH_BRANCHING) > ON_FOLD.1
}

/// Part of a step in which one thing happens.
pub(crate) struct Part {
    pub before: CycleStation,
    pub after: CycleStation,
    pub change: Change,
}

/// Distance, 1 being the size of the cycle or of the range, that is not cut any more: neighbouring cycles on one mesh are
/// known to a hundredth of it.
const RESOLUTION: f64 = 1e-11;
/// Halvings of a step: they take any stride to the resolution.
const HALVINGS: usize = 40;

/// What is not cut any further.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Whole {
    /// What folds, doublings and torus points explain.
    Explained,
    /// That, and what a branch that crosses may explain.
    Crossings,
}

/// Cuts a step into parts that are whole or as short as the problem resolves. Parts in which nothing changes are left out.
pub(crate) fn parts(
    problem: &mut CycleProblem,
    (before, after): (&CycleStation, &CycleStation),
    whole_are: Whole,
) -> Vec<Part> {
    let mut done = Vec::new();
    let mut waiting = vec![(before.clone(), after.clone(), 0)];
    while let Some((before, after, depth)) = waiting.pop() {
        let change = Change::between(&before, &after);
        if change.is_none() {
            continue;
        }
        let crosses = whole_are == Whole::Crossings && change.may_cross();
        let whole = change.is_explained() || change.only_turns() || crosses || depth >= HALVINGS;
        let middle = if whole { None } else { middle(problem, &before, &after) };
        match middle {
            // The later half first, since the last one in is the next one out.
            Some(middle) => {
                waiting.push((middle.clone(), after, depth + 1));
                waiting.push((before, middle, depth + 1));
            }
            None => done.push(Part { before, after, change }),
        }
    }
    done
}

/// A station about halfway, not on a fold itself; none where the ends are as near as the profiles are known.
fn middle(problem: &mut CycleProblem, before: &CycleStation, after: &CycleStation) -> Option<CycleStation> {
    if problem.distance(&before.point, &after.point) < RESOLUTION {
        return None;
    }
    [0.5, 0.4].into_iter().find_map(|share| problem.between(before, after, share).filter(is_off_folds))
}

/// Narrows a part to the resolution around the first place where something changes.
pub(crate) fn narrowed(problem: &mut CycleProblem, part: &Part) -> Part {
    let (mut before, mut after) = (part.before.clone(), part.after.clone());
    for _ in 0..HALVINGS {
        let Some(middle) = middle(problem, &before, &after) else { break };
        if Change::between(&before, &middle).is_none() { before = middle } else { after = middle }
    }
    let change = Change::between(&before, &after);
    Part { before, after, change }
}

#[cfg(test)]
mod tests {
    use super::Change;

    /// What each event does to multipliers: a fold takes one through +1 and turns the parameter, a doubling one through
    /// -1, a torus point two.
    #[test]
    fn what_adds_up() {
        let change = |flags: [bool; 4], count: usize| Change {
            turns: flags[0],
            passes_one: flags[1],
            doubles: flags[2],
            pair: flags[3],
            count,
        };
        let (fold, doubling, torus) =
            ([true, true, false, false], [false, false, true, false], [false, false, false, true]);
        for (flags, count, explained) in [
            ([false; 4], 0, true),
            ([false; 4], 1, false),
            ([false; 4], 2, false),
            (fold, 1, true),
            (fold, 0, false),
            (doubling, 1, true),
            (doubling, 3, false),
            (torus, 2, true),
            (torus, 0, true),
            (torus, 1, false),
            ([true, true, true, false], 0, true),
            ([true, true, true, false], 2, true),
            ([true, true, true, false], 1, false),
            // A multiplier through +1 without a turning: another branch.
            ([false, true, false, false], 1, false),
            // A turning without a multiplier through +1.
            ([true, false, false, false], 0, false),
            ([false, false, true, true], 3, false),
        ] {
            assert_eq!(change(flags, count).is_explained(), explained, "{flags:?} {count}");
        }
        assert!(change([true, false, false, false], 0).only_turns());
    }
}
