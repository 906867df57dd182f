//! Acceptance tests of armilla against outside references.
//!
//! The tests under `tests/` check what the program finds against exact cases, published values and independent
//! computations, each with its source beside it; this library is what they share. It goes through the public face of
//! the crates only. It knows no reference value but those of the table of errors (`errors`), which a program prints and a
//! test checks. Models are in `models/`.
//!
//! ```
//! use armilla_tests::{Case, relative, settings};
//!
//! let case = Case::new("x1", "mu", 1.0).with("k", 0.5);
//! let (_, cycle) = case.start(&case.circle(0.4, 6.0), settings(1e-9), 0.25);
//! // Exact, by hand: 2 pi/(1 + k mu).
//! relative("period", cycle.unknowns.period, std::f64::consts::TAU / 1.125, 1e-12);
//! ```

mod bracket;
mod case;
mod change;
mod check;
mod checked;
mod curve;
mod decimal;
mod errors;
mod example;
mod job;
mod ledger;
mod matching;
mod orbit;
mod order;
mod planted;
mod random;
mod sampled;
mod series;
mod uniform;
mod walk;

pub use bracket::{station, stations};
pub use case::{Case, settings};
pub use change::{Bend, Change, Move};
pub use check::{absolute, multiplier, relative};
pub use checked::within;
pub use decimal::difference;
pub use errors::{Row, Source, WIDEST, page, rows};
pub use example::example_job;
pub use job::{branch, cascade_job, event, job, trace_file};
pub use ledger::Ratios;
pub use matching::{Curve, profile_error};
pub use orbit::Motion;
pub use order::Orders;
pub use planted::{Beneath, Exact, Planted, Sheet};
pub use random::Random;
pub use sampled::sampled_job;
pub use series::{VanDerPol, divergence_integral};
pub use uniform::{Uniform, uniform_mesh};
pub use walk::walk;
