//! A pair of multipliers that turns about a circle with known coefficients: normal form, strong resonances.
//!
//! Exact, by hand: with w = (r - 1) + i z and b = s - 1 the model is `w' = (l + i W) w + (q1 + i q2) w |w|^2 + al b w + de b
//! conj(w)`, `b' = -k b + be |w|^2 + ga Re w^2`, `theta' = 1 + e |w|^2 + e2 b`. Circle: T = 2 pi, multipliers
//! exp(2 pi (l +- i W)), torus at l = 0. To second order `b = be/k |w|^2 + Re(ga w^2/(k + 2 i W))`, so the coefficient of
//! w |w|^2 is `q1 + i q2 + al be/k + de ga/(2 (k + 2 i W))` and that of |w|^2 in theta' is `e + e2 be/k`; with
//! `Int <conj v, v> dt = 1` over the period both are divided by pi.

use std::f64::consts::{PI, TAU};

use armilla_record::{Criticality, EventKind};
use armilla_stability::LocatedTorus;
use armilla_tests::{Case, absolute, branch, event, job, settings, stations};

struct Coefficients {
    w: f64,
    al: f64,
    be: f64,
    ga: f64,
    de: f64,
}

fn located(with: &Coefficients) -> (LocatedTorus, armilla_stability::TorusForm) {
    let Coefficients { w, al, be, ga, de } = *with;
    let mut case = Case::new("turning_pair", "l", 0.4).with("e2", 0.3);
    for (name, value) in [("W", w), ("al", al), ("be", be), ("ga", ga), ("de", de)] {
        case = case.with(name, value);
    }
    let mut guess = case.circle(1.0, TAU);
    guess.values.iter_mut().skip(3).step_by(4).for_each(|s| *s = 1.0);
    let (mut problem, cycle) = case.start(&guess, settings(1e-10), -0.05);
    let (before, after) = stations(&mut problem, &cycle, (-0.05, 0.08));
    let located = problem.locate_torus(&before, &after).expect("a torus point");
    let form = problem.torus_form(&located).expect("a normal form");
    (located, form)
}

#[test]
fn place_angle_and_normal_form_are_exact() {
    let (q1, q2, e, e2, k) = (-1.3, 0.6, 0.7, 0.3, 0.4);
    for with in [
        Coefficients { w: 0.37, al: 0.0, be: 0.0, ga: 0.0, de: 0.0 },
        Coefficients { w: 0.37, al: 0.8, be: 0.5, ga: 0.9, de: -0.6 },
        Coefficients { w: 0.11, al: 0.8, be: 0.5, ga: 0.9, de: -0.6 },
        Coefficients { w: 0.46, al: 0.8, be: 5.0, ga: 0.9, de: -0.6 },
    ] {
        let (located, form) = located(&with);
        let Coefficients { w, al, be, ga, de } = with;
        let value = located.point.unknowns.parameter;
        absolute("torus", value, 0.0, 1e-13);
        assert!(value.abs() <= located.error, "{value:e} {:e}", located.error);
        absolute("angle", located.angle, TAU * w, 1e-12);
        assert!((located.angle - TAU * w).abs() <= located.angle_error && located.angle_error < 1e-11);
        // Newton's method falls quadratically from the bracket.
        assert!(located.report.iterations <= 5, "{:?}", located.report);
        // de ga/(2 (k + 2 i w)) = de ga (k - 2 i w)/(2 (k^2 + 4 w^2)).
        let shared = 0.5 * de * ga / (k * k + 4.0 * w * w);
        let (re, im) = (q1 + al * be / k + shared * k, q2 - 2.0 * shared * w);
        absolute("a", form.a, (e + e2 * be / k) / PI, 1e-10);
        absolute("real part of d", form.d.0, re / PI, 1e-9);
        absolute("imaginary part of d", form.d.1, im / PI, 1e-9);
        assert!((form.d.0 - re / PI).abs() <= form.error && form.error < 1e-8, "{:e}", form.error);
    }
}

fn traced(set: &str) -> armilla_study::Traced {
    let fields = format!(
        r#"set: {{{set}}}, start: Settle(at: {{"l": -0.1}}), follow: (parameter: "l", from: -0.2, to: 0.2), accuracy: 1e-10"#
    );
    let traced = job("turning_pair", &fields);
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let kinds = branch(&traced, "a").events.iter().map(|event| event.kind);
    assert_eq!(kinds.filter(|kind| kind.is_threshold()).collect::<Vec<_>>(), [EventKind::Torus]);
    let torus = event(&traced, "a/torus1");
    assert!(torus.value.abs() <= torus.error.expect("an error") && torus.value.abs() < 1e-12, "{torus:?}");
    traced
}

/// q1 < 0: a stable torus beyond; q1 > 0: an unstable one before.
#[test]
fn sides_are_told() {
    for (q1, side, words) in [
        (-1.3, Criticality::Supercritical, "for l above 0 expect the oscillation to swell and shrink: a stable torus"),
        (1.3, Criticality::Subcritical, "for l above 0 expect the motion to leave the cycle"),
    ] {
        let traced = traced(&format!(r#""q1": {q1}"#));
        assert_eq!(event(&traced, "a/torus1").criticality, Some(side));
        let beyond = armilla_study::beyond(branch(&traced, "a"));
        assert!(beyond[0].0 == "a/torus1" && beyond[0].1.starts_with(words), "{beyond:?}");
    }
}

/// e^(2 pi i k W) = 1 for k = 3 and 4: W = 1/3, 2/3, 1/4, 3/4; near them, but not on them, a side is claimed.
#[test]
fn strong_resonances_are_named_and_no_side_is_claimed() {
    for (w, order, angle) in
        [(1.0 / 3.0, 3, TAU / 3.0), (2.0 / 3.0, 3, TAU / 3.0), (0.25, 4, 0.25 * TAU), (0.75, 4, 0.25 * TAU)]
    {
        let traced = traced(&format!(r#""W": {w:?}"#));
        let torus = event(&traced, "a/torus1");
        absolute("angle", torus.angle.expect("an angle"), angle, 1e-12);
        assert_eq!(torus.criticality, None);
        assert!(torus.note.contains(&format!("strong resonance of order {order}")), "{}", torus.note);
        let beyond = armilla_study::beyond(branch(&traced, "a"));
        assert!(beyond[0].1.contains("not decided"), "{beyond:?}");
    }
    for w in [0.333, 0.334, 0.2501, 0.2499, 0.2, 0.4] {
        assert_eq!(event(&traced(&format!(r#""W": {w:?}"#)), "a/torus1").criticality, Some(Criticality::Supercritical));
    }
}
