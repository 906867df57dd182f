//! Cycles with exact periods, multipliers and thresholds (sources beside each check; [E] follows by hand).

use std::f64::consts::{PI, TAU};

use armilla_follow::{FollowEnd, Follower, Outcome, Settings};
use armilla_model::Model;
use armilla_record::Profile;
use armilla_stability::*;

fn model(text: &str) -> Model {
    Model::parse(text, "test").expect("a test model")
}

/// A circle of radius `r` in the first two states, the others 0, on a coarse mesh.
fn circle(n: usize, r: f64, period: f64) -> Profile {
    let mesh: Vec<f64> = (0..=12).map(|i| i as f64 / 12.0).collect();
    let mut profile =
        Profile { n_states: n, degree: CycleSettings::new(1e-9).degree, period, mesh, values: Vec::new() };
    for t in profile.node_times() {
        let (s, c) = (TAU * t).sin_cos();
        let mut state = vec![0.0; n];
        (state[0], state[1]) = (r * c, r * s);
        profile.values.extend(state);
    }
    profile
}

fn spec(model: &Model, free: &str, set: &[(&str, f64)], width: f64) -> CycleSpec {
    let mut parameters = model.values();
    for (name, value) in set {
        parameters[model.parameter_index(name).expect("a parameter")] = *value;
    }
    let free = model.parameter_index(free).expect("a parameter");
    CycleSpec {
        field: model.field(),
        parameters,
        free,
        typical: vec![0.0; model.states().len()],
        parameter_scale: width,
    }
}

/// X1, exact: T = 2 pi/(1 + k mu), multiplier exp(-4 pi mu/(1 + k mu)).
#[test]
fn hopf_with_shear_is_exact() {
    let model = model(include_str!("../../../tests/models/x1.model.ron"));
    let start = circle(2, 0.5, TAU / 1.1);
    let (mut problem, point) =
        CycleProblem::start(spec(&model, "mu", &[("k", 0.5)], 1.0), CycleSettings::new(1e-9), &start, 0.25)
            .expect("starts");
    let found = problem.describe(&point, 1, 0.0).expect("multipliers");
    assert!((found.period / 5.585053606381854 - 1.0).abs() < 1e-12, "{}", found.period);
    assert!((found.multipliers[0].log_modulus - 0.061_266_210_509_709_91_f64.ln()).abs() < 1e-10);
    assert!(found.trivial_defect < 1e-10 && found.liouville_defect < 1e-10);
}

/// X2, exact: fold at mu = -1/4.
#[test]
fn fold_of_cycles_is_located() {
    let model = model(include_str!("../../../tests/models/x2.model.ron"));
    let start = circle(2, 1.2, TAU);
    let (mut problem, point) =
        CycleProblem::start(spec(&model, "mu", &[], 1.0), CycleSettings::new(1e-9), &start, 0.5).expect("starts");
    let mut follower = Follower::start(&mut problem, point, -1.0, Settings::new((-0.5, 1.0))).expect("follows");
    let mut found = None;
    while let Outcome::Step(step) = follower.step() {
        if step.crossings.iter().any(|crossing| crossing.index == WATCH_FOLD) && found.is_none() {
            let (problem, before, after) = follower.parts();
            let (before, after) = (before.expect("a step was made").clone(), after.clone());
            found = Some(problem.locate(CriticalKind::Fold, WATCH_FOLD, &before, &after).expect("located"));
        }
    }
    let found = found.expect("a fold");
    assert!((found.point.unknowns.parameter + 0.25).abs() < 1e-12);
    // Exact: r' = r g, g = mu + r^2 - r^4, so at the fold r' = -2 r^3 (r - r0)^2 / r0^2 ... = -4 r0^3 (r - r0)^2 with
    // r0^2 = 1/2; the period does not change (S = 0) and v is radial of size 1/sqrt(2 pi), hence
    // b = -4 r0^3 / sqrt(2 pi) with v outwards, the way a rising mu pushes.
    let b = problem.fold_form(&found).expect("regular");
    let exact = 4.0 * 0.5f64.powf(1.5) / TAU.sqrt();
    // Cycles exist above the threshold: b < 0.
    assert!((b + exact).abs() < 1e-10, "{b} {exact}");
}

