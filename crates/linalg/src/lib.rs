//! Small dense kernels, the cyclic chain, bordered systems and the periodic Schur form.
//!
//! One elimination serves everything the cycle problem asks except its spectrum: [`Cyclic`] condenses
//! each interval and reduces the chain, [`Bordered`] closes it with a factor sigma and k border rows and
//! columns, and solves or solves transposed as often as asked; [`ComplexBordered`] does so with a
//! complex sigma. The spectrum comes from the sequence of
//! interval maps, [`PeriodicSchur`]. States of rest ask for [`eigenvalues()`] and for systems of fixed sparsity,
//! [`Patterned`]. This crate does not know where matrices come from.
//!
//! ```
//! use armilla_linalg::{Bordered, Cyclic, Right, Shape};
//!
//! // Two scalar links u1 = 2 u0 and u2 = u1 / 2 + s, closed by u2 = u0, with the border row u0 = 3.
//! let shape = Shape { n: 1, inner: 0, intervals: 2 };
//! let mut cyclic = Cyclic::new(shape);
//! cyclic.block_mut(0).copy_from_slice(&[-2.0, 1.0]);
//! cyclic.block_mut(1).copy_from_slice(&[-0.5, 1.0]);
//! cyclic.factor().expect("no interior unknowns");
//! let mut bordered = Bordered::new(shape, 1);
//! bordered.column_mut(0).copy_from_slice(&[0.0, -1.0]);
//! bordered.row_mut(0).copy_from_slice(&[1.0, 0.0, 0.0]);
//! bordered.prepare(&cyclic, 1.0).expect("regular");
//! let mut unknowns = vec![0.0; 3];
//! let mut scalars = [0.0];
//! let right = Right { core: &[0.0, 0.0], closing: &[0.0], border: &[3.0] };
//! bordered.solve(&cyclic, right, &mut unknowns, &mut scalars);
//! assert!((unknowns[1] - 6.0).abs() < 1e-14 && scalars[0].abs() < 1e-14);
//! ```

mod bordered;
mod chain;
mod complex;
mod cyclic;
mod dense;
mod eigenvalues;
mod factors;
mod interval;
mod patterned;
mod periodic;

pub use bordered::{Bordered, DeterminantSign, Right};
pub use complex::{ComplexBordered, ComplexVector};
pub use cyclic::{Cyclic, Shape, Singular};
pub use dense::Lu;
pub use eigenvalues::{Eigenvalue, Eigenvalues, eigenvalues};
pub use nalgebra::Complex;
pub use patterned::Patterned;
pub use periodic::{NotConverged, PeriodicSchur, ScaledMultiplier};
