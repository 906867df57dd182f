//! Events that hide behind another one of their kind inside a step.
//!
//! Three events in one step change a watched value's sign as one does. So once an event is found at the distance s_E, its
//! zero is divided out: `v(s) / (s - s_E)` has one sign over the step where the event is alone, and dips to zero where two
//! more lie beside it, which is looked for as two events that cancel are ([`crate::valley`]).

use armilla_stability::{CycleProblem, Dip, WATCH_BRANCHING, WATCH_DOUBLING, WATCH_FOLD, WATCH_TORUS};

use crate::ledger::Part;
use crate::step_events::Found;
use crate::valley::valley;
use crate::walk::CycleStation;

/// Halvings of the stretch in which another event lies, until it is on one side of the event found.
const HALVINGS: usize = 40;

/// Stations that separate the one event found of a part from two others of its kind; none where it is alone.
pub(crate) fn beside(problem: &mut CycleProblem, part: &Part, found: &[Found]) -> Vec<CycleStation> {
    let Some(others) = Others::beside(problem, part, found) else { return Vec::new() };
    match valley(problem, (&part.before, &part.after), None, &|station| others.value(station)) {
        Dip::Split(station) => others.separators(problem, part, *station),
        Dip::Clear | Dip::Touch(_) => Vec::new(),
    }
}

/// A watched value with the zero of the event found divided out.
struct Others {
    index: usize,
    at: f64,
    length: f64,
}

impl Others {
    fn beside(problem: &CycleProblem, part: &Part, found: &[Found]) -> Option<Self> {
        let [event] = found else { return None };
        let change = part.change;
        let single = [change.turns, change.doubles, change.pair, change.passes_one && !change.turns];
        let indices = [WATCH_FOLD, WATCH_DOUBLING, WATCH_TORUS, WATCH_BRANCHING];
        // Where several values change at once the part holds several events, which is told already.
        let mut changing = single.into_iter().zip(indices).filter(|(changes, _)| *changes);
        let (Some((_, index)), None) = (changing.next(), changing.next()) else { return None };
        let length = part.after.distance - part.before.distance;
        let at = part.before.distance + length * problem.share_of((&part.before, &part.after), &event.point);
        Some(Self { index, at, length })
    }

    fn value(&self, station: &CycleStation) -> Option<f64> {
        let quotient = station.watch.values[self.index].value * self.length / (station.distance - self.at);
        quotient.is_finite().then_some(quotient)
    }

    /// `middle` lies between the two others; on its side of the event found one of them is told from that.
    fn separators(&self, problem: &mut CycleProblem, part: &Part, middle: CycleStation) -> Vec<CycleStation> {
        let along = self.length.signum();
        let behind = (self.at - middle.distance) * along > 0.0;
        let (mut inner, mut outer) = (middle.clone(), if behind { part.after.clone() } else { part.before.clone() });
        for _ in 0..HALVINGS {
            let beyond = |station: &CycleStation| (station.distance - self.at) * (self.at - middle.distance) > 0.0;
            // The other one lies between the two, the event found outside of them: nearer or farther than it.
            if beyond(&inner) {
                return vec![middle, inner];
            }
            if !beyond(&outer) {
                return vec![middle, outer];
            }
            let (low, high) = if behind { (&inner, &outer) } else { (&outer, &inner) };
            let Some(between) = problem.between(low, high, 0.5) else { break };
            match self.value(&between) {
                Some(value) if self.value(&middle).is_some_and(|inside| inside * value > 0.0) => inner = between,
                Some(_) => outer = between,
                None => break,
            }
        }
        vec![middle]
    }
}
