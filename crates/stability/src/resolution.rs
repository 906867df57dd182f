//! Degree and mesh along a branch, from the accuracy alone.
//!
//! At each new point the local error of the profile tells how many intervals each degree would need; the mesh is
//! changed where the error exceeds the accuracy, where many intervals became superfluous, or where another degree
//! does it with clearly less work. Then the multipliers are asked: where they miss Liouville's formula by more than
//! the accuracy although their own mesh was refined, the cycle's mesh is halved. What was done stands in the point.

use std::sync::Arc;

use armilla_collocation::{Failure as NewtonFailure, LinearClosing, Report, refine, remesh, work};
use armilla_record::{MeshReason, Reached};

use crate::point::{CyclePoint, CycleTangent};
use crate::problem::CycleProblem;

/// What the choice of meshes remembers from point to point.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct Resolution {
    /// Points for which the degree stays.
    hold: usize,
    /// Fewest intervals that Liouville's formula asked for; 0 where it asked for none.
    least: usize,
    /// Estimated error at which the last finer mesh brought no gain; 0 where none failed.
    floor: f64,
    /// Intervals at which halving the mesh did not bring the multipliers closer to Liouville's formula; 0 for none.
    in_vain: usize,
}

/// A degree and a mesh.
struct Grid {
    degree: usize,
    mesh: Arc<[f64]>,
    reason: MeshReason,
    /// Whether more intervals than allowed are needed.
    limited: bool,
}

/// A point with the tangents carried to its mesh.
type Carried = (CyclePoint, Vec<CycleTangent>);

/// A new mesh must bring the estimated error below this share of the old one, or the floor of roundoff is reached.
const WORTH: f64 = 0.8;
/// Share of intervals that must become superfluous before the mesh shrinks: less would swing to and fro.
const SHRINK_BELOW: f64 = 0.6;
/// The same for the first point of a branch, which has none before it to swing back to: what the estimates of two meshes
/// differ by.
const SHRINK_BELOW_AT_FIRST: f64 = 0.9;
/// Rounds of cuts: each shortens the interval of a kink by four at most, and its error falls at least like a square.
const PATIENCE: usize = 8;
/// Multiple of the rounding of the error estimate up to which an error that no mesh lowers counts as roundoff: Newton's
/// method leaves some tens of units in the last place, more where the problem is badly conditioned.
const NEAR_ROUNDOFF: f64 = 1e3;
/// Multiple of the known floor up to which an error counts as that floor still.
const FLOOR_KNOWN: f64 = 2.0;
/// Meshes tried at one point: mostly one is enough; fronts that move from point to point take some more.
const RENEWALS: usize = 6;
/// Meshes tried at the first point of a branch: each estimate comes from a better mesh, the choice settles in three or
/// four.
const FIRST_ROUNDS: usize = 8;
/// Points for which a new degree stays: the estimates before and after a change differ, and must not undo it.
const HOLD: usize = 8;
/// Share of the allowed Liouville defect below which the intervals it had asked for are given back, by a third a point.
const EASY: f64 = 0.01;

impl CycleProblem {
    /// The first cycle of a branch on a mesh chosen for the accuracy.
    pub(crate) fn first_mesh(&mut self, point: CyclePoint) -> CyclePoint {
        let mut point = self.meshed(&point, &[], FIRST_ROUNDS).map_or(point, |(point, _)| point);
        self.resolution.hold = 0;
        let given = self.settings.mesh.fixed.is_some();
        point.choice = if given { MeshReason::Given } else { MeshReason::Start };
        point
    }

    /// A point of a branch on a mesh that suits it; none where it stays as it is. `adapted` is the point as changed
    /// already.
    pub(crate) fn renew_mesh(
        &mut self,
        point: &CyclePoint,
        tangents: &[&CycleTangent],
        adapted: Option<Carried>,
    ) -> Option<Carried> {
        self.resolution.hold = self.resolution.hold.saturating_sub(1);
        let best = self.meshed(point, tangents, RENEWALS).or(adapted);
        self.heed_liouville(point, tangents, best)
    }

