//! Starts from samples of a cycle.

mod faults;
mod forced;
mod kuramoto;
mod noisy;
mod pond;
