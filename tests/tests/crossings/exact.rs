//! X12 and X13, `x' = x (1 - r2) - om y`, `y' = y (1 - r2) + om x`, `z' = z (mu + a x) - q z^2 - c z^3`.
//!
//! Exact, by hand: r = 1, T = 2 pi/om; along a cycle `(log z)'` has mean 0 and so has x. Cycle z = 0: multipliers exp(-2 T)
//! and exp(mu T), crossed at mu = 0. q = 1, c = 0 (X12): the other has exp(-mu T), for every mu. q = 0, c = 1 (X13): a pair
//! for mu > 0 with exp(-2 mu T), supercritical. With a = 0 z is constant: `mu = q z + c z^2`, a fold at -q^2/(4 c).

use std::f64::consts::TAU;

use armilla_record::{Branch, Criticality, EndReason, Event, EventKind};
use armilla_study::Traced;
use armilla_tests::{absolute, branch, event, job, multiplier};

const PERIOD: f64 = TAU / 1.5;

/// The crossing at mu = 0, to roundoff and within its error.
fn at_zero(event: &Event, kind: EventKind) {
    assert_eq!((event.kind, event.angle), (kind, Some(0.0)), "{event:?}");
    absolute("crossing", event.value, 0.0, 1e-12);
    assert!(event.value.abs() <= event.error.expect("an error"), "{event:?}");
    absolute("period", event.period, PERIOD, 1e-12);
    assert!((event.period - PERIOD).abs() <= event.period_error.expect("an error"), "{event:?}");
}

/// The multiplier across z, `exp(growth mu T)`, at every point but the crossing itself.
fn check(branch: &Branch, growth: f64) {
    assert!(branch.points.len() > 10, "{}", branch.points.len());
    for point in branch.points.iter().filter(|point| point.value.abs() > 1e-9) {
        let across = growth * point.value * PERIOD;
        multiplier(&format!("across z at {}", point.value), point.multipliers[0], (across, false), 1e-9);
        assert_eq!(point.unstable_count, usize::from(across > 0.0), "at {}", point.value);
    }
}

fn ends(branch: &Branch) -> [f64; 2] {
    [branch.ends.0.value, branch.ends.1.value]
}

fn names(traced: &Traced) -> Vec<&str> {
    traced.branches.iter().map(|branch| branch.name.as_str()).collect()
}

const FOLLOW: &str = r#"follow: (parameter: "mu", from: -0.3, to: 0.5)"#;

