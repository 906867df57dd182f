//! Why a branch ends, told in words, on models whose ends are known exactly.

mod at_rest; // births at a state of rest
mod limits; // edge, budget, resolution
mod loops; // closed branches, and returns to the parent
mod unbounded; // periods that grow without bound
mod words; // numbers read out of sentences
