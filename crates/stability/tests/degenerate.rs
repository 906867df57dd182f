//! Conserved quantities and continuous symmetries told from the rates. All cases are exact: the quantity or the symmetry
//! is checked by hand from the rates.

use std::f64::consts::TAU;

use armilla_model::Model;
use armilla_record::Profile;
use armilla_stability::{Degeneracy, Term, degeneracy};

/// A loop `centre + size * (cos, sin, cos 2, ...)`, no solution of anything: only its neighbourhood counts.
fn around(centre: &[f64], size: f64) -> Profile {
    let mesh = (0..=10).map(|i| f64::from(i) / 10.0).collect();
    let mut profile = Profile { n_states: centre.len(), degree: 4, period: 3.0, mesh, values: Vec::new() };
    for time in profile.node_times() {
        profile.values.extend(centre.iter().enumerate().map(|(k, c)| c + size * (TAU * time + 1.5 * k as f64).cos()));
    }
    profile
}

fn found(states: &str, rates: &str, profile: &Profile) -> Option<Degeneracy> {
    let text = format!(r#"(states: {{{states}}}, parameters: {{"p": (value: 0.7)}}, rates: {{{rates}}})"#);
    let model = Model::parse(&text, "test.model.ron").unwrap_or_else(|fault| panic!("{fault}"));
    degeneracy(model.field().as_ref(), &model.values(), profile)
}

const XY: &str = r#""x": (begin: 1), "y": (begin: 1)"#;
const XYZ: &str = r#""x": (begin: 1), "y": (begin: 1), "z": (begin: 1)"#;

fn conserved(found: Option<Degeneracy>) -> Vec<(f64, Term)> {
    match found {
        Some(Degeneracy::Conserved(terms)) => terms,
        other => panic!("{other:?}"),
    }
}

#[track_caller]
fn is(terms: &[(f64, Term)], wanted: &[(f64, Term)]) {
    assert_eq!(terms.len(), wanted.len(), "{terms:?}");
    for ((factor, term), (exact, wanted)) in terms.iter().zip(wanted) {
        assert_eq!(term, wanted, "{terms:?}");
        assert!((factor - exact).abs() < 1e-9, "{factor} for {exact}");
    }
}

#[test]
fn a_sum_of_states() {
    let rates = r#""x": "p - x*y^2", "y": "x*y^2 - sin(y) + z", "z": "0.5*sin(y) - 0.5*p - 0.5*z""#;
    // x' + y' + 2 z' = 0.
    let terms = conserved(found(XYZ, rates, &around(&[1.0, 1.2, 0.3], 0.2)));
    is(&terms, &[(0.5, Term::State(0)), (0.5, Term::State(1)), (1.0, Term::State(2))]);
}

/// Volterra's: x - log x + y - p log y.
#[test]
fn prey_and_predator() {
    let terms = conserved(found(XY, r#""x": "x*(p - y)", "y": "y*(x - 1)""#, &around(&[1.0, 0.7], 0.3)));
    let one = [(1.0, Term::State(0)), (1.0, Term::State(1)), (-1.0, Term::Logarithm(0)), (-0.7, Term::Logarithm(1))];
    is(&terms, &one);
}

/// Euler's rigid body keeps its energy and its angular momentum: one of the two, or a sum of them, is told.
#[test]
fn a_rigid_body() {
    let rates = r#""x": "(3 - 2)*y*z", "y": "(1 - 3)*z*x", "z": "(2 - 1)*x*y""#;
    let terms = conserved(found(XYZ, rates, &around(&[0.2, -0.4, 0.5], 0.4)));
    let factor =
        |k: usize| terms.iter().find(|(_, term)| *term == Term::Product(k, k)).map_or(0.0, |(factor, _)| *factor);
    assert!(terms.iter().all(|(_, term)| matches!(term, Term::Product(i, j) if i == j)), "{terms:?}");
    assert!((factor(0) - 2.0 * factor(1) + factor(2)).abs() < 1e-9, "{terms:?}");
}

/// Cycles in every half-plane through the axis: turned about it they are cycles again.
#[test]
fn a_rotation_of_cycles() {
    let rates = r#""x": "x*z/2", "y": "y*z/2", "z": "p*(1 - log(x^2 + y^2)^2)*z - log(x^2 + y^2)""#;
    let Some(Degeneracy::Symmetric(rows)) = found(XYZ, rates, &around(&[1.0, 0.8, 0.0], 0.3)) else { panic!("none") };
    let ([(a, Term::State(1))], [(b, Term::State(0))], []) = (&rows[0][..], &rows[1][..], &rows[2][..]) else {
        panic!("{rows:?}")
    };
    assert!((a + b).abs() < 1e-9 && a.abs() == 1.0, "{rows:?}");
}

/// The rotation that carries the circle into itself is a shift of time and no reason for a family.
#[test]
fn a_rotation_along_the_cycle_is_none() {
    let mut circle = around(&[0.0, 0.0], 0.0);
    circle.values = circle.node_times().iter().flat_map(|t| [(TAU * t).cos(), (TAU * t).sin()]).collect();
    let rates = r#""x": "x*(1 - x^2 - y^2) - y*(1 + p*(x^2 + y^2))", "y": "y*(1 - x^2 - y^2) + x*(1 + p*(x^2 + y^2))""#;
    assert_eq!(found(XY, rates, &circle), None);
}

#[test]
fn ordinary_models_have_none() {
    let roessler = r#""x": "-y - z", "y": "x + 0.2*y", "z": "0.2 + z*(x - p)""#;
    assert_eq!(found(XYZ, roessler, &around(&[0.0, 0.0, 1.0], 0.9)), None);
    assert_eq!(found(XY, r#""x": "y", "y": "p*(1 - x^2)*y - x""#, &around(&[0.0, 0.0], 2.0)), None);
    // Not defined about the loop: nothing is said.
    assert_eq!(found(XY, r#""x": "log(x) + y", "y": "-x""#, &around(&[0.0, 0.0], 1.0)), None);
}
