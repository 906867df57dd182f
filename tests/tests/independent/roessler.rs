//! Roessler's band `x' = -y - z, y' = x + a y, z' = b + z (x - c)`, a = b = 0.2 (Roessler 1976, Phys. Lett. A 57:397).
//!
//! Source of all numbers: independent, single shooting with a high-order Taylor integrator in 113-bit arithmetic and
//! Newton's method on the extended system, two settings agreeing on the digits shown.

use std::f64::consts::PI;

use armilla_record::{Event, Multiplier, Point};
use armilla_study::Traced;
use armilla_tests::{Case, branch, event, job, relative, settings, station};

/// A threshold within `tolerance` relative to max(|value|, width of the asked range), its error covering the truth.
#[track_caller]
fn threshold(traced: &Traced, name: &str, wanted: f64, tolerance: f64) -> Event {
    let found = event(traced, name);
    relative(name, found.value, wanted, tolerance);
    let error = found.error.expect("an error");
    assert!((found.value - wanted).abs() <= error, "{name}: the error {error:e} must cover {:e}", found.value - wanted);
    found.clone()
}

#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn from_the_first_cycle_to_the_third_doubling() {
    let traced = job(
        "roessler",
        r#"start: Settle(at: {"c": 1.0}), follow: (parameter: "c", from: 1.0, to: 4.2), accuracy: 1e-9, pursue: (doublings: 2)"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let a = branch(&traced, "a");
    let first = &a.points[0];
    assert_eq!(first.value, 1.0);
    relative("period at c = 1", first.period, 5.541_660_322_289_143_062_697_90, 1e-10);
    let [slow, fast] = first.multipliers[..] else { panic!("two multipliers: {first:?}") };
    relative("first multiplier at c = 1", slow.log_modulus.exp(), 0.529_947_814_468_149_377_729_474_8, 1e-10);
    relative("second multiplier at c = 1", fast.log_modulus.exp(), 0.039_400_073_394_892_072_402_16, 1e-10);
    assert_eq!((slow.angle, fast.angle), (0.0, 0.0));

    let one = threshold(&traced, "a/doubling1", 2.832_445_027_862_538_913_673_846, 1e-9);
    relative("period at the first doubling", one.period, 5.769_820_016_506_563_190_538_408, 1e-9);
    assert_eq!((one.angle, one.turns), (Some(PI), 1));
    let two = threshold(&traced, "a.doubling1/doubling1", 3.837_358_168_410_093_765_696_702, 1e-9);
    let three = threshold(&traced, "a.doubling1.doubling1/doubling1", 4.124_214_732_075_501_691_678_446, 1e-9);
    assert_eq!((two.turns, three.turns), (2, 4));
    for (name, found, wanted) in [
        ("a/doubling1", &one, 2.832_445_027_862_538_913_673_846),
        ("a.doubling1/doubling1", &two, 3.837_358_168_410_093_765_696_702),
        ("a.doubling1.doubling1/doubling1", &three, 4.124_214_732_075_501_691_678_446),
    ] {
        // Far better than asked is what superconvergence gives: thresholds converge twice as fast as profiles.
        relative(&format!("{name}, as the method should"), found.value, wanted, 1e-11);
    }
}

/// 0: both multipliers positive, 1: a complex pair, 2: both negative.
fn kind(multipliers: &[Multiplier]) -> usize {
    let [first, second] = multipliers else { panic!("two multipliers: {multipliers:?}") };
    match (first.angle, second.angle) {
        (0.0, 0.0) => 0,
        (PI, PI) => 2,
        (a, b) => {
            assert!(a == -b && a.abs() > 0.0 && a.abs() < PI, "neither real nor a pair: {multipliers:?}");
            assert_eq!(first.log_modulus, second.log_modulus, "a pair has one modulus");
            1
        }
    }
}

/// Liouville by hand: the divergence is a + x - c, so its integral needs only the mean of x. To what the study asks, 1e-9.
fn check_liouville(point: &Point) {
    let sum: f64 = point.multipliers.iter().map(|multiplier| multiplier.log_modulus).sum();
    relative(
        &format!("sum of log multipliers at c = {}", point.value),
        sum,
        point.period * (0.2 + point.means[0] - point.value),
        1e-9,
    );
}

