//! Following of anything behind the [`Problem`] trait.
//!
//! [`Follower`] walks along a branch by pseudo-arclength steps: predict along the tangent, correct, judge, choose
//! the next stride, land exactly on edges and targets, and report where watched values change sign between two
//! points. It never sees a vector and does not know what is followed.
//!
//! ```
//! use armilla_follow::*;
//!
//! /// The circle x^2 + p^2 = 1, the parameter being p.
//! struct Circle;
//! impl Problem for Circle {
//!     type Point = [f64; 2];
//!     type Tangent = [f64; 2];
//!     type Error = ();
//!     fn advance(&self, z: &[f64; 2], t: &[f64; 2], stride: f64) -> [f64; 2] {
//!         [z[0] + stride * t[0], z[1] + stride * t[1]]
//!     }
//!     fn correct(&mut self, z: &[f64; 2], closing: Closing<'_, [f64; 2], [f64; 2]>) -> Result<Corrected<[f64; 2]>, Failure<()>> {
//!         let mut z = *z;
//!         for iterations in 1..=20 {
//!             let (row, target) = match closing {
//!                 Closing::Arclength { from, tangent, stride } => (*tangent, self.inner(tangent, from) + stride),
//!                 Closing::Parameter(p) => ([0.0, 1.0], p),
//!                 Closing::Component { from, direction, amount } => (*direction, self.inner(direction, from) + amount),
//!             };
//!             let r = [z[0] * z[0] + z[1] * z[1] - 1.0, self.inner(&row, &z) - target];
//!             let det = 2.0 * (z[0] * row[1] - z[1] * row[0]);
//!             let step = [(r[0] * row[1] - 2.0 * z[1] * r[1]) / det, (2.0 * z[0] * r[1] - row[0] * r[0]) / det];
//!             z = [z[0] - step[0], z[1] - step[1]];
//!             if step[0].hypot(step[1]) < 1e-14 {
//!                 return Ok(Corrected { point: z, contraction: 0.1, iterations });
//!             }
//!         }
//!         Err(Failure::NotConverged)
//!     }
//!     fn tangent(&mut self, z: &[f64; 2], orientation: Orientation<'_, [f64; 2]>) -> Result<[f64; 2], Failure<()>> {
//!         let t = [-z[1], z[0]];
//!         let sign = match orientation {
//!             Orientation::Along(old) => self.inner(&t, old).signum(),
//!             Orientation::Parameter(sign) => (t[1] * sign).signum(),
//!         };
//!         Ok([sign * t[0], sign * t[1]])
//!     }
//!     fn inner(&self, a: &[f64; 2], b: &[f64; 2]) -> f64 { a[0] * b[0] + a[1] * b[1] }
//!     fn distance(&self, a: &[f64; 2], b: &[f64; 2]) -> f64 { (a[0] - b[0]).hypot(a[1] - b[1]) }
//!     fn parameter(&self, z: &[f64; 2]) -> f64 { z[1] }
//!     fn watch(&mut self, z: &[f64; 2], t: &[f64; 2]) -> Result<Watch, Failure<()>> {
//!         Ok(Watch { values: vec![Watched { value: t[1], slope: None }], unstable_count: usize::from(z[0] < 0.0) })
//!     }
//!     fn renew(&mut self, _: &[f64; 2], _: &[&[f64; 2]]) -> Option<([f64; 2], Vec<[f64; 2]>)> { None }
//! }
//!
//! let settings = Settings::new((-2.0, 2.0));
//! let mut circle = Circle;
//! let mut follower = Follower::start(&mut circle, [1.0, 0.0], 1.0, settings).expect("a point of the circle");
//! let mut folds = 0;
//! while let Outcome::Step(step) = follower.step() {
//!     folds += step.crossings.len();
//! }
//! assert_eq!(follower.end(), Some(&FollowEnd::Closed));
//! assert_eq!(folds, 2);
//! ```

mod follower;
mod hermite;
mod problem;
mod settings;
mod stride;

pub use follower::{Crossing, FollowEnd, Follower, Landing, Outcome, StartFault, Station, Step};
pub use hermite::Hermite;
pub use problem::{Closing, Corrected, Failure, Orientation, Problem, Watch, Watched};
pub use settings::{Settings, SettingsFault};
