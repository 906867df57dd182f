//! Slopes by central differences, extrapolated to step 0. For checks only; nothing that is computed
//! for the user comes from here.

/// First step, in units of the direction: a change of every number by a fiftieth of its size.
const FIRST_STEP: f64 = 0.02;

/// Factor from one step to the next.
const SHRINK: f64 = 2.0;

/// Steps in the table: the last one is 2^-6 of the first, and the error falls like a power that grows
/// by two with each.
const STEPS: usize = 7;

/// A slope with an estimate of its error.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Estimate {
    pub value: f64,
    pub error: f64,
}

/// Slopes at 0 of all components of a function of one number.
pub(crate) fn slope_at_zero(mut function: impl FnMut(f64) -> Vec<f64>) -> Vec<Estimate> {
    let mut best: Vec<Estimate> = Vec::new();
    let mut last: Vec<Vec<f64>> = Vec::new();
    let mut step = FIRST_STEP;
    for row in 0..STEPS {
        let (above, below) = (function(step), function(-step));
        let central = above.iter().zip(&below).map(|(a, b)| (a - b) / (2.0 * step)).collect();
        let mut table: Vec<Vec<f64>> = vec![central];
        let mut factor = SHRINK * SHRINK;
        for order in 0..row {
            let finer = &table[order];
            let next = finer.iter().zip(&last[order]).map(|(f, c)| (f * factor - c) / (factor - 1.0));
            table.push(next.collect());
            factor *= SHRINK * SHRINK;
        }
        best.resize(above.len(), Estimate { value: f64::NAN, error: f64::INFINITY });
        for order in 1..=row {
            for (at, estimate) in best.iter_mut().enumerate() {
                let value = table[order][at];
                let error = (value - table[order - 1][at]).abs().max((value - last[order - 1][at]).abs());
                if error < estimate.error {
                    *estimate = Estimate { value, error };
                }
            }
        }
        last = table;
        step /= SHRINK;
    }
    best
}

#[cfg(test)]
mod tests {
    use super::slope_at_zero;

    #[test]
    fn smooth_slopes_converge_and_kinks_do_not() {
        let slopes = slope_at_zero(|x| vec![(1.0 + x).exp(), (x - 1e-3).abs(), 3.0]);
        // By hand: e; -1 with a corner inside of the first steps; 0.
        assert!((slopes[0].value - 1.0_f64.exp()).abs() < 1e-12);
        assert!(slopes[1].error > 1e-3 || (slopes[1].value + 1.0).abs() < 1e-9);
        assert_eq!(slopes[2].value, 0.0);
    }
}
