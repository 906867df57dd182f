//! The plain data of armilla and the files it lives in.
//!
//! Profiles (piecewise polynomials over one period), points, events and branches are plain values
//! here, with evaluation at a time, and are written to and read from branch files and tables. This
//! crate does not know how any number arose.

mod branch;
mod event;
mod point;
mod profile;

pub use branch::{Branch, End, EndReason, Quantity, StoredProfile};
pub use event::{Criticality, Event, EventKind};
pub use point::{Multiplier, Point};
pub use profile::{Evaluator, Profile, ProfileFault, barycentric_weights, lagrange_at, node_quadrature, nodes};
