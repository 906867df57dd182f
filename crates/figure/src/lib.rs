//! Branches of cycles as figures that a journal takes.
//!
//! A [`Figure`] is what a study file asks for; [`Figure::draw`] turns it and plain [`Branch`] data
//! into the text of an SVG file: a [`Diagram`] shows a measure of the cycle against the followed
//! parameter, a [`Portrait`] shows orbits in the plane of two states.
//!
//! What every figure holds to: stable solid, unstable dashed, the change exactly at the located events; one
//! marker shape for each kind of threshold, explained in whole words outside the frame; colours that the
//! colour-blind can tell apart, with line weight and names besides, so that grey print survives; physical
//! width in mm, 8 pt text (7 pt names) kept as text; a caption inside the file (`<title>` and `<desc>`) with
//! the fixed parameters, the accuracy and what was not searched. The same data give the same bytes.
//!
//! This crate does not know how any number arose: no solver, no model, and no file, neither its name nor its
//! place. Numbers that are missing or not finite are left out, never replaced.
//!
//! ```
//! use armilla_figure::{Figure, Measure};
//! # use armilla_record::{Branch, End, EndReason, Point, Quantity};
//! # let named = |name: &str, unit: &str| Quantity { name: name.into(), label: name.into(), unit: unit.into() };
//! # let end = |value| End { reason: EndReason::Edge, value, words: String::new() };
//! # let point = |k: usize| Point {
//! #     value: 1.0 + 0.1 * k as f64, period: 6.3, turns: 1, distance: k as f64, unstable_count: 0,
//! #     trivial_defect: 0.0, liouville_defect: 0.0, profile_error: 0.0, multipliers: vec![], intervals: 20, degree: 4,
//! #     maxima: vec![(0.1 * k as f64).sqrt()], minima: vec![0.0], means: vec![0.0], spreads: vec![0.0],
//! #     ..Point::default()
//! # };
//! # let branch = Branch {
//! #     format: 1, armilla: String::new(), name: "a".into(), born_at: None, model_title: "A tank".into(),
//! #     model_fingerprint: String::new(), states: vec![named("level", "m")], parameter: named("gain", "1/s"),
//! #     range: (1.0, 2.0), fixed: vec![("lag".into(), 2.5)], accuracy: 1e-9, points: (0..10).map(point).collect(),
//! #     events: vec![], ends: (end(1.0), end(1.9)), profiles: vec![],
//! #     of: armilla_record::Solutions::Cycles,
//! # };
//! let figure = Figure::diagram(Measure::Max("level".into()));
//! let svg = figure.draw(&[branch.clone()])?;
//! assert!(svg.starts_with("<svg") && svg.contains("maximum of level (m)") && svg.contains("gain (1/s)"));
//!
//! let wrong = Figure::diagram(Measure::Max("levl".into())).draw(&[branch]).unwrap_err();
//! assert_eq!(wrong.to_string(), "the model has no state `levl`; it has `level`; did you mean `level`?");
//! # Ok::<(), armilla_figure::FigureError>(())
//! ```
//!
//! [`Branch`]: armilla_record::Branch

mod axis;
mod canvas;
mod caption;
mod curve;
mod diagram;
mod drawn;
mod error;
mod figure;
mod geometry;
mod interpolate;
mod label;
mod legend;
mod marker;
mod measure;
mod number;
mod page;
mod palette;
mod place;
mod portrait;
mod range;
mod shown;
mod spec;
mod stability;
mod stroke;
mod text;

pub use error::FigureError;
pub use spec::{Diagram, Figure, Measure, Portrait, Width};
