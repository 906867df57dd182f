//! Hopf points of equilibria with the cycles born there.

use armilla_record::{Criticality, EndReason, Event, EventKind};
use armilla_study::Traced;
use armilla_tests::{branch, event, job, within};

/// A Hopf point with its period, both to `tolerance` and within their errors; the last digits given of the references.
fn check(hopf: &Event, value: (f64, f64), period: (f64, f64), tolerance: f64) {
    assert_eq!((hopf.kind, hopf.turns), (EventKind::Hopf, 1));
    within(&hopf.name, (hopf.value, hopf.error), value, tolerance);
    within(&format!("period at {}", hopf.name), (hopf.period, hopf.period_error), period, tolerance);
}

/// The branch of cycles begins at the Hopf point itself.
fn born_there(traced: &Traced, name: &str) {
    let cycles = branch(traced, name);
    let hopf = event(traced, cycles.born_at.as_ref().expect("a birth"));
    let first = &cycles.points[0];
    assert_eq!((first.value, first.period, first.distance), (hopf.value, hopf.period, 0.0), "{name}");
    assert_eq!((&first.maxima, &first.minima), (&hopf.maxima, &hopf.minima), "{name}");
    assert_eq!(cycles.ends.0.reason, EndReason::Equilibrium { value: hopf.value }, "{name}");
    assert!(cycles.ends.0.words.contains(&hopf.name), "{}", cycles.ends.0.words);
}

fn told(traced: &Traced) {
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
}

/// X1, exact: Hopf at mu = 0, period 2 pi, supercritical; on the cycles r^2 = mu, T = 2 pi/(1 + k mu).
#[test]
fn a_circle_with_shear() {
    let fields = r#"start: Equilibrium(near: {"x": 0.01}), set: {"mu": -0.2, "k": 0.5}, targets: [0.25],
                    follow: (parameter: "mu", from: -0.5, to: 0.5)"#;
    let traced = job("x1", fields);
    told(&traced);
    let hopf = event(&traced, "a/hopf1");
    check(hopf, (0.0, 0.0), (std::f64::consts::TAU, 0.0), 1e-14);
    assert_eq!(hopf.criticality, Some(Criticality::Supercritical));
    born_there(&traced, "a.hopf1");
    let cycles = branch(&traced, "a.hopf1");
    for point in &cycles.points {
        let radius = point.value.max(0.0).sqrt();
        assert!((point.maxima[0] - radius).abs() < 1e-9, "{} {}", point.value, point.maxima[0]);
        assert!(point.unstable_count == 0);
    }
    let target = event(&traced, "a.hopf1/target1");
    // X1 at mu = 1/4, k = 1/2.
    within("period", (target.period, target.period_error), (5.585_053_606_381_854_6, 0.0), 1e-12);
    let point = cycles.points.iter().find(|point| point.value == 0.25).expect("the target is a point");
    let multiplier = point.multipliers[0].log_modulus;
    assert!((multiplier - 0.061_266_210_509_709_911_f64.ln()).abs() < 1e-9, "{multiplier}");
}

/// X2, exact, whole from the equilibrium: subcritical Hopf at mu = 0, unstable circles r^2 = (1 - sqrt(1 + 4 mu))/2 down to
/// the fold at mu = -1/4, r^2 = 1/2, and the stable ones back up; T = 2 pi throughout, log multiplier 4 pi r^2 (1 - 2 r^2).
#[test]
fn a_fold_of_cycles_whole() {
    let fields = r#"start: Equilibrium(near: {"x": 0.01}), set: {"mu": -0.4},
                    follow: (parameter: "mu", from: -0.5, to: 0.5)"#;
    let traced = job("x2", fields);
    told(&traced);
    let hopf = event(&traced, "a/hopf1");
    check(hopf, (0.0, 0.0), (std::f64::consts::TAU, 0.0), 1e-14);
    assert_eq!(hopf.criticality, Some(Criticality::Subcritical));
    born_there(&traced, "a.hopf1");
    let fold = event(&traced, "a.hopf1/fold1");
    within("fold", (fold.value, fold.error), (-0.25, 0.0), 1e-13);
    within("radius at the fold", (fold.maxima[0], Some(1e-9)), (0.5f64.sqrt(), 0.0), 1e-9);
    let cycles = branch(&traced, "a.hopf1");
    assert_eq!(cycles.points[cycles.points.len() - 1].value, 0.5);
    for point in &cycles.points[1..] {
        let square = point.maxima[0].powi(2);
        assert!((square - square * square + point.value).abs() < 1e-9, "{point:?}");
        let exact = 4.0 * std::f64::consts::PI * square * (1.0 - 2.0 * square);
        assert!((point.multipliers[0].log_modulus - exact).abs() < 1e-7, "{point:?} for {exact}");
        assert_eq!(point.unstable_count, usize::from(square < 0.5));
    }
}

