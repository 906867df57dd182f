//! One found cycle against the exact one.

use std::f64::consts::PI;

use armilla_record::{Point, Profile};
use armilla_stability::{CyclePoint, CycleProblem};
use armilla_tests::{Planted, Ratios, Sheet};

/// The exact cycle that a found one should be.
#[derive(Clone, Copy)]
pub struct Wanted<'a> {
    pub name: &'a str,
    pub planted: &'a Planted,
    pub sheet: Sheet,
}

/// Period, profile, multipliers and verdict of a cycle.
pub fn judge(problem: &mut CycleProblem, cycle: &CyclePoint, wanted: Wanted<'_>, ratios: &mut Ratios) {
    let turns = if wanted.sheet == Sheet::Doubled { 2 } else { 1 };
    let point = problem.describe(cycle, turns, 0.0).unwrap_or_else(|fault| panic!("{}: {fault}", wanted.name));
    let exact = wanted.planted.exact(wanted.sheet, point.value);
    let (fine, error) = problem.refine(cycle).unwrap_or_else(|_| panic!("{}: not refined", wanted.name));
    ratios.add("period", wanted.name, ((fine.unknowns.period - exact.period).abs(), error));
    let sizes = problem.metric().scales.clone();
    let distance = profile_distance(&problem.profile(cycle), wanted, (point.value, &sizes));
    let name = format!("{} N={}", wanted.name, point.intervals);
    ratios.add("profile", &name, (distance, point.profile_error));
    multipliers(&point, &exact.multipliers, (wanted.name, problem.settings().mesh.accuracy), ratios);
}

/// Every multiplier, its sign, and the unstable count.
///
/// What is claimed of multipliers: Liouville's formula holds to `liouville_defect`, the trivial one to `trivial_defect`,
/// and they are computed to the accuracy relative to the sum of all |log mu|, unless the cycle they are taken along has a
/// larger error. The audits alone would not do: errors of two multipliers that cancel in their sum escape Liouville.
fn multipliers(point: &Point, exact: &[(f64, bool)], (name, accuracy): (&str, f64), ratios: &mut Ratios) {
    assert!(point.unresolved.is_none(), "{name}: {:?}", point.unresolved);
    assert_eq!(point.multipliers.len(), exact.len(), "{name}");
    let size: f64 = exact.iter().map(|(log, _)| log.abs()).sum();
    let claimed = point.liouville_defect + point.trivial_defect + accuracy.max(point.profile_error) * size.max(1.0);
    for (found, (log, negative)) in point.multipliers.iter().zip(exact) {
        ratios.add("multiplier", name, ((found.log_modulus - log).abs(), claimed));
        // Two of nearly equal modulus may come as a pair.
        let angle = if *negative { PI } else { 0.0 };
        assert_eq!(found.angle, angle, "{name}: {:?} for {exact:?}", point.multipliers);
    }
    if exact.iter().all(|(log, _)| log.abs() > claimed) {
        let unstable = exact.iter().filter(|(log, _)| *log > 0.0).count();
        assert_eq!(point.unstable_count, unstable, "{name}: {:?}", point.multipliers);
    }
}

/// Largest distance of a profile from the exact cycle, relative to the range of each state, or to a thousandth of its size
/// where it moves less: that is how errors of profiles are meant. Where time begins is free.
fn profile_distance(profile: &Profile, wanted: Wanted<'_>, (value, sizes): (f64, &[f64])) -> f64 {
    const LEAST_RANGE: f64 = 1e-3;
    let Wanted { planted, sheet, .. } = wanted;
    let ranges = planted.ranges(sheet, value).into_iter().zip(sizes);
    let ranges: Vec<f64> = ranges.map(|(range, size)| range.max(LEAST_RANGE * size)).collect();
    let samples = 16 * profile.intervals();
    let mut evaluator = profile.evaluator();
    let mut found = vec![0.0; profile.n_states];
    let mut compare = |shift: f64, samples: usize, see: &mut dyn FnMut(f64, f64)| {
        for k in 0..samples {
            let time = (k as f64 + 0.37) / samples as f64;
            evaluator.at(time, &mut found);
            let (state, velocity) = planted.orbit(sheet, value, time + shift);
            for a in 0..found.len() {
                see((found[a] - state[a]) / ranges[a], velocity[a] / ranges[a]);
            }
        }
    };
    // The best of many shifts, then least squares.
    const SHIFTS: usize = 128;
    let mut square_at = |shift: f64| {
        let mut sum = 0.0;
        compare(shift, 64, &mut |difference, _| sum += difference * difference);
        sum
    };
    let shifts = (0..SHIFTS).map(|k| k as f64 / SHIFTS as f64).map(|shift| (shift, square_at(shift)));
    let mut shift = shifts.min_by(|a, b| a.1.total_cmp(&b.1)).expect("many").0;
    for _ in 0..8 {
        let (mut product, mut square) = (0.0, 0.0);
        compare(shift, samples, &mut |difference, velocity| {
            product += difference * velocity;
            square += velocity * velocity;
        });
        shift += product / square;
    }
    let mut largest = 0.0f64;
    compare(shift, samples, &mut |difference, _| largest = largest.max(difference.abs()));
    largest
}
