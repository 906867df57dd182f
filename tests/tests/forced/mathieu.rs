//! X6: the equation of Mathieu, whose zero solution is a cycle without extent under a forcing of period pi.

use std::f64::consts::PI;

use armilla_record::{EventKind, Profile};
use armilla_stability::SpectrumSolver;
use armilla_tests::{Case, absolute, branch, event, job, relative};

/// Sum of the multipliers of the zero solution over one forcing period: the trace of the map.
fn trace(case: &Case, a: f64) -> f64 {
    let mesh = armilla_tests::uniform_mesh(16);
    let profile = Profile { n_states: 2, degree: 6, period: PI, values: vec![0.0; 2 * (16 * 6 + 1)], mesh };
    let mut solver = SpectrumSolver::new(case.model.field().as_ref(), 6);
    let spectrum = solver.spectrum(&profile, &case.parameters(a), &[1.0; 2], 1e-12).expect("multipliers");
    assert_eq!(spectrum.trivial_defect, 0.0, "no multiplier is trivial under a forcing");
    spectrum.multipliers.iter().map(|mu| mu.log_modulus.exp() * mu.angle.cos()).sum()
}

/// Characteristic values of Mathieu's equation: the trace of the undamped map over pi is +2 at a_k, b_k with k even and -2
/// with k odd. Values of DLMF chapter 28 and Abramowitz & Stegun chapter 20 (from memory), recomputed to these digits.
#[test]
fn characteristic_values() {
    for (q, values) in [
        (
            1.0,
            &[
                (-0.455_138_604, 2.0),
                (-0.110_248_817, -2.0),
                (1.859_108_073, -2.0),
                (3.917_024_773, 2.0),
                (4.371_300_983, 2.0),
            ][..],
        ),
        (
            5.0,
            &[
                (-5.800_046_021, 2.0),
                (-5.790_080_599, -2.0),
                (1.858_187_542, -2.0),
                (2.099_460_445, 2.0),
                (7.449_109_740, 2.0),
            ],
        ),
        (10.0, &[(-13.936_979_957, 2.0), (-13.936_552_479, -2.0), (-2.399_142_400, -2.0), (-2.382_158_236, 2.0)]),
    ] {
        let case = Case::new("mathieu", "a", 10.0).with("q", q).with("z", 0.0);
        for &(value, wanted) in values {
            // The root next to the value, by secants.
            let miss = |a: f64| trace(&case, a) - wanted;
            let (mut x, mut y) = (value - 1e-6, value + 1e-6);
            let (mut f, mut g) = (miss(x), miss(y));
            for _ in 0..8 {
                if g == f {
                    break;
                }
                let next = y - g * (y - x) / (g - f);
                (x, f, y) = (y, g, next);
                g = miss(y);
            }
            absolute(&format!("q = {q}"), y, value, 1e-9);
        }
    }
}

/// With damping z every multiplier is exp(-z pi) times the undamped one: thresholds lie where the undamped trace is
/// ±2 cosh(z pi). For q = 1, z = 0.4 computed independently: Taylor series of the undamped equation in 30 digits and the
/// secant method. The equation is linear: doubled motions of every size exist at the threshold itself.
#[test]
fn thresholds_of_the_damped_equation() {
    let traced = job(
        "mathieu",
        r#"set: {"z": 0.4}, start: Settle(at: {"a": 2.9}), follow: (parameter: "a", from: -1.0, to: 3.0), accuracy: 1e-10,
           figures: [Diagram(measure: Max("y")), Portrait(axes: ["y", "v"])]"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    for (name, exact) in [
        ("a/branching1", -0.564_583_641_805_676_059),
        ("a/doubling2", 0.174_687_069_326_580_168),
        ("a/doubling1", 1.264_502_927_175_364_812),
    ] {
        let found = event(&traced, name);
        absolute(name, found.value, exact, 1e-9);
        let error = found.error.expect("an error");
        assert!((found.value - exact).abs() <= error, "{name}: {} for {exact}, error {error:e}", found.value);
        relative("period", found.period, PI, 1e-15);
        if found.kind == EventKind::Doubling {
            assert_eq!(found.criticality, None);
            assert!(found.note.contains("c = 0"), "{}", found.note);
        }
    }
    assert_eq!(traced.branches.len(), 1);
    let a = branch(&traced, "a");
    for point in &a.points {
        assert_eq!((point.maxima[0].abs() < 1e-12, point.multipliers.len()), (true, 2));
        let sum: f64 = point.multipliers.iter().map(|mu| mu.log_modulus).sum();
        absolute("log of the product", sum, -2.0 * 0.4 * PI, 1e-9);
    }
}