/// X5, exact: lam - b + lam + d (1 - lam^2) = 0 at rest z = lam, so lam = (1 - sqrt(1 - d (b - d)))/d with b = 3, d = 0.2;
/// period 2 pi/c; the torus at lam = 2.
#[test]
fn on_the_way_to_a_torus() {
    let fields = r#"start: Equilibrium(near: {"x": 0, "z": 1.5}), set: {"lam": 1.5},
                    follow: (parameter: "lam", from: 1.2, to: 2.1)"#;
    let traced = job("x5", fields);
    let hopf = event(&traced, "a/hopf1");
    check(hopf, (1.683_375_209_644_600_150_9, 0.0), (std::f64::consts::TAU / 0.25, 0.0), 1e-13);
    born_there(&traced, "a.hopf1");
    let torus = event(&traced, "a.hopf1/torus1");
    within("torus", (torus.value, torus.error), (2.0, 0.0), 1e-9);
}

/// X7, exact: the trace B - 1 - A^2 at x = A, y = B/A vanishes, the determinant is A^2 (A = 1). At B = 3 the period is
/// 7.156919921179870 (independent: shooting with a Taylor integrator in 113-bit arithmetic).
#[test]
fn brusselator() {
    let traced =
        job("x10", r#"start: Equilibrium(near: {}), follow: (parameter: "B", from: 1.5, to: 4), targets: [3]"#);
    told(&traced);
    check(event(&traced, "a/hopf1"), (2.0, 0.0), (std::f64::consts::TAU, 0.0), 1e-13);
    born_there(&traced, "a.hopf1");
    // The equilibrium stands at the same target.
    let target = event(&traced, "a.hopf1/target1");
    within("period", (target.period, target.period_error), (7.156_919_921_179_869_8, 1e-15), 1e-10);
}

/// X8: F = 1/(cos f - cos 2f), frequency F (sin f + sin 2f), f = 2 pi l/n, supercritical (van Kekem & Sterk 2018, Physica D
/// 367:38): n = 5, l = 1.
#[test]
fn ring_of_five() {
    let fields = r#"start: Equilibrium(near: {}), set: {"F": 0.5}, follow: (parameter: "F", from: 0.1, to: 1.5)"#;
    let traced = job("lorenz96", fields);
    told(&traced);
    let hopf = event(&traced, "a/hopf1");
    check(hopf, (2.0 / 5f64.sqrt(), 0.0), (4.565_001_337_004_396_748, 0.0), 1e-13);
    assert_eq!(hopf.criticality, Some(Criticality::Supercritical));
    born_there(&traced, "a.hopf1");
}

/// X9, exact: see `exact/births.rs`: al = 3 sqrt 2, frequency 1/sqrt 3.
#[test]
fn repressilator() {
    let traced = job("repressilator", r#"start: Equilibrium(near: {}), follow: (parameter: "al", from: 1, to: 20)"#);
    told(&traced);
    check(event(&traced, "a/hopf1"), (3.0 * 2f64.sqrt(), 0.0), (std::f64::consts::TAU * 3f64.sqrt(), 0.0), 1e-12);
    born_there(&traced, "a.hopf1");
}

/// Exact: rest at x = a loses its stability where x^2 = 1, frequency 1/sqrt(eps), eps = 0.05.
#[test]
fn fast_slow_pair() {
    let traced = job("canard", r#"start: Equilibrium(near: {}), follow: (parameter: "a", from: 0.85, to: 1.2)"#);
    check(event(&traced, "a/hopf1"), (1.0, 0.0), (std::f64::consts::TAU * 0.05f64.sqrt(), 0.0), 1e-13);
    born_there(&traced, "a.hopf1");
}

/// Lorenz, sigma = 10, b = 8/3: Hopf at r = sigma (sigma + b + 3)/(sigma - b - 1) = 470/19, frequency^2 = b (sigma + r), so
/// T = 0.6528303476; subcritical; both mirror images. The unstable cycle goes past a period of 2.5 on its way to the loop
/// through the origin near r = 13.926 (Sparrow 1982, The Lorenz Equations, ch. 2: 13.926).
#[test]
fn convection() {
    let fields = r#"start: Equilibrium(near: {"x": 8, "y": 8}), set: {"r": 20}, pursue: (doublings: 0),
                    follow: (parameter: "r", from: 5, to: 30)"#;
    let traced = job("lorenz", fields);
    told(&traced);
    let r: f64 = 470.0 / 19.0;
    let period = std::f64::consts::TAU / (8.0 / 3.0 * (10.0 + r)).sqrt();
    let hopf = event(&traced, "a/hopf1");
    check(hopf, (r, 0.0), (period, 0.0), 1e-12);
    assert!((hopf.period - 0.652_830_347_6).abs() < 5e-11);
    assert_eq!(hopf.criticality, Some(Criticality::Subcritical));
    born_there(&traced, "a.hopf1");
    let cycles = branch(&traced, "a.hopf1");
    let longest = cycles.points.iter().map(|point| point.period).fold(0.0, f64::max);
    assert!(longest > 2.5, "{longest}");
    assert!(cycles.points.iter().all(|point| point.unstable_count == 1), "all of them saddles");
    let loop_at = event(&traced, "a.hopf1/period-blow-up1");
    assert!((loop_at.value - 13.926).abs() < 1e-3, "{}", loop_at.value);
}

/// Hodgkin & Huxley 1952 at 6.3 °C: both Hopf currents and the branch of cycles between them with its fold, by an independent
/// computation (shooting with a Taylor integrator in 113-bit arithmetic); published as 9.78 and 154.5 (Hassard 1978, Journal
/// of Theoretical Biology 71:401; Rinzel & Miller 1980, Mathematical Biosciences 49:27).
#[test]
fn membrane() {
    let fields = r#"start: Equilibrium(near: {}), follow: (parameter: "I", from: 0, to: 170), pursue: (doublings: 0)"#;
    let traced = job("hodgkin_huxley", fields);
    told(&traced);
    let mut found: Vec<&Event> =
        branch(&traced, "a").events.iter().filter(|event| event.kind == EventKind::Hopf).collect();
    found.sort_by(|a, b| a.value.total_cmp(&b.value));
    let [low, high] = found[..] else { panic!("{found:?}") };
    check(low, (9.779_637_995_39, 5e-12), (10.717_882_81, 5e-9), 1e-9);
    check(high, (154.526_633_666, 5e-10), (5.911_239_441, 5e-10), 1e-9);
    assert_eq!((low.criticality, high.criticality), (Some(Criticality::Subcritical), Some(Criticality::Supercritical)));
    // One branch of cycles joins both; it is followed once.
    let cycles: Vec<_> = traced.branches.iter().filter(|branch| branch.name.starts_with("a.hopf")).collect();
    let [cycles] = cycles[..] else { panic!("{} branches of cycles", cycles.len()) };
    born_there(&traced, &cycles.name);
    let fold = cycles.events.iter().filter(|event| event.kind == EventKind::Fold);
    let lowest = fold.min_by(|a, b| a.value.total_cmp(&b.value)).expect("a fold");
    within("fold", (lowest.value, lowest.error), (6.264_521_274_51, 5e-12), 1e-9);
    let end = cycles.events.iter().find(|event| event.kind == EventKind::Hopf).expect("the other end");
    let other = if (cycles.points[0].value - low.value).abs() < 1.0 { high } else { low };
    within("other end", (end.value, end.error), (other.value, other.error.expect("an error")), 1e-11);
    assert_eq!((end.criticality, end.turns), (other.criticality, 1));
}

/// Tyson 1991: both Hopf points of the two-variable cell cycle. Exact, by hand: with u = k1/k6 at rest and a = al + u^2, the
/// trace 2 k6 u^2/a - k6 - k4 a vanishes; solved by bisection of that one equation below, the frequency being sqrt(k4 k6 a).
#[test]
fn cell_cycle() {
    let traced = job("tyson", r#"start: Equilibrium(near: {}), follow: (parameter: "k6", from: 0.2, to: 2)"#);
    told(&traced);
    let (k1, k4, al): (f64, f64, f64) = (0.015, 180.0, 1e-4);
    let a = |k6: f64| al + (k1 / k6).powi(2);
    let trace = |k6: f64| 2.0 * k6 * (k1 / k6).powi(2) / a(k6) - k6 - k4 * a(k6);
    let mut found: Vec<&Event> =
        branch(&traced, "a").events.iter().filter(|event| event.kind == EventKind::Hopf).collect();
    found.sort_by(|a, b| a.value.total_cmp(&b.value));
    assert_eq!(found.len(), 2);
    for (hopf, (mut low, mut high), published) in
        [(found[0], (0.3, 0.5), 0.364_065_884_1), (found[1], (1.2, 1.8), 1.462_589_09)]
    {
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if trace(middle) * trace(low) > 0.0 { low = middle } else { high = middle }
        }
        // The bisection itself ends within rounding of the trace.
        let exact = 0.5 * (low + high);
        check(hopf, (exact, 1e-14), (std::f64::consts::TAU / (k4 * exact * a(exact)).sqrt(), 1e-12), 1e-12);
        assert!((hopf.value - published).abs() < 5e-9, "{} for {published}", hopf.value);
    }
    let cycles: Vec<_> = traced.branches.iter().filter(|branch| branch.name.starts_with("a.hopf")).collect();
    assert_eq!(cycles.len(), 1, "one branch joins both");
    born_there(&traced, &cycles[0].name);
    assert!(cycles[0].ends.1.words.contains("the branch born there is this one"), "{}", cycles[0].ends.1.words);
}
