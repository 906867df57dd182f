//! Points where two branches of cycles cross.

mod exact; // X12, X13, and the same in a bent coordinate: kind, place, both branches
mod lorenz; // a symmetry that breaks, and what follows
mod symmetry; // symmetries of order two, found on cycles
