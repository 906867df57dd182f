//! What is born at the events of equilibria, each branch once.
//!
//! A branching is met from both branches that go through it: the second time the other branch is known. A branch of cycles
//! between two Hopf points is met from both.

use armilla_record::{Branch, EndReason, EventKind};
use armilla_stability::{EquilibriumPoint, EquilibriumProblem, birth_row};

use crate::branch::{Entry, Finished, Way};
use crate::equilibrium_branch::Start;
use crate::settings::cycle_settings;
use crate::study::Study;

/// Difference of two states, over their size, and of two parameter values, over the range, within which two located
/// branchings are one: each is located to far less, different ones lie far more apart.
const SAME: f64 = 1e-6;

/// Branchings of equilibria met so far.
#[derive(Default)]
pub(crate) struct Crossings {
    known: Vec<(String, EquilibriumPoint)>,
}

impl Crossings {
    /// Takes out of the births of a finished branch those that lead onto a branch known already, with a word in the note of
    /// their event. Returns the events at which the branches that were to be born are now known to be this one.
    pub(crate) fn sift(&mut self, study: &Study, finished: &mut Finished) -> Vec<String> {
        let mut met = Vec::new();
        let own = finished.branch.name.clone();
        let born_at = finished.branch.born_at.clone();
        let mut kept = Vec::new();
        for birth in finished.births.drain(..) {
            let Way::Crossing { located, .. } = &birth.way else {
                kept.push(birth);
                continue;
            };
            let earlier = self.known.iter().find(|(_, point)| is_same(study, point, &located.point));
            match earlier {
                None => {
                    self.known.push((birth.event.clone(), located.point.clone()));
                    kept.push(birth);
                }
                Some((event, _)) => {
                    let other = if Some(event) == born_at.as_ref() {
                        "its own birth, met again".to_string()
                    } else {
                        met.push(event.clone());
                        let branch = event.split('/').next().unwrap_or_default();
                        if branch == own {
                            format!("the same as {event}")
                        } else {
                            format!("{branch} crosses here, at {event}")
                        }
                    };
                    if let Some(event) = finished.branch.events.iter_mut().find(|found| found.name == birth.event) {
                        event.note = other;
                    }
                }
            }
        }
        finished.births = kept;
        met
    }
}

fn is_same(study: &Study, a: &EquilibriumPoint, b: &EquilibriumPoint) -> bool {
    let width = study.range.1 - study.range.0;
    let typical = study.model.states().iter().map(|state| state.begin.abs());
    let size = a.state.iter().chain(&b.state).map(|x| x.abs()).chain(typical).fold(f64::MIN_POSITIVE, f64::max);
    let near = |(x, y): (&f64, &f64)| (x - y).abs() <= SAME * size;
    (a.parameter - b.parameter).abs() <= SAME * width && a.state.iter().zip(&b.state).all(near)
}

/// The way onto what is born at an event of equilibria; in words why there is none.
pub(crate) fn enter(study: &Study, parent: &EquilibriumProblem, way: &Way) -> Result<Entry, String> {
    match way {
        Way::Hopf { located, form } => {
            let born = parent.cycles(located, form.as_deref(), cycle_settings(study, 1));
            let born = born.map_err(|_| "no small cycle was found beside the equilibrium; not followed".to_string())?;
            let row = birth_row(&mut parent.sibling(), located);
            let row = row.ok_or("the eigenvalues of the equilibrium could not be computed; not followed")?;
            Ok(Entry::Hopf(Box::new(born), Box::new(row)))
        }
        Way::Crossing { located, form } => {
            let (birth, direction) = (located.point.clone(), form.other.clone());
            let from = Start { birth, direction, state_error: located.state_error };
            Ok(Entry::Crossing(Box::new(parent.sibling()), Box::new(from)))
        }
        Way::Doubling { .. } | Way::CyclesCross(_) => Err("an event of cycles does not happen to equilibria".into()),
    }
}

/// Whether a branch of cycles ends at the equilibrium where a waiting one is to be born.
pub(crate) fn ends_where_born(study: &Study, branch: &Branch, waiting: &Entry) -> bool {
    let (EndReason::Equilibrium { .. }, Entry::Hopf(born, _)) = (&branch.ends.1.reason, waiting) else { return false };
    let Some(hopf) = branch.events.iter().rev().find(|event| event.kind == EventKind::Hopf) else { return false };
    let (birth, n) = (&born.birth.unknowns, hopf.means.len());
    let at = EquilibriumPoint { state: hopf.means.clone(), parameter: hopf.value };
    let other = EquilibriumPoint { state: birth.nodes[..n].to_vec(), parameter: birth.parameter };
    is_same(study, &at, &other) && (hopf.period / birth.period - 1.0).abs() <= SAME
}
