//! Time integration, section crossings and settling.
//!
//! What this crate is for: to follow a model in time and to tell what its motion comes to. An [`Integrator`]
//! steps adaptively, explicitly or implicitly as the model demands, with dense output; a [`Section`] finds the
//! returns to a level or to multiples of a forcing period, as accurately as the steps are; [`settle()`] discards
//! the transient by itself and gives a [`Verdict`]: a state of rest, a cycle with its period and its number of
//! turns, a quasi-periodic or an irregular motion with their evidence, or what was seen until a limit was
//! reached. A [`Cycle`] is handed over as a profile on a mesh of the caller's size, good enough to start Newton's
//! method from.
//!
//! What it does not know: collocation, parameters to be followed, stability beyond the eigenvalues at rest and the
//! growth of one disturbance. A motion that stays by symmetry on an invariant set is settled there, even where
//! that set repels: the multipliers of the corrected cycle tell. Models of more than some dozens of states are
//! integrated, but not fast: linear algebra is dense here.
//!
//! Everything is deterministic: the same input gives the same bits.
//!
//! # Example
//! A circle that attracts, with shear: radius sqrt(mu), period 2 pi/(1 + mu/2).
//! ```
//! # use armilla_model::*;
//! # struct Circle(SparsityPattern);
//! # struct At;
//! # impl VectorField for Circle {
//! #     fn n_states(&self) -> usize { 2 }
//! #     fn n_parameters(&self) -> usize { 1 }
//! #     fn is_forced(&self) -> bool { false }
//! #     fn pattern(&self) -> &SparsityPattern { &self.0 }
//! #     fn evaluator(&self, _: &[Column]) -> Box<dyn Evaluator> { Box::new(At) }
//! # }
//! # impl Evaluator for At {
//! #     fn rates(&mut self, at: Batch<'_>, f: &mut [f64]) {
//! #         let (x, y, mu) = (at.states[0], at.states[1], at.parameters[0]);
//! #         let r2 = x * x + y * y;
//! #         f[0] = x * (mu - r2) - y * (1.0 + 0.5 * r2);
//! #         f[1] = y * (mu - r2) + x * (1.0 + 0.5 * r2);
//! #     }
//! #     fn linearise(&mut self, at: Batch<'_>, out: Linearisation<'_>) {
//! #         let (x, y, mu) = (at.states[0], at.states[1], at.parameters[0]);
//! #         let r2 = x * x + y * y;
//! #         out.jacobian[0] = mu - r2 - 2.0 * x * x - x * y;
//! #         out.jacobian[1] = -2.0 * x * y - (1.0 + 0.5 * r2) - y * y;
//! #         out.jacobian[2] = -2.0 * x * y + 1.0 + 0.5 * r2 + x * x;
//! #         out.jacobian[3] = mu - r2 - 2.0 * y * y + x * y;
//! #     }
//! #     fn second(&mut self, _: Batch<'_>, _: Direction<'_>, _: Direction<'_>, _: &mut [f64]) {}
//! #     fn third(&mut self, _: Batch<'_>, _: [Direction<'_>; 3], _: &mut [f64]) -> Result<(), NotProvided> {
//! #         Err(NotProvided)
//! #     }
//! #     fn second_gradient(&mut self, _: Batch<'_>, _: &[f64], _: Direction<'_>, _: Gradient<'_>) {}
//! # }
//! # let pattern = SparsityPattern::try_from_offsets_and_indices(2, 2, vec![0, 2, 4], vec![0, 1, 0, 1]).unwrap();
//! # let field = Circle(pattern);
//! use armilla_flow::{SettleOptions, Verdict, settle};
//!
//! // `field` is any `armilla_model::VectorField`, here with the one parameter mu.
//! let settled = settle(&field, &[0.25], &[1.0, 0.3], &SettleOptions::default())?;
//! let Verdict::Cycle(cycle) = settled.verdict else { panic!("it settles on a cycle") };
//! assert_eq!(cycle.turns, 1);
//! assert!((cycle.period() - 2.0 * std::f64::consts::PI / 1.125).abs() < 1e-9);
//! let profile = cycle.profile(4, 20);
//! assert_eq!(profile.intervals(), 20);
//! # Ok::<(), armilla_flow::FlowError>(())
//! ```

mod cycle;
mod equilibrium;
mod error;
mod explicit;
mod floors;
mod implicit;
mod integrator;
mod judge;
mod lu;
mod neutral;
mod observe;
mod options;
mod radau;
mod rates;
mod rest;
mod returns;
mod section;
mod settle;
mod stiffness;
mod tangent;
// The tests of the whole crate share these and use models that the unit tests do not.
#[cfg(test)]
#[allow(dead_code)]
mod test_models;
mod verdict;

pub use cycle::{Cycle, on_mesh_of_motion, turns_of};
pub use equilibrium::Equilibrium;
pub use error::FlowError;
pub use integrator::{Integrator, Limits, Method, Stats, Tolerance};
pub use judge::Exponent;
pub use options::SettleOptions;
pub use returns::NearReturn;
pub use section::{Return, Section};
pub use settle::settle;
pub use verdict::{Evidence, Limit, Push, Settled, Verdict};
