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
//!
//! ```
//! use armilla_collocation::{MeshSettings, Tables, estimate_error, remesh};
//!
//! // One state with a steep stretch, sampled on a uniform mesh: the error estimate sees it, the new mesh resolves it.
//! let tables = Tables::new(5);
//! let wave = |t: f64| (8.0 * (std::f64::consts::TAU * t).cos()).exp();
//! let sample = |mesh: &[f64]| -> Vec<f64> {
//!     let inside = |pair: &[f64]| -> Vec<f64> {
//!         tables.nodes[..5].iter().map(|s| wave(pair[0] + s * (pair[1] - pair[0]))).collect()
//!     };
//!     let mut nodes: Vec<f64> = mesh.windows(2).flat_map(inside).collect();
//!     nodes.push(wave(1.0));
//!     nodes
//! };
//! let mut mesh: Vec<f64> = (0..=40).map(|i| i as f64 / 40.0).collect();
//! let before = estimate_error(&tables, &mesh, &sample(&mesh), &[0.0]);
//! for _ in 0..3 {
//!     let estimate = estimate_error(&tables, &mesh, &sample(&mesh), &[0.0]);
//!     let settings = MeshSettings { degrees: (5, 5), ..MeshSettings::new(1e-9) };
//!     mesh = remesh(&tables, &mesh, &estimate, settings).mesh;
//! }
//! let after = estimate_error(&tables, &mesh, &sample(&mesh), &[0.0]);
//! assert!(before.error > 1e-9 && after.error < 1e-9, "{} {}", before.error, after.error);
//! ```

mod damped;
mod defect;
mod direction;
mod forced;
mod gauss;
mod linear_mesh;
mod mesh;
mod metric;
mod newton;
mod system;
mod tables;
mod variational;

pub use damped::approach;
pub use defect::{Collocated, Defects};
pub use forced::Forced;
pub use gauss::{gauss, radau};
pub use linear_mesh::TooStiff;
pub use mesh::{
    ErrorEstimate, MeshChoice, MeshSettings, estimate_error, interpolate_nodes, refine, remesh, scales_of, work,
};
pub use metric::Metric;
pub use newton::{
    Closing, Failure, Iteration, LinearClosing, NewtonSettings, Report, Scalar, Task, Verdict, Workspace, correct,
    correct_with, judge, roundoff,
};
pub use system::{Fault, Iterate, Row, System, SystemSpec, Variation};
pub use tables::{DEGREES, Tables};
pub use variational::{MapsFault, Variational, VariationalMaps};
