//! Degree and number of intervals overridden: any degree from 3 to 8, and 1, 2 and 4 times the intervals the program takes
//! by itself at that degree. Every result is within its reported error of the truth, and any two within the sum of theirs.

use std::f64::consts::TAU;

use armilla_study::Traced;
use armilla_tests::{Ratios, branch, event, job};

/// A study with one threshold, and one cycle asked for beside it.
struct Run {
    model: &'static str,
    /// All fields of the study but mesh and accuracy.
    fields: &'static str,
    event: &'static str,
    /// Value and period of the event, the period where it is known.
    truth: (f64, Option<f64>),
    /// Period of the cycle at the target, where it is known.
    period_at_target: Option<f64>,
}

/// A number with the error reported with it.
type Reported = (f64, f64);

const DEGREES: std::ops::RangeInclusive<usize> = 3..=8;
const MULTIPLES: [usize; 3] = [1, 2, 4];

fn traced(run: &Run, accuracy: f64, mesh: &str) -> Traced {
    job(run.model, &format!("{}, pursue: (doublings: 0), accuracy: {accuracy:e}, mesh: ({mesh})", run.fields))
}

/// Most intervals a turn of any cycle of the branch: what an override counts in.
fn intervals(traced: &Traced) -> usize {
    branch(traced, "a").points.iter().map(|point| point.intervals.div_ceil(point.turns)).max().expect("points")
}

/// Threshold, its period and the period at the target.
fn results(traced: &Traced, name: &str) -> [Reported; 3] {
    let (threshold, target) = (event(traced, name), event(traced, "a/target1"));
    let with = |value: f64, error: Option<f64>| (value, error.expect("an error"));
    [
        with(threshold.value, threshold.error),
        with(threshold.period, threshold.period_error),
        with(target.period, target.period_error),
    ]
}

const WHAT: [&str; 3] = ["threshold", "its period", "period at the target"];

fn check(run: &Run, accuracy: f64, multiples: &[usize]) {
    let mut found: Vec<(String, [Reported; 3])> = Vec::new();
    for degree in DEGREES {
        let own = intervals(&traced(run, accuracy, &format!("degree: {degree}")));
        for multiple in multiples {
            let given = own * multiple;
            let traced = traced(run, accuracy, &format!("degree: {degree}, intervals: {given}"));
            let points = &branch(&traced, "a").points;
            assert!(points.iter().all(|point| point.degree == degree && point.intervals == given * point.turns));
            found.push((format!("{}, degree {degree}, {given} intervals", run.model), results(&traced, run.event)));
        }
    }
    let mut ratios = Ratios::default();
    let truths = [Some(run.truth.0), run.truth.1, run.period_at_target];
    for (name, results) in &found {
        for ((what, truth), (value, error)) in WHAT.iter().zip(truths).zip(results) {
            if let Some(truth) = truth {
                ratios.add(what, name, ((value - truth).abs(), *error));
            }
        }
    }
    for (at, (name, first)) in found.iter().enumerate() {
        for (other, second) in &found[..at] {
            for (what, (a, b)) in WHAT.iter().zip(first.iter().zip(second)) {
                ratios.add(&format!("{what}, pairs"), &format!("{name} and {other}"), ((a.0 - b.0).abs(), a.1 + b.1));
            }
        }
    }
    eprintln!("{} at accuracy {accuracy:e}:", run.model);
    ratios.check();
}

/// Exact, by hand: X3 doubles at mu = 0, every circle has the period 2 pi/om.
const BAND: Run = Run {
    model: "x3",
    fields: r#"start: Settle(at: {"mu": -0.1}), follow: (parameter: "mu", from: -0.15, to: 0.15), targets: [-0.05]"#,
    event: "a/doubling1",
    truth: (0.0, Some(TAU)),
    period_at_target: Some(TAU),
};

/// Exact, by hand: X2 folds at mu = -1/4, every circle has the period 2 pi.
const CIRCLES: Run = Run {
    model: "x2",
    fields: r#"start: Settle(at: {"mu": -0.1}), follow: (parameter: "mu", from: -0.3, to: -0.05), targets: [-0.15]"#,
    event: "a/fold1",
    truth: (-0.25, Some(TAU)),
    period_at_target: Some(TAU),
};

/// Independent: single shooting with a Taylor integrator in 113-bit arithmetic.
const DOUBLING: Run = Run {
    model: "roessler",
    fields: r#"start: Settle(at: {"c": 2.8}), follow: (parameter: "c", from: 2.75, to: 2.9), targets: [2.8]"#,
    event: "a/doubling1",
    truth: (2.832_445_027_862_539, Some(5.769_820_016_506_563)),
    period_at_target: None,
};

/// Independent, the same source.
const WINDOW: Run = Run {
    model: "roessler",
    fields: r#"start: Settle(at: {"c": 5.25}), follow: (parameter: "c", from: 5.15, to: 5.3), targets: [5.25]"#,
    event: "a/fold1",
    truth: (5.185_085_784_084_437, None),
    period_at_target: None,
};

#[test]
fn of_the_twisted_band() {
    check(&BAND, 1e-8, &MULTIPLES);
    check(&BAND, 1e-12, &[1]);
}

#[test]
fn of_two_circles() {
    check(&CIRCLES, 1e-8, &MULTIPLES);
    check(&CIRCLES, 1e-12, &[1]);
}

#[test]
fn of_the_first_doubling_of_roessler() {
    check(&DOUBLING, 1e-8, &MULTIPLES);
    check(&DOUBLING, 1e-12, &[1]);
}

#[test]
fn of_the_fold_of_the_three_turn_window() {
    check(&WINDOW, 1e-7, &MULTIPLES);
}