    /// The point on the last of at most `rounds` meshes, each better than the one before; none where nothing changed.
    fn meshed(&mut self, point: &CyclePoint, tangents: &[&CycleTangent], rounds: usize) -> Option<Carried> {
        let mut best: Option<Carried> = None;
        for _ in 0..rounds {
            let now = best.as_ref().map_or(point, |(point, _)| point).clone();
            let shrink_below = if tangents.is_empty() { SHRINK_BELOW_AT_FIRST } else { SHRINK_BELOW };
            let Some(grid) = self.better_grid(&now, shrink_below) else { break };
            let next = self.moved(&now, tangents, &grid).filter(|(next, _)| self.is_worth(&now, next));
            let next = next.or_else(|| self.with_patience(&now, tangents, &grid));
            let obstacle = self.obstacle(next.as_ref().map_or(&now, |(next, _)| next), grid.limited);
            let Some((mut renewed, carried)) = next else {
                if grid.reason != MeshReason::ProfileError && grid.reason != MeshReason::Given {
                    break;
                }
                // The old point stands, with its larger error and the reason of it.
                let normalised = || tangents.iter().map(|tangent| self.normalised((*tangent).clone())).collect();
                let mut kept = best.take().unwrap_or_else(|| (point.clone(), normalised()));
                kept.0.reached = obstacle;
                // A kink moves on with the branch, and the next point may fare better; roundoff stays.
                if obstacle == Reached::RoundoffFloor {
                    self.resolution.floor = self.estimate(&kept.0).error;
                }
                return Some(kept);
            };
            renewed.reached = obstacle;
            // The first point of a branch has none before it to swing back to.
            if renewed.degree != now.degree && !tangents.is_empty() {
                self.resolution.hold = HOLD;
            }
            best = Some((renewed, carried));
        }
        best
    }

    /// A mesh made by cutting, again and again, the intervals whose own error is too large. A kink of the rates is no matter
    /// of density: the interval that holds it must shrink until it does not count, and the estimate, which is
    /// asymptotic, tells how far only step by step. None where the cuts do not help.
    fn with_patience(&mut self, now: &CyclePoint, tangents: &[&CycleTangent], grid: &Grid) -> Option<Carried> {
        if grid.reason != MeshReason::ProfileError || grid.limited {
            return None;
        }
        let accuracy = self.allowance(now);
        let mut tried: Carried = (now.clone(), tangents.iter().map(|tangent| (*tangent).clone()).collect());
        for _ in 0..PATIENCE {
            let estimate = self.estimate(&tried.0);
            if estimate.error <= accuracy {
                break;
            }
            let mesh = refine(tried.0.tables(), &tried.0.mesh, &estimate, accuracy);
            if mesh.len() - 1 > self.settings.mesh.most {
                break;
            }
            let finer = Grid { degree: tried.0.degree, mesh: mesh.into(), reason: grid.reason, limited: false };
            let carried: Vec<&CycleTangent> = tried.1.iter().collect();
            let Some(next) = self.moved(&tried.0, &carried, &finer) else { break };
            tried = next;
        }
        self.is_worth(now, &tried.0).then_some(tried)
    }

    /// The error a mesh may leave: the accuracy less what Newton's method and rounding leave, or all of it where that is hopeless.
    fn allowance(&self, point: &CyclePoint) -> f64 {
        let (accuracy, rest) = (self.settings.mesh.accuracy, self.left_by_newton(point));
        if rest < 0.5 * accuracy { accuracy - rest } else { accuracy }
    }

    /// What stands in the way of the accuracy at a point that no better mesh was found for.
    fn obstacle(&mut self, point: &CyclePoint, limited: bool) -> Reached {
        match () {
            () if self.settings.mesh.fixed.is_some() => Reached::GivenMesh,
            () if limited => Reached::MeshLimit,
            () if self.profile_error(point) < NEAR_ROUNDOFF * self.rounding_of_nodes(point) => Reached::RoundoffFloor,
            () => Reached::Rough,
        }
    }

    /// Degree and mesh better than those of a point, if there are such.
    pub(crate) fn grid_for(&mut self, point: &CyclePoint) -> Option<(usize, Arc<[f64]>)> {
        self.better_grid(point, SHRINK_BELOW).map(|grid| (grid.degree, grid.mesh))
    }

    /// A degree and a mesh that suit the point, or none where the present ones do: its error is within the accuracy, it
    /// has not many more intervals than needed, and no other degree does it with clearly less work.
    fn better_grid(&mut self, point: &CyclePoint, shrink_below: f64) -> Option<Grid> {
        let estimate = self.estimate(point);
        let mut settings = self.settings.mesh;
        settings.accuracy = self.allowance(point);
        settings.fewest = settings.fewest.max(self.resolution.least);
        if self.resolution.hold > 0 {
            settings.degrees = (point.degree, point.degree);
        }
        let choice = remesh(point.tables(), &point.mesh, &estimate, settings);
        let (now, wanted) = (point.intervals(), choice.mesh.len() - 1);
        let other_degree = choice.degree != point.degree;
        let above_floor = estimate.error > FLOOR_KNOWN * self.resolution.floor;
        let too_coarse = estimate.error > settings.accuracy && above_floor && !(choice.limited && now == wanted);
        let too_fine = (wanted as f64) < shrink_below * now as f64;
        let settled = settings.fixed == Some(now) && estimate.imbalance < 2.0 && !other_degree;
        let reason = match () {
            () if settings.fixed.is_some() => MeshReason::Given,
            () if too_coarse => MeshReason::ProfileError,
            () if other_degree => MeshReason::Work,
            () => MeshReason::Ease,
        };
        let grid = Grid { degree: choice.degree, mesh: choice.mesh.into(), reason, limited: choice.limited };
        ((too_coarse || too_fine || other_degree) && !settled).then_some(grid)
    }

