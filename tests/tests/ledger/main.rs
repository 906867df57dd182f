//! The stability ledger and the guards against jumps, on models whose events are known exactly.

mod account;
mod beside;
mod bubbles;
mod edges;
mod hidden;
mod jumps;
mod near;
