//! Location of points where two branches of cycles cross, with the tangents of both.
//!
//! Newton's method on [`crate::crossing_system`] from a bracket, and again on a mesh with every interval halved. The
//! tangents `a phi_1 + b phi_2` solve the algebraic bifurcation equation `c11 a^2 + 2 c12 a b + c22 b^2 = 0`,
//! `c_ij = psi^T H_zz phi_i phi_j` (Keller 1977, in Applications of Bifurcation Theory, 359). At a pitchfork the parameter
//! stands still along one of them; at a transcritical crossing along none.

use std::sync::Arc;

use armilla_collocation::{Failure as NewtonFailure, Report, Row, Verdict, judge};
use armilla_follow::{Problem, Station};

use crate::crossing_system::{Correction, CrossingSystem, apply, mixed};
use crate::locate::{COHERENT_UNITS, HALVINGS, LocateFault, ROUNDOFF_MARGIN, halved, to_correct};
use crate::point::{CyclePoint, CycleTangent};
use crate::problem::{CycleProblem, WATCH_BRANCHING, WATCH_FOLD};

type CycleStation = Station<CyclePoint, CycleTangent>;

/// A number with its estimated absolute error.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Estimated {
    /// The number.
    pub value: f64,
    /// Its error.
    pub error: f64,
}

impl Estimated {
    /// Whether it cannot be told from zero.
    pub fn vanishes(self) -> bool {
        self.value.abs() <= self.error
    }
}

/// A located crossing.
#[derive(Clone, Debug)]
pub struct CycleCrossing {
    /// The cycle both branches share, on the refined mesh.
    pub point: CyclePoint,
    /// Estimated absolute error of the parameter.
    pub error: f64,
    /// Estimated absolute error of the period.
    pub period_error: f64,
    /// Unit tangents: of the branch it was found on, and of the one that crosses.
    pub tangents: [CycleTangent; 2],
    /// Share of the parameter in each of them.
    pub parameter_parts: [Estimated; 2],
    /// How Newton's method went from the bracket.
    pub report: Report,
    /// Where between the two stations it lies, 0 to 1.
    pub share: f64,
}

impl CycleCrossing {
    /// The same seen from the branch that crosses.
    #[must_use]
    pub fn turned(mut self) -> Self {
        self.tangents.swap(0, 1);
        self.parameter_parts.swap(0, 1);
        self
    }
}

/// What lies where a branch seems to be crossed.
#[derive(Clone, Debug)]
pub enum Meeting {
    /// Another branch crosses.
    Crossing(Box<CycleCrossing>),
    /// Two branches pass each other without meeting: the stations stand on different ones.
    Gap,
}

/// What Newton's method made of one guess.
struct Solved {
    system: CrossingSystem,
    unfolding: f64,
    report: Report,
}

impl Solved {
    /// The unfolding in a unit that does not depend on the mesh.
    fn gap(&self) -> f64 {
        self.unfolding * self.system.unit()
    }
}

impl CycleProblem {
    /// Looks for the crossing between two stations between which the branch's orientation changes: where a multiplier
    /// passes +1 and the parameter goes on, or the parameter turns and no multiplier passes.
    ///
    /// # Errors
    /// [`LocateFault`] with the narrowest bracket reached.
    pub fn locate_crossing(&mut self, before: &CycleStation, after: &CycleStation) -> Result<Meeting, LocateFault> {
        let total = after.distance - before.distance;
        let (mut low, mut high) = (before.clone(), after.clone());
        for _ in 0..HALVINGS {
            match self.crossing_from(&low, &high) {
                Some(Meeting::Crossing(mut crossing)) => {
                    crossing.share = self.share(before, &crossing.point, total);
                    return Ok(Meeting::Crossing(crossing));
                }
                Some(Meeting::Gap) => return Ok(Meeting::Gap),
                None => {}
            }
            let Some(middle) = self.between(&low, &high, 0.5) else { break };
            if orientation(&middle) * orientation(&low) > 0.0 { low = middle } else { high = middle }
        }
        Err(LocateFault { bracket: (low.point.unknowns.parameter, high.point.unknowns.parameter) })
    }