    /// The point corrected on another mesh, with its tangents, or at its parameter value where there are none; none where
    /// Newton's method fails there.
    fn moved(&mut self, point: &CyclePoint, tangents: &[&CycleTangent], grid: &Grid) -> Option<Carried> {
        let mut moved = point.on_mesh(grid.degree, &grid.mesh);
        moved.choice = grid.reason;
        let carry = |tangent: &&CycleTangent| self.normalised(tangent.on_mesh(grid.degree, &grid.mesh));
        let carried: Vec<CycleTangent> = tangents.iter().map(carry).collect();
        match carried.first() {
            Some(tangent) => self.settle_on_mesh(&mut moved, tangent).ok()?,
            None => {
                let value = point.unknowns.parameter;
                self.correct_at(&mut moved, value).ok()?
            }
        };
        Some((moved, carried))
    }

    /// Halves the mesh where the multipliers miss Liouville's formula on it.
    fn heed_liouville(
        &mut self,
        point: &CyclePoint,
        tangents: &[&CycleTangent],
        best: Option<Carried>,
    ) -> Option<Carried> {
        let now = best.as_ref().map_or(point, |(point, _)| point).clone();
        let Some(excess) = self.liouville_excess(&now) else { return best };
        if excess < EASY {
            self.resolution.least = self.resolution.least * 2 / 3;
        }
        let free = self.settings.mesh.fixed.is_none() && 2 * now.intervals() <= self.settings.mesh.most;
        // Where halving did not help, it is not tried again before the mesh has become another one.
        let vain = self.resolution.in_vain;
        if excess <= 1.0 || !free || (vain / 2..=2 * vain).contains(&now.intervals()) {
            return best;
        }
        let mesh = crate::locate::halved(&now.mesh).into();
        let grid = Grid { degree: now.degree, mesh, reason: MeshReason::LiouvilleDefect, limited: false };
        let halved = self.moved(&now, tangents, &grid);
        let helped = halved.filter(|(point, _)| self.liouville_excess(point).is_some_and(|finer| finer < 0.5 * excess));
        if helped.is_some() {
            self.resolution.least = 2 * now.intervals();
        } else {
            self.resolution.in_vain = now.intervals();
        }
        helped.or(best)
    }

    /// Liouville defect over what the accuracy allows; none where the multipliers are not the product of interval maps, or
    /// fail.
    fn liouville_excess(&mut self, point: &CyclePoint) -> Option<f64> {
        let accuracy = self.settings.mesh.accuracy;
        // A single multiplier is Liouville's formula itself.
        if self.system.n() == if self.is_forced() { 1 } else { 2 } {
            return None;
        }
        let spectrum = self.known_spectrum(point).ok()?;
        let sizes = spectrum.multipliers.iter().map(|mu| mu.log_modulus.abs()).filter(|size| size.is_finite());
        let allowed = accuracy * sizes.sum::<f64>().max(1.0);
        (!spectrum.damped).then_some(spectrum.liouville_defect / allowed)
    }

    /// Whether a change of mesh helped: a smaller error where it was too large, less work elsewhere.
    fn is_worth(&mut self, before: &CyclePoint, after: &CyclePoint) -> bool {
        let (old, new) = (self.estimate(before).error, self.estimate(after).error);
        let work = |point: &CyclePoint| work(point.degree, point.intervals());
        let accuracy = self.allowance(before);
        if old > accuracy { new <= accuracy || new < WORTH * old } else { work(after) < work(before) }
    }

    /// Corrects a point carried to a new mesh: at its parameter value, which an edge or target needs exactly, or, where
    /// the branch turns back in the parameter, normal to its tangent.
    fn settle_on_mesh(&mut self, point: &mut CyclePoint, tangent: &CycleTangent) -> Result<Report, NewtonFailure> {
        /// Share of the parameter in the tangent below which the branch turns back: nearer than this to a fold the
        /// change of mesh may move the fold past the value.
        const TURNING: f64 = 1e-6;
        if tangent.row.parameter.abs() > TURNING * self.metric.parameter_scale {
            let mut held = point.clone();
            let value = point.unknowns.parameter;
            if let Ok(report) = self.correct_at(&mut held, value) {
                *point = held;
                return Ok(report);
            }
        }
        let row = self.arclength_row(tangent, point);
        let target = row.apply(&point.unknowns);
        let reference = point.unknowns.nodes.clone();
        self.newton(point, &reference, &mut LinearClosing { row, target })
    }
}
