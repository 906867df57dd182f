//! Models with eigenvalues on the imaginary axis all along: the events of the others are found; and starts from guesses at which
//! the Jacobian is singular. All exact, by hand.

use armilla_record::{Criticality, EventKind};
use armilla_study::Traced;
use armilla_tests::{branch, event, within};

fn traced(states: &str, (parameter, value): (&str, f64), rates: &str, (near, range): (&str, (f64, f64))) -> Traced {
    let place = tempfile::tempdir().expect("a temporary folder");
    let model =
        format!(r#"(states: {{{states}}}, parameters: {{"{parameter}": (value: {value:?})}}, rates: {{{rates}}})"#);
    std::fs::write(place.path().join("m.model.ron"), model).expect("a model written");
    let (from, to) = range;
    let follow = format!(r#"follow: (parameter: "{parameter}", from: {from:?}, to: {to:?})"#);
    let study = format!(r#"(model: "m.model.ron", start: Equilibrium(near: {near}), {follow})"#);
    let path = place.path().join("m.study.ron");
    std::fs::write(&path, study).expect("a study written");
    armilla_tests::trace_file(&path)
}

fn thresholds(traced: &Traced, name: &str) -> Vec<EventKind> {
    branch(traced, name).events.iter().map(|event| event.kind).filter(|kind| kind.is_threshold()).collect()
}

#[track_caller]
fn says_once(traced: &Traced) {
    let said = traced.notes.iter().filter(|note| note.contains("stay on the imaginary axis")).count();
    assert_eq!(said, 1, "{:?}", traced.notes);
}

const XV: &str = r#""x": (begin: 1.0), "v": (begin: 0.0)"#;

/// x'' = k - x^2: centres x = sqrt k and saddles x = -sqrt k meet at k = 0. Started on either.
#[test]
fn a_fold_of_centres() {
    for near in [r#"{"x": -0.7}"#, r#"{"x": 0.7}"#] {
        let traced = traced(XV, ("k", 0.5), r#""x": "v", "v": "k - x^2""#, (near, (-1.0, 1.0)));
        assert_eq!(thresholds(&traced, "a"), [EventKind::Fold]);
        let fold = event(&traced, "a/fold1");
        within("fold", (fold.value, fold.error), (0.0, 0.0), 1e-13);
        let a = branch(&traced, "a");
        assert!(a.points.iter().all(|point| point.unstable_count == usize::from(point.maxima[0] < -1e-9)));
        says_once(&traced);
    }
}

/// x'' = -k x - x^3: a centre at 0 for k > 0, a saddle beyond, and the saddle's pair x = ±sqrt(-k), centres again, as the
/// potential k x^2/2 + x^4/4 has its minima there.
#[test]
fn a_pitchfork_of_centres() {
    let traced = traced(XV, ("k", 1.0), r#""x": "v", "v": "-k*x - x^3""#, (r#"{"x": 0}"#, (-0.7, 2.0)));
    assert_eq!(thresholds(&traced, "a"), [EventKind::Pitchfork]);
    let found = event(&traced, "a/pitchfork1");
    within("pitchfork", (found.value, found.error), (0.0, 0.0), 1e-13);
    let pair = branch(&traced, "a.pitchfork1");
    assert!(pair.points.iter().all(|point| (point.maxima[0].powi(2) + point.value).abs() < 1e-12));
    assert!(pair.points.iter().all(|point| point.unstable_count == 0));
    let line = branch(&traced, "a");
    assert!(
        line.points.iter().all(|point| point.unstable_count == usize::from(point.value < 0.0)),
        "{:?}",
        line.points
    );
    says_once(&traced);
}

/// The Hopf normal form, cycles r^2 = mu of period 2 pi for mu > 0, drives a turning pair u, v that keeps u^2 + v^2: its
/// eigenvalues ±1.37 i are nearer to the axis than the critical ones at every station.
#[test]
fn a_hopf_point_beside_a_pair_on_the_axis() {
    let states = r#""x": (begin: 0.0), "y": (begin: 0.0), "u": (begin: 0.0), "v": (begin: 0.0)"#;
    let rates = r#""x": "mu*x - y - x*(x^2 + y^2)", "y": "x + mu*y - y*(x^2 + y^2)",
                   "u": "1.37*v*(1 + 0.2*x)", "v": "-1.37*u*(1 + 0.2*x)""#;
    let traced = traced(states, ("mu", -0.5), rates, ("{}", (-1.0, 0.8)));
    assert_eq!(thresholds(&traced, "a"), [EventKind::Hopf]);
    let hopf = event(&traced, "a/hopf1");
    within("hopf", (hopf.value, hopf.error), (0.0, 0.0), 1e-13);
    assert!((hopf.period - std::f64::consts::TAU).abs() < 1e-12, "{}", hopf.period);
    assert_eq!(hopf.criticality, Some(Criticality::Supercritical));
    let cycles = branch(&traced, "a.hopf1");
    assert!(cycles.points.len() > 3);
    assert!(cycles.points.iter().all(|point| (point.maxima[0].powi(2) - point.value).abs() < 1e-6));
    says_once(&traced);
}

/// Two particles on a hill, turned: eigenvalues l^2 = (2 - g^2 ± sqrt(g^4 - 4 g^2))/2, imaginary for g > 2, where both pairs meet;
/// two to the right below. That is no Hopf point.
#[test]
fn two_pairs_that_meet() {
    let states = r#""x": (begin: 0.0), "y": (begin: 0.0), "p": (begin: 0.0), "q": (begin: 0.0)"#;
    let rates = r#""x": "p", "y": "q", "p": "x + g*q - x^3", "q": "y - g*p - y^3""#;
    let traced = traced(states, ("g", 3.0), rates, ("{}", (1.5, 3.5)));
    assert_eq!(thresholds(&traced, "a"), [EventKind::Unresolved]);
    let met = event(&traced, "a/unresolved1");
    within("meeting", (met.value, met.error), (2.0, 0.0), 1e-6);
    let a = branch(&traced, "a");
    assert!(a.points.iter().all(|point| point.unstable_count == if point.value < 2.0 { 2 } else { 0 }));
}

/// x' = mu - x^2 from x = 0 at mu = 1, where the derivative vanishes: the branch x^2 = mu is found from beside.
#[test]
fn a_guess_where_the_jacobian_is_singular() {
    let traced = traced(r#""x": (begin: 0.0)"#, ("mu", 1.0), r#""x": "mu - x^2""#, ("{}", (-0.5, 2.0)));
    let fold = event(&traced, "a/fold1");
    within("fold", (fold.value, fold.error), (0.0, 0.0), 1e-13);
    assert!(branch(&traced, "a").points.iter().all(|point| (point.maxima[0].powi(2) - point.value).abs() < 1e-12));
}
