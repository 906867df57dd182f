//! Study files and the tree of branches.
//!
//! A study file says which model, where to start, what to follow and how far. [`Study::read`] checks it against the
//! model; [`trace()`] does it: start, follow, locate, switch, write. This crate does not know how a cycle is computed
//! nor how a figure is drawn.
//!
//! ```
//! use armilla_model::Source;
//! use armilla_study::{DEFAULT_ACCURACY, parse};
//!
//! let text = r#"(
//!     model: "level.model.ron",
//!     start: Settle(at: { "gain": 1.0 }),
//!     follow: (parameter: "gain", from: 0.5, to: 4.0),
//! )"#;
//! let study = parse(Source { file: "level.study.ron", text }).expect("every other field has a default");
//! assert_eq!(study.accuracy, DEFAULT_ACCURACY);
//!
//! let wrong = parse(Source { file: "level.study.ron", text: &text.replace("follow", "folow") });
//! assert!(wrong.expect_err("no such field").to_string().starts_with("level.study.ron:4:"));
//! ```

mod ahead;
mod approach;
mod beyond;
mod branch;
mod cascade;
mod crossing_event;
mod crossings;
mod ends;
mod equilibrium_births;
mod equilibrium_branch;
mod equilibrium_events;
mod equilibrium_start;
mod equilibrium_walk;
mod error;
mod families;
mod file;
mod guards;
mod hidden;
mod joins;
mod late_folds;
mod ledger;
mod near_miss;
mod neutral;
mod prediction;
mod progress;
mod recurrence;
mod rest;
mod samples;
mod settings;
mod smoothing;
mod start;
mod step_events;
mod study;
mod torus_event;
mod trace;
mod valley;
mod walk;
mod words;

pub use beyond::beyond;
pub use error::{ErrorClass, StudyError};
pub use file::{DEFAULT_ACCURACY, Follow, MeshOverride, Pursue, Start, StrideOverride, StudyFile, Values};
pub use progress::{Observer, Progress, Silent};
pub use study::{Study, parse};
pub use trace::{TraceOptions, Traced, redraw, trace};
pub use words::{digits, settling_words, unsettled_words};