/// On the way to a doubling the real multipliers meet, become a complex pair, meet again on the negative axis, and one goes
/// to -1. On the first branch the pair lives over a third of the way.
#[test]
fn a_real_pair_turns_complex_and_real_again_before_the_first_doubling() {
    let traced = job(
        "roessler",
        r#"start: Settle(at: {"c": 1.0}), follow: (parameter: "c", from: 0.8, to: 3.0), pursue: (doublings: 0)"#,
    );
    let a = branch(&traced, "a");
    let doubling = event(&traced, "a/doubling1").value;
    let kinds: Vec<usize> = a.points.iter().map(|point| kind(&point.multipliers)).collect();
    assert!(kinds.is_sorted(), "{kinds:?}");
    assert!((0..3).all(|kind| kinds.iter().filter(|k| **k == kind).count() >= 2), "{kinds:?}");
    for point in &a.points {
        check_liouville(point);
        assert_eq!(point.unstable_count, usize::from(point.value > doubling), "{point:?}");
    }
}

/// Between the first and the second doubling the product of the multipliers is about exp(-33), so the pair lives on an
/// interval of c no wider than about 1e-7: bisection finds it, and finds it regular.
#[test]
fn the_pair_of_the_doubled_cycle_is_found_by_bisection() {
    let case = Case::new("roessler", "c", 1.0);
    let (mut problem, cycle) = case.start(&case.settled(3.4), settings(1e-9), 3.4);
    let mut at = |value: f64| {
        let station = station(&mut problem, &cycle, value, None);
        problem.describe(&station.point, 2, 0.0).expect("multipliers")
    };
    let (mut low, mut high) = (3.2, 3.7);
    assert_eq!((kind(&at(low).multipliers), kind(&at(high).multipliers)), (0, 2));
    for _ in 0..60 {
        let point = at(0.5 * (low + high));
        check_liouville(&point);
        match kind(&point.multipliers) {
            0 => low = point.value,
            2 => high = point.value,
            _ => {
                let half = 0.5 * point.period * (0.2 + point.means[0] - point.value);
                relative("modulus of the pair", point.multipliers[0].log_modulus, half, 1e-9);
                eprintln!("pair at c = {} in a bracket of {:.0e}: {:?}", point.value, high - low, point.multipliers);
                return;
            }
        }
    }
    panic!("no pair between {low} and {high}");
}

#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn three_turn_window_settled_inside() {
    let traced = job(
        "roessler",
        r#"start: Settle(at: {"c": 5.25}), follow: (parameter: "c", from: 5.1, to: 5.45), accuracy: 1e-9, pursue: (doublings: 0)"#,
    );
    assert_eq!(event(&traced, "a/start1").turns, 3);
    threshold(&traced, "a/fold1", 5.185_085_784_084_436_575_567_018, 1e-9);
    let doubling = threshold(&traced, "a/doubling1", 5.379_419_820_792_818_286_172_024, 1e-9);
    relative("period at the doubling", doubling.period, 17.452_437_630_153_145_92, 1e-9);
    assert_eq!(doubling.turns, 3);
    // Stable exactly between the two.
    for point in &branch(&traced, "a").points {
        let between = point.value > event(&traced, "a/fold1").value && point.value < doubling.value;
        assert!(!point.is_stable() || between, "{point:?}");
    }
}

/// Asked for 1e-12 the thresholds have it.
#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn thresholds_to_twelve_digits() {
    let cascade = job(
        "roessler",
        r#"start: Settle(at: {"c": 2.5}), follow: (parameter: "c", from: 2.5, to: 4.2), accuracy: 1e-12, pursue: (doublings: 2)"#,
    );
    let one = threshold(&cascade, "a/doubling1", 2.832_445_027_862_538_913_673_846, 1e-12);
    relative("period at the first doubling", one.period, 5.769_820_016_506_563_190_538_408, 1e-12);
    threshold(&cascade, "a.doubling1/doubling1", 3.837_358_168_410_093_765_696_702, 1e-12);
    threshold(&cascade, "a.doubling1.doubling1/doubling1", 4.124_214_732_075_501_691_678_446, 1e-12);
    let window = job(
        "roessler",
        r#"start: Settle(at: {"c": 5.25}), follow: (parameter: "c", from: 5.1, to: 5.45), accuracy: 1e-12, pursue: (doublings: 0)"#,
    );
    threshold(&window, "a/fold1", 5.185_085_784_084_436_575_567_018, 1e-12);
    let doubling = threshold(&window, "a/doubling1", 5.379_419_820_792_818_286_172_024, 1e-12);
    relative("period at the doubling", doubling.period, 17.452_437_630_153_145_92, 1e-12);
}
