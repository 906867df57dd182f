//! Two branches of equilibria that cross: which kind, where the other one goes, and the way onto it.
//!
//! The kernel of `[f_x, f_p]` is spanned by `(v, 0)` and `(-y, 1)`; tangents `alpha (v, 0) + beta (-y, 1)` of branches solve
//! `a11 alpha^2 + 2 a12 alpha beta + a22 beta^2 = 0`, `a_ij = psi^T D^2 f [phi_i, phi_j]` (Keller 1977, in Applications of
//! Bifurcation Theory, 359). Where `a11 = 0` one of them is `(v, 0)`: a pitchfork, its parabola bent by
//! `c = psi^T (C(v, v, v) + 3 B(v, h))`, `A h = -B(v, v)`.

use armilla_follow::{Closing, Orientation, Problem};

use super::local::Along;
use super::locate::{LocatedRest, RestStation, Vectors};
use super::null::RealNull;
use super::point::{EquilibriumPoint, EquilibriumTangent, RestMetric};
use super::problem::EquilibriumProblem;

/// Kind of a simple branching.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Crossing {
    /// One of the two branches turns back there.
    Pitchfork,
    /// Both go through.
    Transcritical,
}

/// Product of the left and the right critical vector, over their lengths, that is rounding.
const ORTHOGONAL: f64 = 1e-9;

/// A simple branching, decided.
#[derive(Clone, Debug)]
pub struct BranchingForm {
    /// Which kind.
    pub crossing: Crossing,
    /// Unit tangent of the other branch.
    pub other: EquilibriumTangent,
    /// Unit tangent of the branch it was found on.
    pub own: EquilibriumTangent,
    /// For a pitchfork, where it stands out of rounding: whether the pair is born where the equilibrium has lost its
    /// stability.
    pub is_supercritical: Option<bool>,
}

/// `|a11|` over the mean of the form's entries below which one branch turns back: what rounding at a located branching
/// leaves of a symmetry; a transcritical that flat turns back within roundoff of its crossing.
const FLAT: f64 = 1e-7;
/// The same for the cubic coefficient of a pitchfork.
const ROUNDING: f64 = 1e-9;
/// First stride onto another branch, in its metric.
const AMPLITUDE: f64 = 0.01;
/// Halvings of the first stride.
const HALVINGS: usize = 12;
/// Least cosine between the asked direction and the first step.
const LEAST_COSINE: f64 = 0.8;

impl EquilibriumProblem {
    /// Decides a located branching; `before` and `after` are the stations it lies between. None where the form is
    /// degenerate: more than two branches, or two that touch.
    pub fn branching_form(
        &mut self,
        located: &LocatedRest,
        (before, after): (&RestStation, &RestStation),
    ) -> Option<BranchingForm> {
        let Vectors::Real { v, psi, y } = &located.vectors else { return None };
        let at = &located.point;
        let first = self.metric.normalised(EquilibriumTangent { state: v.clone(), parameter: 0.0 });
        let second = EquilibriumTangent { state: y.iter().map(|value| -value).collect(), parameter: 1.0 };
        // Orthogonal in the metric, so that neither root is hidden in the other.
        let overlap = self.metric.inner(&first, &second);
        let second = EquilibriumTangent {
            state: second.state.iter().zip(&first.state).map(|(b, a)| b - overlap * a).collect(),
            parameter: second.parameter,
        };
        let second = self.metric.normalised(second);
        let psi_length: f64 = psi.iter().map(|value| value * value).sum::<f64>().sqrt();
        let mut form = |a: &EquilibriumTangent, b: &EquilibriumTangent| {
            let (u, v) = (along(a), along(b));
            let bent = self.local.second(at, u, v);
            psi.iter().zip(&bent).map(|(p, b)| p * b / psi_length).sum::<f64>()
        };
        let (a11, a12, a22) = (form(&first, &first), form(&first, &second), form(&second, &second));
        let size = a11.abs().max(a12.abs()).max(a22.abs());
        let square = a12 * a12 - a11 * a22;
        // Two real tangents, well apart.
        if !(square > (FLAT * size).powi(2)) {
            return None;
        }
        let crossing = if a11.abs() < FLAT * size { Crossing::Pitchfork } else { Crossing::Transcritical };
        let a11 = if crossing == Crossing::Pitchfork { 0.0 } else { a11 };
        let sum = -(a12 + square.sqrt().copysign(a12));
        // Roots of a11 x^2 + 2 a12 x + a22 = 0 as pairs (alpha, beta), in the forms that do not cancel.
        let roots = [(sum, a11), (a22, sum)];
        let mut tangents = roots.map(|(alpha, beta)| {
            self.metric.normalised(EquilibriumTangent {
                state: first.state.iter().zip(&second.state).map(|(a, b)| alpha * a + beta * b).collect(),
                parameter: alpha * first.parameter + beta * second.parameter,
            })
        });
        let chord = self.metric.normalised(after.point.minus(&before.point));
        let cosine = |tangent: &EquilibriumTangent| self.metric.inner(tangent, &chord).abs();
        if cosine(&tangents[0]) > cosine(&tangents[1]) {
            tangents.swap(0, 1);
        }
        let [other, own] = tangents;
        let own = if self.metric.inner(&own, &chord) < 0.0 { own.reversed() } else { own };
        let other = oriented(other, &self.metric);
        let is_supercritical = if crossing == Crossing::Pitchfork { self.pitchfork_side(located) } else { None };
        Some(BranchingForm { crossing, other, own, is_supercritical })
    }

