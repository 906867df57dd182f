//! A cycle that shrinks to a state of rest. Exact: circles, see the notes of the models `birth` (with X1 as its case q = 0)
//! and `x2`.

use armilla_record::{EndReason, EventKind};
use armilla_tests::{Random, branch, job};

use crate::words::{check_ratios, value_with_error};

#[test]
fn birth_of_circles() {
    let mut random = Random::new(1);
    let mut ratios = Vec::new();
    for case in 0..24 {
        let mu0 = random.between(-3.0, 3.0);
        let width = random.decade(-1.0, 1.0);
        let (k, q) = (random.between(-0.2, 2.0), if case % 4 == 0 { 0.0 } else { random.between(0.0, 3.0) });
        let bend = random.between(-0.5, 0.5);
        let (from, at, to) = (mu0 - 0.3 * width, mu0 + 0.5 * width, mu0 + 0.7 * width);
        let traced = job(
            "birth",
            &format!(
                r#"set: {{"mu0": {mu0:?}, "k": {k:?}, "q": {q:?}, "bend": {bend:?}}}, start: Settle(at: {{"mu": {at:?}}}),
                   follow: (parameter: "mu", from: {from:?}, to: {to:?})"#
            ),
        );
        let what = format!("mu0 {mu0}, width {width}, k {k}, q {q}, bend {bend}");
        assert!(traced.shortfalls.is_empty(), "{what}: {:?}", traced.shortfalls);
        let a = branch(&traced, "a");
        assert_eq!(a.ends.1.reason, EndReason::Edge, "{what}: {}", a.ends.1.words);
        let EndReason::Equilibrium { value } = a.ends.0.reason else { panic!("{what}: {}", a.ends.0.words) };
        assert!(a.ends.0.words.starts_with("shrinks to an equilibrium at mu = "), "{}", a.ends.0.words);
        let hopf = a.events.iter().find(|event| event.kind == EventKind::Hopf).expect("the birth is an event");
        assert_eq!(hopf.value, value, "{what}");
        let error = hopf.error.expect("an error");
        // Where the truth is met to roundoff, its distance is that of the numbers themselves.
        let off = (value - mu0).abs().max(4.0 * f64::EPSILON * mu0.abs().max(width));
        eprintln!("{what}: {value:?} off {off:.1e}, error {error:.1e}");
        ratios.push(error / off);
        let (said, within) = value_with_error(&a.ends.0.words);
        assert!((said - mu0).abs() <= within, "{what}: {}", a.ends.0.words);
    }
    check_ratios("births of circles", ratios, 1000.0);
}

/// X2: the inner circle of the fold shrinks to rest at mu = 0.
#[test]
fn a_subcritical_birth_behind_a_fold() {
    let traced = job(
        "x2",
        r#"start: Settle(at: {"mu": 0.1}), follow: (parameter: "mu", from: -0.5, to: 0.5), pursue: (doublings: 0)"#,
    );
    let a = branch(&traced, "a");
    let EndReason::Equilibrium { value } = a.ends.0.reason else { panic!("{}", a.ends.0.words) };
    let (_, error) = value_with_error(&a.ends.0.words);
    assert!(value.abs() <= error && error < 1e-8, "{value:e}, error {error:e}");
}
