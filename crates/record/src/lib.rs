//! The plain data of armilla and the files it lives in.
//!
//! Profiles (piecewise polynomials over one period), points, events and branches are plain values
//! here, with evaluation at a time. They are written to a results folder and read back equal to the
//! last bit; `docs/files.md` specifies every file. Whatever is written appears whole or not at all,
//! what is read was written whole and is unchanged since, or the error says where it is not, and
//! results that are to be replaced last until new ones are complete.
//!
//! This crate does not know how any number arose: no model, no solver, no figure. It does not know
//! what a study asks either; `study.ron` is text to it. It is the one writer of files of the project, and the reader of tables
//! of samples ([`read_samples`]).
//!
//! # Example
//!
//! ```
//! use armilla_record::*;
//!
//! let state = Quantity { name: "level".into(), label: "level".into(), unit: "m".into() };
//! let gain = Quantity { name: "gain".into(), label: "gain".into(), unit: "1/s".into() };
//! let point = |value: f64, distance: f64| Point {
//!     value,
//!     period: 6.25,
//!     turns: 1,
//!     distance,
//!     unstable_count: 0,
//!     trivial_defect: 1e-13,
//!     liouville_defect: 2e-13,
//!     profile_error: 3e-10,
//!     maxima: vec![0.1 + 0.2],
//!     minima: vec![-0.0],
//!     means: vec![5e-324],
//!     spreads: vec![0.1],
//!     multipliers: vec![Multiplier { log_modulus: f64::NEG_INFINITY, angle: 0.0 }],
//!     intervals: 20,
//!     degree: 4,
//!     choice: MeshReason::Start,
//!     reached: Reached::Accuracy,
//!     unresolved: None,
//!     eigenvalues: Vec::new(),
//! };
//! let end = |value: f64| End { reason: EndReason::Edge, value, words: "end of the range".into() };
//! let branch = Branch {
//!     format: BRANCH_FORMAT,
//!     armilla: "0.1.0".into(),
//!     name: "a".into(),
//!     born_at: None,
//!     model_title: "Level control".into(),
//!     model_fingerprint: "0".into(),
//!     states: vec![state],
//!     parameter: gain,
//!     range: (0.5, 4.0),
//!     fixed: vec![("lag".into(), 2.5)],
//!     accuracy: 1e-9,
//!     points: vec![point(0.5, -1.0), point(4.0, 2.0)],
//!     events: Vec::new(),
//!     ends: (end(0.5), end(4.0)),
//!     profiles: Vec::new(),
//!     of: Solutions::Cycles,
//! };
//!
//! let place = tempfile::tempdir()?;
//! let folder = place.path().join("level.results");
//! let mut results = Results::create(&folder, false)?;
//! results.write_study("(model: \"level.model.ron\")\n")?;
//! results.write_branch(&branch)?;
//! results.write_thresholds(&Threshold::rows(std::slice::from_ref(&branch)))?;
//! results.finish()?;
//!
//! let back = Results::open(&folder)?.read_branch("a")?;
//! assert_eq!(back, branch);
//! assert!(back.points[0].minima[0].is_sign_negative());
//! assert!(matches!(Results::create(&folder, false), Err(RecordError::Exists { .. })));
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```

mod atomic;
mod branch;
mod branch_table;
mod branch_text;
mod cascade;
mod check;
mod descent;
mod error;
mod event;
mod export;
mod export_arrays;
mod export_table;
mod file_name;
mod inventory;
mod journal;
mod pen;
mod point;
mod profile;
mod results;
mod results_read;
mod samples;
mod seal;
mod threshold;

pub use atomic::write_atomic;
pub use branch::{Branch, End, EndReason, Quantity, Solutions, StoredProfile};
pub use branch_table::{branch_columns, write_branch_table};
pub use branch_text::{BRANCH_FORMAT, parse_branch, write_branch_file};
pub use cascade::{CASCADE_COLUMNS, CascadeRow, write_cascade_table};
pub use descent::descent_order;
pub use error::{Attempt, RecordError};
pub use event::{Criticality, Event, EventKind};
pub use export::ExportFormat;
pub use file_name::branch_file_stem;
pub use journal::{Journal, JournalContent, JournalEntry};
pub use point::{Eigenvalue, MeshReason, Multiplier, Point, Reached, Unresolved};
pub use profile::{Evaluator, Profile, ProfileFault, barycentric_weights, lagrange_at, node_quadrature, nodes};
pub use results::Results;
pub use samples::{Samples, SamplesError, parse_samples, read_samples};
pub use threshold::{THRESHOLD_COLUMNS, Threshold, parse_threshold_table, write_threshold_table};
