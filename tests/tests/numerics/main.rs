//! What the methods promise: orders, quadratic convergence, meshes, multipliers whatever the mesh.

mod choice; // the degree, along a branch too, and what points say of it
mod errors; // reported errors against true ones
mod location; // Newton iterations, brackets, meshes of a threshold
mod meshes; // number of intervals against its prediction, accuracy
mod orders; // m + 1 inside intervals, 2m at mesh points, in period, multipliers and thresholds
mod overrides; // degree and intervals given by hand: within the reported errors
mod parity; // multipliers on N and N + 1 intervals