    /// `c < 0` for `psi^T v > 0`.
    fn pitchfork_side(&mut self, located: &LocatedRest) -> Option<bool> {
        let Vectors::Real { v, psi, .. } = &located.vectors else { return None };
        let at = &located.point;
        self.local.linearise(at).ok()?;
        let product = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
        let squares = self.local.second(at, Along::states(v), Along::states(v));
        // A is singular; with the null vectors as borders the solution is the one that matters.
        let sizes = self.border_sizes();
        let null = RealNull::find(&mut self.systems, &self.local.jacobian, 0.0, &sizes)?;
        let border = super::systems::Border { column: null.column(), row: null.row(), corner: 0.0 };
        let mut h: Vec<f64> = squares.iter().map(|value| -value).collect();
        h.push(0.0);
        self.systems.single(&self.local.jacobian, 0.0, &border)?.solve(&mut h);
        h.truncate(v.len());
        let cubic = self.local.third(at, [v, v, v]).ok()?;
        let mixed = self.local.second(at, Along::states(v), Along::states(&h));
        let terms = [product(psi, &cubic), 3.0 * product(psi, &mixed)];
        let c = terms[0] + terms[1];
        let sure = c.abs() > ROUNDING * (terms[0].abs() + terms[1].abs());
        // Orthogonal critical vectors belong to a double eigenvalue 0, as in a model with an energy: no side goes with c then.
        let length = product(psi, v);
        let simple = length.abs() > ORTHOGONAL * (product(psi, psi) * product(v, v)).sqrt();
        (sure && simple).then_some(c * length < 0.0)
    }

    /// The first equilibrium of a branch beside the branching it goes through, at about this distance in `direction`, with
    /// its tangent onwards and its distance.
    pub fn enter(
        &mut self,
        birth: &EquilibriumPoint,
        direction: &EquilibriumTangent,
    ) -> Option<(EquilibriumPoint, EquilibriumTangent, f64)> {
        let direction = self.metric.normalised(direction.clone());
        let mut amplitude = AMPLITUDE;
        for _ in 0..HALVINGS {
            let prediction = self.advance(birth, &direction, amplitude);
            let closing = Closing::Component { from: birth, direction: &direction, amount: amplitude };
            if let Ok(found) = self.correct(&prediction, closing) {
                let step = self.metric.normalised(found.point.minus(birth));
                let distance = self.distance(birth, &found.point);
                let tangent = self.tangent(&found.point, Orientation::Along(&step));
                if let (true, Ok(tangent)) = (self.inner(&step, &direction) > LEAST_COSINE, tangent)
                    && self.inner(&tangent, &direction) > LEAST_COSINE
                {
                    return Some((found.point, tangent, distance));
                }
            }
            amplitude *= 0.5;
        }
        None
    }

    /// A problem for another branch of the same model, its metric as it is here.
    #[must_use]
    pub fn sibling(&self) -> Self {
        let mut other = Self::new(self.spec.clone());
        other.metric = self.metric.clone();
        other
    }
}

/// The direction of a branch in which the parameter rises, or the largest state where it stands still.
fn oriented(tangent: EquilibriumTangent, metric: &RestMetric) -> EquilibriumTangent {
    /// Scaled component under which the parameter stands still.
    const STILL: f64 = 1e-9;
    let rise = tangent.parameter / metric.parameter_scale;
    let scaled = tangent.state.iter().zip(&metric.scales).map(|(x, s)| x / s);
    let largest = scaled.fold(0.0, |largest: f64, x| if x.abs() > largest.abs() { x } else { largest });
    let leading = if rise.abs() > STILL { rise } else { largest };
    if leading < 0.0 { tangent.reversed() } else { tangent }
}

fn along(tangent: &EquilibriumTangent) -> Along<'_> {
    Along { states: &tangent.state, parameter: tangent.parameter }
}
