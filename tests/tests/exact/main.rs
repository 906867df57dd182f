//! Cases whose answers follow by hand: cycles, multipliers, thresholds.

mod branchings; // X12, X13: two branches that cross, or a pair
mod doubling; // X3, X4: period doubling with its doubled branch, both criticalities
mod fold; // X2: two circles that meet
mod hopf; // X1: a circle with shear
mod liouville; // X10: multipliers against the divergence, several models
