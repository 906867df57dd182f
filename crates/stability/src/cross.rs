//! Entrance a located crossing onto the branch that crosses, on either side.
//!
//! A first cycle is corrected with its component held along the part of the crossing tangent that is normal to the tangent
//! of the known branch, everything else free (Keller 1977, in Applications of Bifurcation Theory, 359): the known branch
//! meets that plane at second order only.

use armilla_follow::{Closing, Orientation, Problem};

use crate::crossing::{CycleCrossing, reversed};
use crate::crossing_system::mixed;
use crate::point::{CyclePoint, CycleTangent};
use crate::problem::{CycleProblem, Sizes};
use crate::switch::{Born, SwitchFault};

/// The branch that crosses, at the crossing.
pub struct Crossed {
    /// The problem of the branch, with its own metric.
    pub problem: CycleProblem,
    /// The cycle both branches share, on the mesh of the branch.
    pub birth: CyclePoint,
    /// A first cycle on either side, along the crossing tangent and against it.
    pub ways: [CrossedWay; 2],
}

/// A side of the crossing.
#[derive(Clone, Debug)]
pub struct CrossedWay {
    /// The first cycle.
    pub point: CyclePoint,
    /// Unit direction from the crossing to it.
    pub outwards: CycleTangent,
    /// Distance from the crossing.
    pub amplitude: f64,
}

/// First amplitude tried, 1 being the size of the cycle: well above the root of roundoff, to which cycles are known beside
/// a crossing, and small against the cycle.
const AMPLITUDE: f64 = 0.02;
/// Halvings of it before giving up.
const HALVINGS: usize = 10;
/// |log mu| of the multiplier that is 1 at the crossing, up to which the first cycle is moved outwards in doubled steps:
/// far enough for a regular start.
const WANTED: f64 = 0.02;
/// Most doublings of the amplitude on the way there.
const GROWTHS: usize = 5;
/// Distance of the first cycle from the crossing, in units of the predicted one, beyond which it belongs elsewhere.
const NEAR: f64 = 2.0;
/// Largest |log mu| of the multiplier that is 1 at the crossing: beyond, a next event may have been passed.
const NEAR_ONE: f64 = 0.15;

impl CycleProblem {
    /// Enters the branch that crosses, on both sides.
    ///
    /// # Errors
    /// [`SwitchFault`] where no cycle of it is found.
    pub fn cross(&self, crossing: &CycleCrossing) -> Result<Crossed, SwitchFault> {
        let (mut problem, birth) = self.at_crossing(crossing)?;
        let whole = birth.clone();
        let fine = (birth, crossing.tangents.clone());
        // Of the located cycle's fine mesh the branch needs a part only; where it has no cycle on that, the fine one remains.
        let own = problem.own_mesh(&fine.0).map(|own| {
            let tangents = crossing.tangents.clone().map(|tangent| tangent.on_mesh(own.degree, &own.mesh));
            (own, tangents)
        });
        let rises = !crossing.parameter_parts[1].vanishes();
        for (birth, tangents) in own.into_iter().chain([fine]) {
            let tangents = tangents.map(|tangent| problem.normalised(tangent));
            let Ok(spectrum) = problem.spectrum(&birth) else { continue };
            let products = [spectrum.doubling_product(), spectrum.torus_product()];
            let from = Entrance { birth, tangents, rises, products };
            let mut amplitude = AMPLITUDE;
            for _ in 0..HALVINGS {
                let [forward, backward] = [1.0, -1.0].map(|side| problem.beside(&from, side * amplitude));
                if let (Some(forward), Some(backward)) = (forward, backward) {
                    // States that hardly move at the crossing may have another size beside it.
                    let birth = problem.own_mesh(&whole).unwrap_or_else(|| whole.clone());
                    return Ok(Crossed { problem, birth, ways: [forward, backward] });
                }
                amplitude *= 0.5;
            }
        }
        Err(SwitchFault)
    }

    fn at_crossing(&self, crossing: &CycleCrossing) -> Result<(CycleProblem, CyclePoint), SwitchFault> {
        let profile = self.profile(&crossing.point);
        let value = crossing.point.unknowns.parameter;
        let sizes = Sizes::Parent(&self.metric.scales);
        let problem = CycleProblem::with_metric(self.spec.clone(), self.settings, sizes, &profile, value)
            .map_err(|_| SwitchFault)?;
        Ok((problem, CyclePoint::from_profile(&profile, value)))
    }