/// X4, exact: a = e/(2 pi), c = g/(2 pi), both signs of g; the doubled cycle has U^2 = -l/g.
#[test]
fn doubling_coefficients_are_exact() {
    let model = model(include_str!("../../../tests/models/x4.model.ron"));
    for (g, e) in [(-1.3, 0.7), (0.9, -0.4)] {
        let set = [("g", g), ("e", e)];
        let (mut problem, point) =
            CycleProblem::start(spec(&model, "l", &set, 0.2), CycleSettings::new(1e-10), &circle(3, 1.0, TAU), -0.05)
                .expect("starts");
        let mut follower = Follower::start(&mut problem, point, 1.0, Settings::new((-0.1, 0.1))).expect("follows");
        let mut located = None;
        while let Outcome::Step(step) = follower.step() {
            if step.crossings.iter().any(|crossing| crossing.index == WATCH_DOUBLING) {
                let (problem, before, after) = follower.parts();
                let (before, after) = (before.expect("a step was made").clone(), after.clone());
                located =
                    Some(problem.locate(CriticalKind::Doubling, WATCH_DOUBLING, &before, &after).expect("located"));
            }
        }
        let located = located.expect("a doubling");
        let form = problem.doubling_form(&located).expect("third derivatives");
        assert!((form.a - e / TAU).abs() < 1e-10, "{form:?} {}", e / TAU);
        assert!((form.c - g / TAU).abs() < 1e-10, "{form:?} {}", g / TAU);
        // The multiplier is -exp(2 pi l): the exponent is l itself.
        assert!((form.slope - 1.0).abs() < 1e-9, "{form:?}");
        let doubled = problem.double(&located, Some(&form)).expect("a doubled branch");
        let value = doubled.point.unknowns.parameter;
        // Exact: U^2 = -l/g on the doubled cycle; xi = U sqrt(2 pi) by Int <v,v> = 1. Side and amplitude are predicted.
        assert!(value * g < 0.0, "born on the wrong side: {value}");
        let predicted = form.offset(form.amplitude_at(0.1, TAU));
        assert!((value / predicted - 1.0).abs() < 0.1, "first point at {value}, predicted {predicted}");
    }
}

/// X3, exact: doubling at mu = 0; doubled cycle of amplitude sqrt(mu), period 4 pi/om.
#[test]
fn doubling_is_located_and_switched() {
    let model = model(include_str!("../../../tests/models/x3.model.ron"));
    let om = model.values()[model.parameter_index("om").expect("om")];
    let kap = model.values()[model.parameter_index("kap").expect("kap")];
    let start = circle(3, 1.0, TAU / om);
    let (mut problem, point) =
        CycleProblem::start(spec(&model, "mu", &[], 0.6), CycleSettings::new(1e-9), &start, -0.2).expect("starts");
    let first = problem.describe(&point, 1, 0.0).expect("multipliers");
    let period = TAU / om;
    assert!((first.multipliers[0].log_modulus + 0.2 * period).abs() < 1e-10);
    assert_eq!(first.multipliers[0].angle, PI);
    assert!((first.multipliers[1].log_modulus + kap * period).abs() < 1e-10);
    let mut follower = Follower::start(&mut problem, point, 1.0, Settings::new((-0.3, 0.3))).expect("follows");
    let mut located = None;
    while let Outcome::Step(step) = follower.step() {
        if step.crossings.iter().any(|crossing| crossing.index == WATCH_DOUBLING) {
            let (problem, before, after) = follower.parts();
            let (before, after) = (before.expect("a step was made").clone(), after.clone());
            located = Some(problem.locate(CriticalKind::Doubling, WATCH_DOUBLING, &before, &after).expect("located"));
        }
    }
    assert_eq!(follower.end(), Some(&FollowEnd::Edge(0.3)));
    let located = located.expect("a doubling");
    assert!(located.point.unknowns.parameter.abs() < 1e-12);
    let mut doubled = problem.double(&located, None).expect("a doubled branch");
    let at = doubled.problem.describe(&doubled.point, 2, 0.0).expect("multipliers");
    assert!((at.period - 2.0 * period).abs() < 1e-9);
    assert!((at.multipliers[0].log_modulus + 2.0 * at.value * at.period).abs() < 1e-9);
}