    /// Locates the crossing that a station stands on.
    pub fn locate_crossing_at(&mut self, station: &CycleStation) -> Option<Box<CycleCrossing>> {
        /// Distance from the station within which the crossing is the one it stands on: beside it cycles are known to the
        /// root of roundoff, times what the equations amplify.
        const ON: f64 = 1e-5;
        let mut point = station.point.clone();
        let solved = self.solve_crossing(&mut point, 0.0).ok()?;
        if !(self.distance(&station.point, &point) <= ON) {
            return None;
        }
        match self.refine_crossing(&point, &solved, &station.tangent)? {
            Meeting::Crossing(crossing) => Some(Box::new(CycleCrossing { share: 1.0, ..*crossing })),
            Meeting::Gap => None,
        }
    }

    fn crossing_from(&mut self, low: &CycleStation, high: &CycleStation) -> Option<Meeting> {
        let turns = low.watch.values[WATCH_FOLD].value * high.watch.values[WATCH_FOLD].value < 0.0;
        let mut point = self.secant_point(if turns { WATCH_FOLD } else { WATCH_BRANCHING }, low, high);
        let solved = self.solve_crossing(&mut point, 0.0).ok()?;
        if !self.is_in_bracket(&point, low, high) {
            return None;
        }
        self.refine_crossing(&point, &solved, &low.tangent)
    }

    /// Solves the crossing equations in place on the point's mesh.
    fn solve_crossing(&mut self, point: &mut CyclePoint, unfolding: f64) -> Result<Solved, NewtonFailure> {
        self.system.set_mesh(point.degree, &point.mesh);
        self.system.linearise(&point.unknowns)?;
        let reference = point.unknowns.nodes.clone();
        let mut system = CrossingSystem::new(&self.system, &reference)?;
        let settings = self.settings.newton.for_nodes(&self.system, &reference);
        let mut report = Report { floor: settings.floor, ..Report::default() };
        let mut unfolding = unfolding;
        for iteration in 1..=settings.most {
            let Correction { step, unfolding: change } =
                system.correction(&mut self.system, (&point.unknowns, unfolding), &reference)?;
            let size = self.metric.inner(point.tables(), &point.mesh, &step, &step).sqrt().max(change.abs());
            let before = report.corrections.last().copied();
            report.corrections.push(size);
            report.iterations = iteration;
            let verdict = judge(size, before, settings);
            if matches!(verdict, Verdict::Go | Verdict::Last) {
                point.unknowns.add(1.0, &step);
                self.system.keep_time(&mut point.unknowns);
                unfolding += change;
            }
            if verdict == Verdict::Lost {
                return Err(NewtonFailure::Diverged { iterations: iteration, correction: size });
            }
            if !(point.unknowns.period > 0.0) {
                return Err(NewtonFailure::NegativePeriod);
            }
            self.system.linearise(&point.unknowns)?;
            if matches!(verdict, Verdict::Last | Verdict::Floor) {
                system.solve(&self.system)?;
                return Ok(Solved { system, unfolding, report });
            }
        }
        let correction = report.corrections.last().copied().unwrap_or(f64::NAN);
        Err(NewtonFailure::Diverged { iterations: settings.most, correction })
    }

    /// The crossing again with every interval halved, its errors, and whether it is one.
    fn refine_crossing(&mut self, coarse: &CyclePoint, found: &Solved, along: &CycleTangent) -> Option<Meeting> {
        self.system.set_mesh(coarse.degree, &coarse.mesh);
        self.system.linearise(&coarse.unknowns).ok()?;
        let before = self.tangents_at(coarse, &found.system, along)?;
        let mesh: Arc<[f64]> = halved(&coarse.mesh).into();
        let mut fine = coarse.on_mesh(coarse.degree, &mesh);
        let mut again = self.solve_crossing(&mut fine, found.unfolding).ok()?;
        let rounding = again.system.roundoff(&mut self.system).map(|error| ROUNDOFF_MARGIN * error);
        // The unfolding is what the equations are off by; their own errors show in its change from mesh to mesh.
        let [coarse_gap, fine_gap] = [found, &again].map(Solved::gap);
        let sign = again.system.likeness(&found.system, coarse.intervals()).signum();
        let roundoff = rounding[2] * again.system.unit();
        let gap = Estimated { value: fine_gap, error: (fine_gap - sign * coarse_gap).abs() + roundoff };
        if !gap.vanishes() {
            return Some(Meeting::Gap);
        }
        let tangents = self.tangents_at(&fine, &again.system, along)?;
        let parameter_parts = [0, 1].map(|which| self.parameter_part(&before[which], &tangents[which]));
        let left = self.left_over(coarse, &fine);
        let (a, b) = (&coarse.unknowns, &fine.unknowns);
        let rest = to_correct(&again.report);
        let units = COHERENT_UNITS * f64::EPSILON;
        let scales = (self.metric.period_scale, self.metric.parameter_scale);
        Some(Meeting::Crossing(Box::new(CycleCrossing {
            error: left * (a.parameter - b.parameter).abs()
                + rest * scales.1
                + rounding[1]
                + units * b.parameter.abs().max(scales.1),
            period_error: left * (a.period - b.period).abs() + rest * scales.0 + rounding[0] + units * b.period,
            tangents,
            parameter_parts,
            report: found.report.clone(),
            share: 0.0,
            point: fine,
        })))
    }

