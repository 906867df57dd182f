//! Whether a cycle is one of a continuum, as those of conservative models are.
//!
//! The multipliers of a cycle multiply to exp of the integral of the divergence over it (Liouville). Where that
//! integral vanishes no neighbourhood shrinks onto the cycle, so it attracts nothing: a motion that closes has begun
//! on it.

use armilla_record::Profile;

use crate::radau::{RadauTable, STAGES};
use crate::rates::Rates;

/// Integral of the divergence relative to that of its terms without signs below which it is roundoff and error of the
/// orbit, which is good to about 1e-9.
const VANISHES: f64 = 1e-6;

/// Whether volume comes back unchanged after the cycle that begins at `time`.
pub(crate) fn keeps_volume(rates: &mut Rates<'_>, orbit: &Profile, time: f64) -> bool {
    let table = RadauTable::new();
    let mut evaluator = orbit.evaluator();
    let mut point = vec![0.0; orbit.n_states];
    let (mut total, mut gross) = (0.0, 0.0);
    for i in 0..orbit.intervals() {
        let (begin, width) = (orbit.mesh[i], orbit.mesh[i + 1] - orbit.mesh[i]);
        for (c, weight) in table.c.iter().zip(&table.a[STAGES - 1]) {
            evaluator.in_interval(i, *c, &mut point);
            rates.linearise(time + (begin + c * width) * orbit.period, &point);
            for (_, _, value) in rates.entries().filter(|(row, column, _)| row == column) {
                total += width * weight * value;
                gross += width * weight * value.abs();
            }
        }
    }
    // Not so where a derivative is no number.
    total.abs() <= VANISHES * gross
}
