//! Numbers computed independently of this program, or published.

mod roessler; // period, multipliers, three doublings, the three-turn window
mod van_der_pol; // period, amplitude and multiplier from nearly harmonic to relaxation
