//! Periods that grow without bound.
//!
//! Exact. X14: the cycle is the level H = h of an oscillator with a saddle at H = 0, whatever eps; its loop is h = 0 and the
//! period grows like the logarithm of -h. A saddle-node on a loop: on the circle the phase obeys
//! `theta' = k + q - k cos theta + s q sin theta`, q = p - p0, so the period is `2 pi / sqrt((k + q)^2 - k^2 - s^2 q^2)`
//! (elementary integral), infinite at q = 0, and grows like one over the root of q.

use armilla_record::{Branch, EndReason, Event, EventKind};
use armilla_tests::{Random, branch, job, relative};

use crate::words::{check_ratios, value_with_error};

fn limit(branch: &Branch) -> &Event {
    branch.events.iter().find(|event| event.kind == EventKind::PeriodBlowUp).expect("the limit is an event")
}

#[test]
fn towards_a_saddle_loop() {
    let mut random = Random::new(2);
    let mut ratios = Vec::new();
    for case in 0..16 {
        let eps = if case == 0 { 1.0 } else { random.decade(-1.0, 0.6) };
        let (from, to) = (random.between(-0.9, -0.21), random.between(0.01, 2.0));
        let traced = job(
            "x14",
            &format!(
                r#"set: {{"eps": {eps:?}}}, start: Settle(at: {{"h": -0.2}}), follow: (parameter: "h", from: {from:?}, to: {to:?})"#
            ),
        );
        let what = format!("eps {eps}, from {from} to {to}");
        assert!(traced.shortfalls.is_empty(), "{what}: {:?}", traced.shortfalls);
        let a = branch(&traced, "a");
        assert_eq!(a.ends.1.reason, EndReason::PeriodBlowUp, "{what}: {}", a.ends.1.words);
        assert!(a.ends.1.words.ends_with("(as towards a saddle loop, like the logarithm of the distance)"), "{what}");
        // The period at h = -0.2, from the reference values of X14.
        let growth = a.points.last().expect("points").period / 4.630_675_304_149_133;
        assert!(growth > 5.0, "{what}: the period grew by {growth} only");
        let found = limit(a);
        let error = found.error.expect("an error");
        eprintln!("{what}: {:?}, error {error:.1e}", found.value);
        assert!(error < 1e-8, "{what}: {error:e}");
        ratios.push(error / found.value.abs().max(f64::EPSILON * (to - from)));
        let (said, within) = value_with_error(&a.ends.1.words);
        assert!(said.abs() <= within, "{}", a.ends.1.words);
    }
    check_ratios("saddle loop", ratios, 1000.0);
}

#[test]
fn towards_a_saddle_node_on_a_loop() {
    let mut random = Random::new(3);
    let mut ratios = Vec::new();
    for case in 0..16 {
        let (k, s) = if case == 0 { (1.0, 0.0) } else { (random.decade(-0.5, 0.5), random.between(-0.9, 0.9)) };
        let (p0, bend) = (random.between(-2.0, 2.0), random.between(-0.4, 0.4));
        let (from, at, to) = (p0 - random.between(0.1, 1.0), p0 + 1.0, p0 + random.between(1.1, 3.0));
        let traced = job(
            "saddle_node_loop",
            &format!(
                r#"set: {{"k": {k:?}, "s": {s:?}, "p0": {p0:?}, "bend": {bend:?}}}, start: Settle(at: {{"p": {at:?}}}),
                   follow: (parameter: "p", from: {from:?}, to: {to:?})"#
            ),
        );
        let what = format!("k {k}, s {s}, p0 {p0}, bend {bend}, from {from} to {to}");
        assert!(traced.shortfalls.is_empty(), "{what}: {:?}", traced.shortfalls);
        let a = branch(&traced, "a");
        for point in a.points.iter().filter(|point| point.value > p0 + 1e-3) {
            let q = point.value - p0;
            let exact = std::f64::consts::TAU / ((k + q).powi(2) - k * k - (s * q).powi(2)).sqrt();
            relative("period", point.period, exact, 1e-8);
        }
        assert_eq!(a.ends.0.reason, EndReason::PeriodBlowUp, "{what}: {}", a.ends.0.words);
        let law = "(as towards a saddle-node on a loop, like one over the root of the distance)";
        assert!(a.ends.0.words.ends_with(law), "{what}: {}", a.ends.0.words);
        let found = limit(a);
        let (error, off) = (found.error.expect("an error"), (found.value - p0).abs());
        eprintln!("{what}: off {off:.1e}, error {error:.1e}");
        ratios.push(error / off);
        let (said, within) = value_with_error(&a.ends.0.words);
        assert!((said - p0).abs() <= within, "{}", a.ends.0.words);
    }
    check_ratios("saddle-node on a loop", ratios, 1000.0);
}

/// Exact to first order in e: energy is lost and gained alike over the separatrix of the two wells at b = 4/5 (Melnikov
/// 1963, Transactions of the Moscow Mathematical Society 12:1: the integrals are 16/15 and 4/3), and the next order is e^2,
/// since b is even in e (time reversed). So (b - 4/5) / e^2 of two small e agree to their square.
#[test]
fn towards_a_loop_through_weak_damping() {
    let limits = [0.1, 0.3].map(|e: f64| {
        let traced = job(
            "soft_loop",
            &format!(
                r#"set: {{"e": {e:?}}}, start: Settle(at: {{"b": 0.9}}), follow: (parameter: "b", from: 0.5, to: 1.2)"#
            ),
        );
        let a = branch(&traced, "a");
        let ends = [&a.ends.0, &a.ends.1];
        let end =
            ends.iter().find(|end| end.reason == EndReason::PeriodBlowUp).unwrap_or_else(|| panic!("e {e}: {ends:?}"));
        assert!(end.words.ends_with("(as towards a saddle loop, like the logarithm of the distance)"), "{}", end.words);
        let event = a.events.iter().find(|event| event.kind == EventKind::PeriodBlowUp).expect("the limit");
        assert!(event.error.expect("an error") < 1e-9 && event.period_error.is_none(), "{event:?}");
        (event.value - 0.8) / (e * e)
    });
    assert!((limits[0] - limits[1]).abs() < 0.09 * limits[0].abs(), "{limits:?}");
    assert!((0.01..0.02).contains(&limits[0]), "{limits:?}");
}
