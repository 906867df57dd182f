//! Samples of motions under a forcing: `t` is the time of the forcing.

use std::f64::consts::TAU;

use armilla_record::EventKind;
use armilla_tests::{Motion, branch, relative, sampled_job};

/// The hardening spring of `models/duffing` at omega = 1.4, where two stable answers are there: the samples tell which is
/// meant. Exact: the period is that of the forcing. Amplitudes: the settled run's own.
#[test]
fn the_answer_that_was_measured() {
    let omega = 1.4;
    let rates = |t: f64, x: &[f64], out: &mut [f64]| {
        out[0] = x[1];
        out[1] = -0.1 * x[1] - x[0] - 0.04 * x[0].powi(3) + (omega * t).cos();
    };
    let motion = Motion { rates: &rates, steps: 300.0 };
    for (start, count, noise) in [([0.0, 0.0], 100, 0.02), ([5.0, 3.0], 100, 0.02), ([5.0, 3.0], 400, 0.03)] {
        // A whole number of forcing periods, so that times may begin anew.
        let settled = motion.state_after(&start, 0.0, 80.0 * TAU / omega);
        let span = if count > 200 { 17.0 } else { TAU / omega };
        let table = motion.table(&["x", "y"], &settled, (0.0, span, count), 0.0);
        let largest =
            table.lines().skip(1).filter_map(|line| line.split(',').nth(1)?.parse::<f64>().ok()).fold(0.0, f64::max);
        // From the middle of a period on, told by `t` alone.
        let later = motion.state_after(&settled, 0.0, 1.1);
        let table = motion.table(&["x", "y"], &later, (1.1, span, count), noise);
        let traced = sampled_job(
            "duffing",
            &table,
            &format!(
                r#"set: {{"omega": {omega}}}, start: Samples(file: "cycle.csv"), accuracy: 1e-9,
                   follow: (parameter: "omega", from: 1.35, to: 1.45)"#
            ),
        )
        .unwrap_or_else(|fault| panic!("from {start:?}, noise {noise}: {fault}"));
        let at = branch(&traced, "a").points.iter().find(|point| point.value == omega).expect("the start");
        relative("period", at.period, TAU / omega, 1e-15);
        assert_eq!(at.turns, 1);
        // Even samples miss the crest by (pi/count)^2/2 of it at most.
        relative("amplitude", at.maxima[0], largest, 2e-3);
        assert_eq!(at.unstable_count, 0);
    }
}

/// The planted band beyond its doubling: two forcing periods, found from the samples. Exact: l = 0.15, U^2 = l, period
/// 4 pi/omega, leading multiplier exp(-4 l P).
#[test]
fn two_forcing_periods_are_found() {
    let (l, omega) = (0.15f64, 1.7);
    let rates = |t: f64, x: &[f64], out: &mut [f64]| {
        let (sine, cosine) = (0.5 * omega * t).sin_cos();
        let (u, v) = (x[0] - (omega * t).cos(), x[1] - 0.5 * (omega * t).sin());
        let (big_u, big_v) = (cosine * u + sine * v, cosine * v - sine * u);
        let rate = l * big_u - big_u.powi(3);
        out[0] = cosine * rate + sine * big_v - 0.5 * omega * v - omega * (omega * t).sin();
        out[1] = sine * rate - cosine * big_v + 0.5 * omega * u + 0.5 * omega * (omega * t).cos();
        out[2] = -x[2];
    };
    let motion = Motion { rates: &rates, steps: 300.0 };
    let period = TAU / omega;
    let settled = motion.state_after(&[1.3, 0.0, 0.0], 0.0, 60.0 * period);
    for (stated, span) in [("", 2.0), ("", 5.0), (", period: 7.4", 2.0)] {
        let table = motion.table(&["x", "y", "w"], &settled, (0.0, span * period, 300), 0.01);
        let traced = sampled_job(
            "forced_band",
            &table,
            &format!(
                r#"set: {{"l": {l}}}, start: Samples(file: "cycle.csv"{stated}), accuracy: 1e-9,
                   follow: (parameter: "l", from: 0.1, to: 0.2)"#
            ),
        )
        .unwrap_or_else(|fault| panic!("{stated} {span}: {fault}"));
        let at = branch(&traced, "a").points.iter().find(|point| point.value == l).expect("the start");
        relative("period", at.period, 2.0 * period, 1e-15);
        assert_eq!(at.turns, 2);
        relative("multiplier", at.multipliers[0].log_modulus, -4.0 * l * period, 1e-8);
    }
    // A stated period that is none of the forcing, and samples of less than one.
    for (stated, span, words) in
        [(", period: 5.5", 2.0, "no whole number of forcing periods"), ("", 0.6, "less than one forcing period")]
    {
        let table = motion.table(&["x", "y", "w"], &settled, (0.0, span * period, 300), 0.0);
        let fields = format!(
            r#"set: {{"l": {l}}}, start: Samples(file: "cycle.csv"{stated}), follow: (parameter: "l", from: 0.1, to: 0.2)"#
        );
        let fault = sampled_job("forced_band", &table, &fields).expect_err("a refusal").to_string();
        assert!(fault.contains(words) && fault.contains("help:"), "{fault}");
    }
}

/// Exact: without damping the divergence is 0, so the two multipliers of every cycle have the product 1. As a pair they lie on
/// the unit circle, where they pass nothing. Samples from one harmonic, `(1 - omega^2) A + 3/4 A^3 = F`.
#[test]
fn a_pair_that_stays_on_the_circle_is_no_torus_point() {
    let (omega, drive): (f64, f64) = (1.4, 0.1);
    let amplitude = (0..50).fold(0.0f64, |a, _| (drive - 0.75 * a.powi(3)) / (1.0 - omega * omega));
    let mut table = String::from("t,x,v\n");
    for k in 0..60 {
        let t = TAU / omega * f64::from(k) / 60.0;
        let (sine, cosine) = (omega * t).sin_cos();
        table.push_str(&format!("{t},{},{}\n", amplitude * cosine, -omega * amplitude * sine));
    }
    let fields = r#"start: Samples(file: "cycle.csv"), follow: (parameter: "F", from: 0.01, to: 1.0)"#;
    let traced = sampled_job("undamped", &table, fields).unwrap_or_else(|fault| panic!("{fault}"));
    let a = branch(&traced, "a");
    let kinds: Vec<EventKind> = a.events.iter().map(|event| event.kind).filter(|kind| kind.is_threshold()).collect();
    assert_eq!(kinds, [EventKind::Fold], "{:?}", a.events.iter().map(|event| &event.name).collect::<Vec<_>>());
    let start = a.events.iter().find(|event| event.kind == EventKind::Start).expect("a start");
    assert!(start.note.contains("conservative"), "{}", start.note);
    for point in &a.points {
        let sum: f64 = point.multipliers.iter().map(|mu| mu.log_modulus).sum();
        assert!(sum.abs() < 1e-9, "{sum:e} at {}", point.value);
    }
}