    /// The two tangents at a crossing, the one nearer to `along` first; none where they are not real and different: an
    /// isolated cycle. The system's last linearisation must be there.
    fn tangents_at(
        &mut self,
        point: &CyclePoint,
        crossing: &CrossingSystem,
        along: &CycleTangent,
    ) -> Option<[CycleTangent; 2]> {
        let basis = crossing.basis(&self.system);
        let mut row = Row::zero(point.unknowns.nodes.len());
        let mut c = [[0.0; 2]; 2];
        for (j, direction) in basis.iter().enumerate() {
            crossing.gradient_along(&mut self.system, direction, &mut row);
            c[0][j] = -apply(&row, &basis[0]);
            c[1][j] = -apply(&row, &basis[1]);
        }
        let directions = null_directions(c[0][0], 0.5 * (c[0][1] + c[1][0]), c[1][1])?;
        let tangent = |(a, b): (f64, f64)| {
            let row = mixed((a, &basis[0]), (b, &basis[1]));
            self.normalised(CycleTangent { degree: point.degree, mesh: point.mesh.clone(), row })
        };
        let [first, second] = directions.map(tangent).map(|tangent| {
            let inner = self.inner(&tangent, along);
            (inner, tangent)
        });
        let (first, second) = if first.0.abs() >= second.0.abs() { (first, second) } else { (second, first) };
        let along = if first.0 < 0.0 { reversed(first.1) } else { first.1 };
        // Of the two ways along the other branch the one on which the parameter rises, where it does.
        let across = if second.1.row.parameter < 0.0 { reversed(second.1) } else { second.1 };
        Some([along, across])
    }

    fn parameter_part(&self, coarse: &CycleTangent, fine: &CycleTangent) -> Estimated {
        /// Roundoff of the coefficients of the bifurcation equation, relative: sums over the cycle of second derivatives.
        const ROUNDING: f64 = 1e-10;
        let part = |tangent: &CycleTangent| tangent.row.parameter.abs() / self.metric.parameter_scale;
        Estimated { value: part(fine), error: 2.0 * (part(coarse) - part(fine)).abs() + ROUNDING }
    }
}

/// Sign of the orientation, which a branch keeps but where another crosses.
fn orientation(station: &CycleStation) -> f64 {
    station.watch.values[WATCH_FOLD].value * station.watch.values[WATCH_BRANCHING].value
}

pub(crate) fn reversed(mut tangent: CycleTangent) -> CycleTangent {
    tangent.row = mixed((-1.0, &tangent.row), (0.0, &tangent.row));
    tangent
}

/// Directions (a, b) with `c11 a^2 + 2 c12 a b + c22 b^2 = 0`; none where they are complex or equal.
fn null_directions(c11: f64, c12: f64, c22: f64) -> Option<[(f64, f64); 2]> {
    /// Discriminant relative to the squared coefficients below which the two directions are one.
    const EQUAL: f64 = 1e-12;
    let discriminant = c12 * c12 - c11 * c22;
    if !(discriminant > EQUAL * (c11 * c11 + 2.0 * c12 * c12 + c22 * c22)) {
        return None;
    }
    // Both roots without cancellation.
    let q = -(c12 + discriminant.sqrt().copysign(c12));
    Some([(q, c11), (c22, q)])
}

#[cfg(test)]
mod tests {
    use super::null_directions;

    /// By hand.
    #[test]
    fn directions_of_quadratic_forms() {
        assert_eq!(null_directions(0.0, 1.0, 0.0), Some([(-2.0, 0.0), (0.0, -2.0)]));
        let [first, second] = null_directions(1.0, 0.0, -4.0).expect("two");
        assert_eq!((first.0 / first.1, second.0 / second.1), (-2.0, 2.0));
        assert_eq!(null_directions(1.0, 0.0, 4.0), None);
        assert_eq!(null_directions(1.0, 2.0, 4.0), None);
    }
}
