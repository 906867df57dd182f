//! Some hundred random cases with exact answers: every number within the error that is reported with it.
//!
//! Four systems with known cycles (X1 to X4) behind random smooth changes of coordinates, units and clocks, half of them
//! read from model text and half coded in Rust, at accuracies from 1e-6 to 1e-11. `--nocapture` prints how true errors
//! compare with reported ones.

mod cycles; // period, profile, multipliers, stability
mod draw; // random systems
mod judge; // one cycle against the exact one
mod thresholds; // folds and doublings located, doubled branches entered