#[test]
fn transcritical_is_crossed_both_ways() {
    for (model, at) in [("x12", 0.2), ("x12", -0.2), ("bent_crossing", 0.2), ("bent_crossing", -0.2)] {
        let traced = job(model, &format!(r#"start: Settle(at: {{"mu": {at}}}), {FOLLOW}"#));
        assert!(traced.shortfalls.is_empty(), "{model}: {:?}", traced.shortfalls);
        assert_eq!(names(&traced), ["a", "a.transcritical1"], "{model}");
        at_zero(event(&traced, "a/transcritical1"), EventKind::Transcritical);
        assert_eq!(branch(&traced, "a.transcritical1").born_at.as_deref(), Some("a/transcritical1"));
        // It settles on the stable one of the two: z = 0 for mu < 0.
        let (first, other) = if at < 0.0 { (1.0, -1.0) } else { (-1.0, 1.0) };
        check(branch(&traced, "a"), first);
        check(branch(&traced, "a.transcritical1"), other);
        for branch in &traced.branches {
            assert_eq!(ends(branch), [-0.3, 0.5], "{model}: {}", branch.name);
        }
    }
}

/// From the cycle that is symmetric under z -> -z: one of the pair, since the other is its mirror image.
#[test]
fn pitchfork_from_the_symmetric_cycle() {
    let traced = job("x13", &format!(r#"start: Settle(at: {{"mu": -0.2}}), {FOLLOW}"#));
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    assert_eq!(names(&traced), ["a", "a.pitchfork1"]);
    let pitchfork = event(&traced, "a/pitchfork1");
    at_zero(pitchfork, EventKind::Pitchfork);
    assert_eq!(pitchfork.criticality, Some(Criticality::Supercritical));
    assert_eq!(pitchfork.note, "breaks the symmetry z -> -z");
    check(branch(&traced, "a"), 1.0);
    let pair = branch(&traced, "a.pitchfork1");
    check(pair, -2.0);
    for point in &pair.points {
        // By hand: the mean of z^2 is mu.
        absolute("mean of z^2", point.spreads[2].powi(2) + point.means[2].powi(2), point.value, 1e-9);
    }
    assert_eq!(pair.ends.0.reason, EndReason::ReturnsToParent);
    assert_eq!(ends(pair), [pitchfork.value, 0.5]);
}

/// From one of the pair: it ends there, and the symmetric cycle is followed both ways.
#[test]
fn pitchfork_from_its_side() {
    let traced = job("x13", &format!(r#"start: Settle(at: {{"mu": 0.2}}), {FOLLOW}"#));
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    assert_eq!(names(&traced), ["a", "a.pitchfork1"]);
    let pitchfork = event(&traced, "a/pitchfork1");
    at_zero(pitchfork, EventKind::Pitchfork);
    assert_eq!(pitchfork.criticality, Some(Criticality::Supercritical));
    check(branch(&traced, "a"), -2.0);
    check(branch(&traced, "a.pitchfork1"), 1.0);
    assert_eq!(ends(branch(&traced, "a.pitchfork1")), [-0.3, 0.5]);
    let end = &branch(&traced, "a").ends.0;
    assert_eq!(end.reason, EndReason::ReturnsToParent);
    assert!(end.words.contains("mirror image"), "{}", end.words);
    let z: Vec<f64> = branch(&traced, "a").points.iter().map(|point| point.means[2]).collect();
    assert!(z.iter().all(|mean| *mean > 0.0) || z.iter().all(|mean| *mean < 0.0), "one side only: {z:?}");
}

/// In the bent coordinate no linear symmetry exchanges the pair, so both are followed.
#[test]
fn pitchfork_without_a_linear_symmetry() {
    let set = r#"set: {"q": 0.0, "c": 1.0}"#;
    for at in [-0.2, 0.2] {
        let traced = job("bent_crossing", &format!(r#"{set}, start: Settle(at: {{"mu": {at}}}), {FOLLOW}"#));
        assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
        assert_eq!(names(&traced), ["a", "a.pitchfork1"]);
        at_zero(event(&traced, "a/pitchfork1"), EventKind::Pitchfork);
        let (single, pair) = if at < 0.0 { ("a", "a.pitchfork1") } else { ("a.pitchfork1", "a") };
        check(branch(&traced, single), 1.0);
        check(branch(&traced, pair), -2.0);
        assert_eq!(ends(branch(&traced, single)), [-0.3, 0.5]);
        assert_eq!(ends(branch(&traced, pair)), [0.5, 0.5]);
    }
}

/// A small q: a transcritical crossing with a fold beside it, which a pitchfork would be at q = 0.
#[test]
fn a_transcritical_crossing_beside_a_fold_is_told_from_a_pitchfork() {
    for q in [0.3, 0.03, 0.003] {
        let set = format!(r#"set: {{"q": {q:?}, "c": 1.0, "a": 0.0}}"#);
        let traced = job("bent_crossing", &format!(r#"{set}, start: Settle(at: {{"mu": -0.2}}), {FOLLOW}"#));
        assert!(traced.shortfalls.is_empty(), "{q}: {:?}", traced.shortfalls);
        at_zero(event(&traced, "a/transcritical1"), EventKind::Transcritical);
        let fold = event(&traced, "a.transcritical1/fold1");
        let off = (fold.value + 0.25 * q * q).abs();
        assert!(off <= fold.error.expect("an error") && off < 1e-11, "{q}: {fold:?}");
        assert_eq!(ends(branch(&traced, "a.transcritical1")), [0.5, 0.5], "{q}");
    }
}

/// `c' = c (0.09 - p^2 - c^2)` beside a circle: the pair `c^2 = 0.09 - p^2` lives between two pitchforks, and is met from
/// either of them, or from itself, once.
#[test]
fn a_pair_between_two_pitchforks_is_followed_once() {
    let set = r#"set: {"c0": 0.09, "c1": 0.0, "c2": -1.0}"#;
    for (at, pair, single) in [(-0.6, "a.pitchfork1", "a"), (0.05, "a", "a.pitchfork1")] {
        let fields =
            format!(r#"{set}, start: Settle(at: {{"p": {at}}}), follow: (parameter: "p", from: -0.7, to: 0.7)"#);
        let traced = job("product", &fields);
        assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
        assert_eq!(names(&traced), ["a", "a.pitchfork1"]);
        for event in traced.branches.iter().flat_map(|branch| &branch.events) {
            if event.kind == EventKind::Pitchfork {
                let off = (event.value.abs() - 0.3).abs();
                assert!(off <= event.error.expect("an error") && off < 1e-12, "{event:?}");
                assert_eq!(event.criticality, Some(Criticality::Supercritical));
            }
        }
        let pair = branch(&traced, pair);
        for point in &pair.points {
            absolute("c^2", point.means[4].powi(2), 0.09 - point.value.powi(2), 1e-9);
        }
        assert!(pair.points.len() < 200, "{} points", pair.points.len());
        assert_eq!([&pair.ends.0.reason, &pair.ends.1.reason], [&EndReason::ReturnsToParent; 2]);
        assert_eq!(ends(branch(&traced, single)), [-0.7, 0.7]);
    }
}

/// The range ends on the crossing: it is told once, and the branch that crosses is followed where it lies inside. (A pitchfork
/// on a mesh that does not keep its symmetry is left out: the cycle at its value is a threefold solution, on which no walk
/// can land; the run says that it is stuck there.)
#[test]
fn a_crossing_on_the_edge_of_the_range_is_told_once() {
    for (model, set, kind) in
        [("x12", "", "transcritical1"), ("x13", "", "pitchfork1"), ("bent_crossing", r#""q": 1.0"#, "transcritical1")]
    {
        for (at, from, to) in [(-0.1, -0.3, 0.0), (0.1, 0.0, 0.3)] {
            let fields = format!(
                r#"set: {{{set}}}, start: Settle(at: {{"mu": {at}}}), follow: (parameter: "mu", from: {from:?}, to: {to:?})"#
            );
            let traced = job(model, &fields);
            assert!(traced.shortfalls.is_empty(), "{model} {set}: {:?}", traced.shortfalls);
            let crossings = branch(&traced, "a").events.iter().filter(|event| event.kind.is_threshold());
            let found: Vec<&Event> = crossings.collect();
            assert_eq!(found.len(), 1, "{model} {set} {at}: {found:?}");
            assert!(found[0].name.ends_with(kind) && found[0].value.abs() <= 1e-12, "{model}: {:?}", found[0]);
        }
    }
}
