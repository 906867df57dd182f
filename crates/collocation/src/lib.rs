//! Cycles by orthogonal collocation.
//!
//! A cycle of `u' = T f(u, p)` on scaled time `[0, 1]` is a continuous piecewise polynomial of degree m that
//! satisfies the equation at the m Gauss points of each of N intervals. This crate discretises, solves by
//! Newton's method, estimates the error, chooses the mesh, and integrates the variational equation along a
//! profile. It does not know what a parameter means or what an event is.
//!
//! Order of unknowns: node values as in [`armilla_record::Profile`], then the period, then the parameter.
//! Source: de Boor & Swartz 1973 (SIAM J. Numer. Anal. 10:582); Ascher, Mattheij & Russell 1988 (Numerical
//! Solution of Boundary Value Problems, ch. 5, 7, 9).

mod gauss;
mod mesh;
mod metric;
mod newton;
mod system;
mod tables;
mod variational;

pub use gauss::{gauss, radau};
pub use mesh::{ErrorEstimate, MeshChoice, MeshSettings, estimate_error, interpolate_nodes, remesh};
pub use metric::Metric;
pub use newton::{
    Closing, Failure, Iteration, LinearClosing, NewtonSettings, Report, Scalar, Task, Workspace, correct, correct_with,
    roundoff,
};
pub use system::{Fault, Iterate, Row, System, SystemSpec, Variation};
pub use tables::Tables;
pub use variational::{Variational, VariationalMaps};