    /// A cycle beside a crossing, at an amplitude along the second tangent or moved outwards from there.
    fn beside(&mut self, from: &Entrance, first: f64) -> Option<CrossedWay> {
        let (mut point, mut near) = self.at_amplitude(from, first)?;
        let mut amplitude = first;
        for _ in 0..GROWTHS {
            if near > WANTED {
                break;
            }
            let Some(farther) = self.at_amplitude(from, 2.0 * amplitude) else { break };
            (point, near) = farther;
            amplitude *= 2.0;
        }
        let mut outwards = from.outwards(amplitude);
        if let Some((renewed, mut tangents)) = self.renew(&point, &[&outwards]) {
            (point, outwards) = (renewed, tangents.pop().expect("renew returns as many tangents as it gets"));
        }
        Some(CrossedWay { point, outwards, amplitude: amplitude.abs() })
    }

    /// The cycle at an amplitude, with the |log mu| of the multiplier that is 1 at the crossing; none where it does not
    /// belong to the branch that crosses, or where an event may lie between.
    fn at_amplitude(&mut self, from: &Entrance, amplitude: f64) -> Option<(CyclePoint, f64)> {
        let Entrance { birth, tangents: [along, across], .. } = from;
        let common = self.inner(along, across);
        let normal = mixed((1.0, &across.row), (-common, &along.row));
        let normal = self.normalised(CycleTangent { row: normal, ..across.clone() });
        let amount = self.inner(&normal, across) * amplitude;
        let prediction = self.advance(birth, across, amplitude);
        let closing = Closing::Component { from: birth, direction: &normal, amount };
        let point = self.correct(&prediction, closing).ok()?.point;
        let spectrum = self.spectrum(&point).ok()?;
        let near = spectrum.nearest_to_one()?.abs();
        if !(self.distance(birth, &point) <= NEAR * amplitude.abs()) || near > NEAR_ONE {
            return None;
        }
        let products = [spectrum.doubling_product(), spectrum.torus_product()];
        let passes = from.products.iter().zip(products).any(|(before, after)| before * after < 0.0);
        (!passes && self.goes_straight(from, amplitude, &point)?).then_some((point, near))
    }

    /// Whether the parameter does not turn back between a crossing and a first cycle: it still goes away from its value
    /// there, to the side the tangent says.
    fn goes_straight(&mut self, from: &Entrance, amplitude: f64, point: &CyclePoint) -> Option<bool> {
        let outwards = from.outwards(amplitude);
        let moving = self.tangent(point, Orientation::Along(&outwards)).ok()?.row.parameter;
        let offset = point.unknowns.parameter - from.birth.unknowns.parameter;
        // Where nothing moves at all the signs are roundoff's.
        let noise = self.parameter_roundoff();
        let away = moving * offset > 0.0 || offset.abs() <= noise;
        Some(away && (!from.rises || outwards.row.parameter * offset > 0.0))
    }
}

/// A crossing as a branch is entered from it.
struct Entrance {
    birth: CyclePoint,
    tangents: [CycleTangent; 2],
    /// Whether the parameter moves along the second tangent.
    rises: bool,
    /// Doubling and torus function there.
    products: [f64; 2],
}

impl Entrance {
    fn outwards(&self, amplitude: f64) -> CycleTangent {
        let across = self.tangents[1].clone();
        if amplitude < 0.0 { reversed(across) } else { across }
    }
}

impl Crossed {
    /// Log-modulus of the multiplier that is 1 at the crossing, on the first cycle of a side.
    pub fn exchange(&mut self, way: usize) -> Option<f64> {
        self.problem.spectrum(&self.ways[way].point).ok()?.nearest_to_one()
    }

    /// Parameter of the first cycle of a side less that of the crossing.
    pub fn offset(&self, way: usize) -> f64 {
        self.ways[way].point.unknowns.parameter - self.birth.unknowns.parameter
    }

    /// One side only, as a branch that is born.
    pub fn born(self) -> Born {
        let Crossed { problem, birth, ways: [CrossedWay { point, outwards, amplitude }, _] } = self;
        Born { problem, birth, point, outwards, amplitude }
    }
}
