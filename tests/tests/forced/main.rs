//! Cycles under a forcing.

mod duffing;
mod ends;
mod load;
mod mathieu;
mod planted;
mod sieve;
mod still;
