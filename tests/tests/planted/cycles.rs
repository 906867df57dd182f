//! Cycles at random parameter values.

use armilla_tests::{Beneath, Planted, Ratios, Sheet};

use crate::draw::{Draw, band, circle, turning, two_circles};
use crate::judge::{Wanted, judge};

/// Cases of each kind of cycle.
const CASES: u64 = 50;

/// Judges the cycles of one kind: `at` draws the value of the parameter beneath.
fn run(first_seed: u64, sheet: Sheet, draw: impl Fn(u64) -> Draw, at: impl Fn(&mut Draw) -> f64) -> Ratios {
    let mut ratios = Ratios::default();
    for seed in first_seed..first_seed + CASES {
        let mut case = draw(seed);
        let mu = at(&mut case);
        let value = case.planted.value(mu);
        let (mut problem, cycle) = case.start(sheet, value);
        let wanted = Wanted { name: &case.name, planted: &case.planted, sheet };
        judge(&mut problem, &cycle, wanted, &mut ratios);
    }
    ratios
}

#[test]
fn every_number_of_a_cycle_is_within_its_error() {
    let mut ratios = run(1000, Sheet::First, |seed| Draw::new(seed, circle), |case| case.random.between(0.05, 1.0));
    let outer = |seed| Draw::new(seed, two_circles);
    ratios.extend(run(2000, Sheet::First, outer, |case| case.random.between(-0.2, 0.5)));
    ratios.extend(run(3000, Sheet::Inner, outer, |case| case.random.between(-0.2, -0.05)));
    ratios.extend(run(4000, Sheet::First, |seed| Draw::new(seed, band), |case| case.random.either_sign(0.02, 0.3)));
    ratios.extend(run(5000, Sheet::Doubled, |seed| Draw::new(seed, band), |case| case.random.between(0.02, 0.2)));
    ratios.extend(run(6000, Sheet::First, |seed| Draw::new(seed, turning), |case| case.random.either_sign(0.02, 0.2)));
    // U^2 = -l/g: the side of l goes with the sign of g.
    let doubled = |seed| Draw::new(seed, turning);
    let side =
        |planted: &Planted| if matches!(planted.beneath, Beneath::Turning(g, _) if g > 0.0) { -1.0 } else { 1.0 };
    ratios.extend(run(7000, Sheet::Doubled, doubled, |case| side(&case.planted) * case.random.between(0.02, 0.07)));
    ratios.check();
}
