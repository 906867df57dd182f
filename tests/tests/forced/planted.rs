//! Planted cycles under a forcing, with exact multipliers, thresholds and normal forms.

use std::f64::consts::{PI, TAU};

use armilla_record::{Criticality, EventKind};
use armilla_study::Traced;
use armilla_tests::{absolute, branch, event, job, multiplier, relative};

fn band(g: f64, (b, d): (f64, f64), range: (f64, f64)) -> Traced {
    let (from, to) = range;
    job(
        "forced_band",
        &format!(
            r#"set: {{"g": {g:?}, "b": {b:?}, "d": {d:?}}}, start: Settle(at: {{"l": -0.1}}),
               follow: (parameter: "l", from: {from}, to: {to}), accuracy: 1e-10, pursue: (doublings: 1)"#
        ),
    )
}

/// Exact, by hand in the plane that turns by half a turn a period: circle U = V = 0, period P = 2 pi/omega, multipliers -exp(l P),
/// -exp(-P), exp(-P); doubling at l = 0; doubled cycle U^2 = -l/g of period 2 P, multipliers exp(-4 l P), exp(-2 P) twice. Its
/// normal form has `Int <v, v> dt = 1`, v of constant length, so c = g/P; and no shift in time.
#[test]
fn a_band_doubles() {
    let period = TAU / 1.7;
    let traced = band(-0.8, (0.0, 0.0), (-0.2, 0.2));
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    for point in &branch(&traced, "a").points {
        multiplier("first", point.multipliers[0], (point.value * period, true), 1e-9);
        for mu in &point.multipliers[1..] {
            absolute("others", mu.log_modulus, -period, 1e-9);
        }
        relative("period", point.period, period, 1e-15);
        absolute("cosine", point.maxima[0], 1.0, 2e-10);
        assert_eq!(point.unstable_count, usize::from(point.value > 0.0), "at {}", point.value);
    }
    let doubling = event(&traced, "a/doubling1");
    absolute("doubling", doubling.value, 0.0, 1e-11);
    assert!(doubling.value.abs() <= doubling.error.expect("an error"), "{doubling:?}");
    assert_eq!(doubling.criticality, Some(Criticality::Supercritical));
    relative("c", coefficient(&doubling.note), -0.8 / period, 1e-6);
    let doubled = branch(&traced, "a.doubling1");
    assert!(doubled.points.len() > 5);
    for point in doubled.points.iter().skip(1) {
        relative("doubled period", point.period, 2.0 * period, 1e-15);
        multiplier("doubled", point.multipliers[0], (-4.0 * point.value * period, false), 1e-8);
        assert_eq!((point.turns, point.unstable_count, point.multipliers.len()), (2, 0, 3));
    }
    // Born the other way round, and unstable.
    let traced = band(0.8, (0.0, 0.0), (-0.2, 0.2));
    assert_eq!(event(&traced, "a/doubling1").criticality, Some(Criticality::Subcritical));
    for point in branch(&traced, "a.doubling1").points.iter().skip(1) {
        assert!(point.value < 0.0);
        multiplier("doubled", point.multipliers[0], (-4.0 * point.value * period, false), 1e-8);
    }
}

/// Exact: with w' = -w + d (1 + cos omega t) U^2 and b (1 + cos omega t) U w in U' the cubic coefficient gains the mean of
/// b (1 + cos) times the periodic answer d (1 + (cos + omega sin)/(1 + omega^2)) of w:
/// `c = (g + b d (1 + 1/(2 (1 + omega^2)))) / P`. It is negative with g alone and positive with the rest.
#[test]
fn second_order_motion_enters_the_normal_form() {
    let (period, omega) = (TAU / 1.7, 1.7f64);
    let traced = band(-0.8, (0.9, 1.1), (-0.2, 0.1));
    let doubling = event(&traced, "a/doubling1");
    let c = (-0.8 + 0.9 * 1.1 * (1.0 + 0.5 / (1.0 + omega * omega))) / period;
    assert!(c > 0.0);
    relative("c", coefficient(&doubling.note), c, 1e-6);
    assert_eq!(doubling.criticality, Some(Criticality::Subcritical));
    assert!(branch(&traced, "a.doubling1").points.iter().skip(1).all(|point| point.value < 0.0));
}

/// The number in a note, six digits behind the point.
fn coefficient(note: &str) -> f64 {
    let number = note.rsplit(' ').next().expect("a word");
    number.parse().unwrap_or_else(|_| panic!("no coefficient in `{note}`"))
}

/// Exact: q' = mu - q^2 under a forcing of frequency 1 + mu, the parameter followed: cycles q = ±sqrt(mu), multiplier
/// exp(-2 q P); fold at mu = 0, where v is constant and `Int <v, v> dt = 1`: b = -1/sqrt(2 pi) along a rising parameter's
/// push. (The second state takes part in v: y = q (cos t + sin t)/2 answers q cos t, so `<v, v>` has the mean 1 + 1/4.)
#[test]
fn a_fold_where_the_forcing_depends_on_the_parameter() {
    let traced = job(
        "forced_fold",
        r#"start: Settle(at: {"mu": 0.3}), follow: (parameter: "mu", from: -0.5, to: 0.5), accuracy: 1e-10"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let fold = event(&traced, "a/fold1");
    absolute("fold", fold.value, 0.0, 1e-11);
    assert!(fold.value.abs() <= fold.error.expect("an error"), "{fold:?}");
    absolute("period", fold.period, TAU, 1e-10);
    assert!((fold.period - TAU).abs() <= fold.period_error.expect("an error"), "{fold:?}");
    relative("b", coefficient(&fold.note), -1.0 / (1.25 * TAU).sqrt(), 1e-6);
    let a = branch(&traced, "a");
    for point in &a.points {
        let period = TAU / (1.0 + point.value);
        relative("period", point.period, period, 1e-15);
        let q = if point.unstable_count == 0 { point.value.max(0.0).sqrt() } else { -point.value.max(0.0).sqrt() };
        absolute("mean", point.means[0], q, 1e-9);
        let exact = [-2.0 * q * period, -period];
        let exact = if exact[0] > exact[1] { exact } else { [exact[1], exact[0]] };
        for (mu, exact) in point.multipliers.iter().zip(exact) {
            absolute("multiplier", mu.log_modulus, exact, 1e-8);
        }
    }
}

/// Exact: around the cycle (cos t, sin 2t) disturbances grow at l and turn at w = 0.3: multipliers exp(2 pi (l ± i w)), a
/// torus point at l = 0 with the angle 0.6 pi.
#[test]
fn a_torus_point() {
    let traced = job(
        "forced_ring",
        r#"start: Settle(at: {"l": -0.1}), follow: (parameter: "l", from: -0.2, to: 0.2), accuracy: 1e-10"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let torus = event(&traced, "a/torus1");
    assert_eq!(torus.kind, EventKind::Torus);
    absolute("torus point", torus.value, 0.0, 1e-10);
    assert!(torus.value.abs() <= torus.error.expect("an error"), "{torus:?}");
    absolute("angle", torus.angle.expect("an angle"), 0.6 * PI, 1e-8);
    for point in &branch(&traced, "a").points {
        for mu in &point.multipliers {
            absolute("log-modulus", mu.log_modulus, TAU * point.value, 1e-9);
            absolute("angle", mu.angle.abs(), 0.6 * PI, 1e-9);
        }
    }
}
