//! Cases whose answers follow by hand: cycles, multipliers, thresholds.

mod births; // X7, X8, X9 and a fast-slow pair: where cycles are born
mod branchings; // X12, X13: two branches that cross, or a pair
mod doubling; // X3, X4: period doubling with its doubled branch, both criticalities
mod fold; // X2: two circles that meet
mod hopf; // X1: a circle with shear
mod liouville; // X10: multipliers against the divergence, several models
mod saddle_loop; // X14: a period that grows without bound
mod scales; // X2, X3 in other units
mod torus; // X5: a circle that loses to a torus
mod turning; // a pair about a circle with known coefficients, strong resonances
