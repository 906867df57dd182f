//! Numbers computed independently of this program, or published.

mod brusselator; // periods and a multiplier
mod canard; // through the explosion
mod cell_cycle; // period and both births
mod lorenz; // the window near r = 100, the shortest cycles of the attractor
mod membrane; // spikes through their fold onto the unstable branch
mod roessler; // period, multipliers, three doublings, the three-turn window
mod van_der_pol; // period, amplitude and multiplier from nearly harmonic to relaxation
