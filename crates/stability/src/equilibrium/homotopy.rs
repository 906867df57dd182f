//! From far away to an equilibrium, along a curve.
//!
//! `f(x) = (1 - lambda) f(x0)` holds at x0 for lambda = 0 and at an equilibrium for lambda = 1; in between it is a branch in
//! lambda like any other, followed through its folds (Keller 1978, in Recent Advances in Numerical Analysis, 73: the global
//! homotopy of Newton's method, which is this curve without the turns). It leads to an equilibrium unless it runs to
//! infinity or back; nothing is promised of which one.

use std::sync::Arc;

use armilla_follow::{FollowEnd, Follower, Outcome, Settings};
use armilla_model::{
    Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, SparsityPattern, VectorField,
};

use super::point::EquilibriumPoint;
use super::problem::{EquilibriumProblem, EquilibriumSpec};
use super::systems::DENSE_UP_TO;

/// Range of lambda: a curve that turns back far below its start has left for elsewhere.
const RANGE: (f64, f64) = (-3.0, 1.0);
/// Points allowed; some tens are usual.
const POINTS: usize = 500;

/// The rates less what is left of those at the start; its one parameter is lambda.
struct Homotopy {
    field: Arc<dyn VectorField>,
    parameters: Vec<f64>,
    /// Rates at the start.
    offset: Vec<f64>,
}

struct HomotopyEvaluator {
    inner: Box<dyn Evaluator>,
    parameters: Vec<f64>,
    offset: Vec<f64>,
    has_column: bool,
}

impl VectorField for Homotopy {
    fn n_states(&self) -> usize {
        self.field.n_states()
    }

    fn n_parameters(&self) -> usize {
        1
    }

    fn is_forced(&self) -> bool {
        self.field.is_forced()
    }

    fn pattern(&self) -> &SparsityPattern {
        self.field.pattern()
    }

    fn evaluator(&self, columns: &[Column]) -> Box<dyn Evaluator> {
        Box::new(HomotopyEvaluator {
            inner: self.field.evaluator(&[]),
            parameters: self.parameters.clone(),
            offset: self.offset.clone(),
            has_column: !columns.is_empty(),
        })
    }
}

impl HomotopyEvaluator {
    /// The same points for the rates themselves.
    fn inside<'a>(parameters: &'a [f64], at: Batch<'a>) -> Batch<'a> {
        Batch { parameters, ..at }
    }

    fn shift(&self, at: Batch<'_>, rates: &mut [f64]) {
        for (rates, offset) in rates.chunks_exact_mut(at.len).zip(&self.offset) {
            for (k, rate) in rates.iter_mut().enumerate() {
                let lambda = if at.parameters.len() == 1 { at.parameters[0] } else { at.parameters[k] };
                *rate -= (1.0 - lambda) * offset;
            }
        }
    }
}

impl Evaluator for HomotopyEvaluator {
    fn rates(&mut self, at: Batch<'_>, rates: &mut [f64]) {
        self.inner.rates(Self::inside(&self.parameters, at), rates);
        self.shift(at, rates);
    }

    fn linearise(&mut self, at: Batch<'_>, out: Linearisation<'_>) {
        let Linearisation { rates, jacobian, columns } = out;
        let inner = Linearisation { rates: &mut *rates, jacobian, columns: &mut [] };
        self.inner.linearise(Self::inside(&self.parameters, at), inner);
        self.shift(at, rates);
        if self.has_column {
            columns.chunks_exact_mut(at.len).zip(&self.offset).for_each(|(column, offset)| column.fill(*offset));
        }
    }

    fn second(&mut self, at: Batch<'_>, u: Direction<'_>, v: Direction<'_>, out: &mut [f64]) {
        let states = |d: Direction<'_>| d.states.to_vec();
        let (u, v) = (states(u), states(v));
        let alone = |states| Direction { states, columns: &[] };
        self.inner.second(Self::inside(&self.parameters, at), alone(&u), alone(&v), out);
    }

    fn third(&mut self, at: Batch<'_>, directions: [Direction<'_>; 3], out: &mut [f64]) -> Result<(), NotProvided> {
        let alone = directions.map(|direction| Direction { columns: &[], ..direction });
        self.inner.third(Self::inside(&self.parameters, at), alone, out)
    }

    fn second_gradient(&mut self, at: Batch<'_>, psi: &[f64], v: Direction<'_>, out: Gradient<'_>) {
        let Gradient { states, columns } = out;
        let alone = Direction { columns: &[], ..v };
        let inner = Gradient { states, columns: &mut [] };
        self.inner.second_gradient(Self::inside(&self.parameters, at), psi, alone, inner);
        columns.fill(0.0);
    }
}

/// States at rest on the curve from `near`; none where it leads to none, and for large models, whose eigenvalues at every
/// point would cost too much for a guess.
pub(crate) fn lead(spec: &EquilibriumSpec, near: &EquilibriumPoint) -> Option<Vec<f64>> {
    let n = near.state.len();
    if n > DENSE_UP_TO {
        return None;
    }
    let mut parameters = spec.parameters.clone();
    parameters[spec.free] = near.parameter;
    let mut offset = vec![0.0; n];
    let at = Batch { len: 1, time: &[], states: &near.state, parameters: &parameters };
    spec.field.evaluator(&[]).rates(at, &mut offset);
    let field = Homotopy { field: spec.field.clone(), parameters, offset };
    let typical = spec.typical.iter().zip(&near.state).map(|(typical, x)| typical.max(x.abs())).collect();
    let along =
        EquilibriumSpec { field: Arc::new(field), parameters: vec![0.0], free: 0, typical, parameter_scale: 1.0 };
    let mut problem = EquilibriumProblem::new(along);
    let start = EquilibriumPoint { state: near.state.clone(), parameter: 0.0 };
    let settings = Settings { points: POINTS, ..Settings::new(RANGE) };
    let mut follower = Follower::start(&mut problem, start, 1.0, settings).ok()?;
    while let Outcome::Step(_) = follower.step() {}
    let arrived = matches!(follower.end(), Some(FollowEnd::Edge(lambda)) if *lambda == RANGE.1);
    arrived.then(|| follower.current().point.state.clone())
}
