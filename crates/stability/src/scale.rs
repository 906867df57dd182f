//! Sizes of states, for scaled norms.
//!
//! A state's size is its range over the cycle. A state that does not move (a plane of symmetry, a variable at rest)
//! has only roundoff for a range; its size is then what its rate could move it by over a period, `T Sum_b |df_a/dx_b|
//! range_b`, which has the right unit, or, where that is nothing but roundoff, at second
//! order, `T |D^2 f_a[range, range]|`: a state that others move by their squares has no slope where they rest.

use armilla_collocation::Metric;
use armilla_model::{Batch, Direction, Linearisation, VectorField};
use armilla_record::Profile;

/// A range below this share of the size is roundoff, not motion: Newton's method leaves about 1e-13.
pub(crate) const STILL: f64 = 1e-9;
/// The same for a cycle as it comes from elsewhere: a state on its way to zero is still that far from it.
pub(crate) const STILL_AT_FIRST: f64 = 1e-5;

/// A size below this share of the largest is that of a state that died out.
const VANISHED: f64 = 1e-30;

/// What each rate could move its state by over one period, from the ranges of the states it depends on.
/// `typical` are sizes the states have had elsewhere, 0 where unknown: they stand in for a state that has died out.
pub(crate) fn natural_sizes(
    field: &dyn VectorField,
    parameters: &[f64],
    profile: &Profile,
    (typical, still): (&[f64], f64),
) -> Vec<f64> {
    let (n, points) = (profile.n_states, profile.n_nodes());
    // A state that is still but has had a size elsewhere counts with that: it would move others by as much.
    let own = |(range, typical): (f64, &f64)| if range < still * typical { *typical } else { range };
    let ranges: Vec<f64> = ranges(profile).into_iter().zip(typical).map(own).collect();
    let mut states = vec![0.0; n * points];
    for (point, node) in profile.values.chunks_exact(n).enumerate() {
        node.iter().enumerate().for_each(|(a, value)| states[a * points + point] = *value);
    }
    let (mut rates, mut jacobian) = (vec![0.0; n * points], vec![0.0; field.pattern().nnz() * points]);
    let time: Vec<f64> = profile.node_times().iter().map(|share| share * profile.period).collect();
    let batch = Batch { len: points, time: &time, states: &states, parameters };
    let out = Linearisation { rates: &mut rates, jacobian: &mut jacobian, columns: &mut [] };
    let mut evaluator = field.evaluator(&[]);
    evaluator.linearise(batch, out);
    let mut bends = rates;
    let displaced: Vec<f64> = ranges.iter().flat_map(|range| std::iter::repeat_n(*range, points)).collect();
    let direction = Direction { states: &displaced, columns: &[] };
    evaluator.second(batch, direction, direction, &mut bends);
    let finite =
        |values: &[f64]| values.iter().filter(|value| value.is_finite()).fold(0.0f64, |most, x| most.max(x.abs()));
    let mut sizes = vec![0.0; n];
    for ((a, b), values) in field.pattern().entries().zip(jacobian.chunks_exact(points)) {
        let largest = values.iter().fold(0.0f64, |largest, value| largest.max(value.abs()));
        if a != b && largest.is_finite() {
            sizes[a] += profile.period * largest * ranges[b];
        }
    }
    for (size, bends) in sizes.iter_mut().zip(bends.chunks_exact(points)) {
        let second = profile.period * finite(bends);
        if *size < still * second {
            *size = second;
        }
    }
    let largest = ranges.iter().copied().fold(0.0, f64::max);
    for ((size, range), typical) in sizes.iter_mut().zip(&ranges).zip(typical) {
        *size = size.max(*range);
        // Nothing but roundoff moves it: the size it had before, or any at all.
        if *size < still * typical {
            *size = *typical;
        } else if *size < VANISHED * largest {
            *size = 0.0;
        }
    }
    sizes
}

fn ranges(profile: &Profile) -> Vec<f64> {
    profile.extremes().into_iter().map(|(low, high)| high - low).collect()
}

/// The metric of a branch under a forcing, whose cycles need not move: a state that neither moves nor has any size is
/// measured in units, as in an equation that is linear and has no size of its own.
pub(crate) fn metric_under_forcing(profile: &Profile, (sizes, still): (&[f64], f64), parameter_scale: f64) -> Metric {
    let known: Vec<f64> = sizes.iter().map(|size| if *size > 0.0 { *size } else { 1.0 }).collect();
    first_metric(profile, (&known, still), parameter_scale).unwrap_or(Metric {
        scales: known,
        period_scale: profile.period,
        parameter_scale,
    })
}

/// The metric of a branch: ranges of `profile`, or `sizes` for states that do not move. None where nothing moves.
pub(crate) fn first_metric(profile: &Profile, (sizes, still): (&[f64], f64), parameter_scale: f64) -> Option<Metric> {
    let ranges = ranges(profile);
    let largest = ranges.iter().copied().fold(0.0, f64::max);
    let modulus = profile.values.iter().fold(0.0f64, |largest, value| largest.max(value.abs()));
    if !(largest > STILL * 1e-3 * modulus) {
        return None;
    }
    let scale = |(range, size): (&f64, &f64)| match () {
        () if *size > 0.0 => {
            if *range > still * size {
                *range
            } else {
                *size
            }
        }
        // Nothing tells the unit of this state: the largest range stands in.
        () => largest,
    };
    let scales = ranges.iter().zip(sizes).map(scale).collect();
    Some(Metric { scales, period_scale: profile.period, parameter_scale })
}
