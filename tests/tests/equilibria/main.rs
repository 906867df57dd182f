//! Studies that start at rest: equilibria, their events, and the cycles born there.

mod branchings; // a circle and a parabola of equilibria across a line, Lorenz's pitchfork
mod families;
mod folds; // two folds by hand
mod hopf; // X1, X2, X5, X7, X8, X9, a fast-slow pair, Lorenz, Hodgkin-Huxley, a cell cycle
mod large; // a ring of a thousand
mod matter; // eigenvalues, records, settling at rest, starts that find nothing
mod neutral; // eigenvalues on the imaginary axis all along, singular guesses
mod normal_form; // first Lyapunov coefficients by hand and by another route
