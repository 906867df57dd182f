//! Whole settlings against exact, published and independently computed values.

// The models are shared with the unit tests, which use some of them alone.
#[allow(dead_code)]
#[path = "../src/test_models.rs"]
mod test_models;

use std::f64::consts::PI;
use std::sync::atomic::AtomicBool;

use armilla_flow::{Cycle, FlowError, Limit, SettleOptions, Settled, Verdict, settle};
use armilla_model::{Batch, VectorField};

use test_models::{
    TestField, common_brusselator, duffing, dying_oscillator, dying_passenger, hopf_with_shear, lorenz, pendulum,
    prey_and_predator, random_quadratic, roessler, saddle_loop, scaled_van_der_pol, torus_case, twisted_band, tyson,
    van_der_pol,
};

fn run(field: &TestField, parameters: &[f64], state: &[f64]) -> Settled {
    settle(field, parameters, state, &SettleOptions::default()).expect("it can be simulated")
}

fn cycle(field: &TestField, parameters: &[f64], state: &[f64]) -> Cycle {
    match run(field, parameters, state).verdict {
        Verdict::Cycle(cycle) => *cycle,
        other => panic!("{parameters:?}: {other:?}"),
    }
}

fn close(found: f64, exact: f64, tolerance: f64) {
    assert!((found / exact - 1.0).abs() < tolerance, "{found} for {exact}");
}

/// Exact: period 2 pi/(1 + k mu), radius sqrt(mu).
#[test]
fn hopf_with_shear_settles_on_its_circle() {
    let cycle = cycle(&hopf_with_shear(), &[0.25, 0.5], &[1.0, 0.3]);
    close(cycle.period(), 5.585_053_606_381_854, 1e-10);
    assert_eq!(cycle.turns, 1);
    let profile = cycle.profile(4, 40);
    profile.validate().expect("a valid profile");
    let radius = |t: f64| profile.at(t).iter().map(|x| x * x).sum::<f64>().sqrt();
    let worst = (0..100).map(|k| (radius(k as f64 / 100.0) - 0.5).abs()).fold(0.0, f64::max);
    assert!(worst < 1e-6, "interpolation of degree 4 on 40 pieces is good to 1e-7: {worst}");
}

/// Periods computed independently with 113 bits by single shooting; from rest at 0 nearly, too.
#[test]
fn van_der_pol_periods() {
    let field = van_der_pol();
    for (mu, period) in [(0.1, 6.287_111_272_288_727), (1.0, 6.663_286_859_323_13), (5.0, 11.612_230_667_719_57)] {
        let cycle = cycle(&field, &[mu], &[0.5, 0.0]);
        close(cycle.period(), period, 1e-9);
        assert_eq!(cycle.turns, 1);
    }
}

/// The same source; large amplitude quotient of time scales, about mu^2 = 1e6.
#[test]
fn stiff_van_der_pol_periods() {
    let field = van_der_pol();
    for (mu, period) in [(100.0, 162.837_071_092_370_02), (1000.0, 1_614.401_125_808_334)] {
        let cycle = cycle(&field, &[mu], &[2.0, 0.0]);
        close(cycle.period(), period, 1e-9);
        assert_eq!(cycle.turns, 1);
    }
}

/// Period at c = 1 computed independently with 113 bits; numbers of turns: common knowledge of the
/// doubling sequence (first below 3, second below 4) and of the three-turn window above 5.
#[test]
fn roessler_turns() {
    let field = roessler();
    let start = [1.0, 1.0, 0.0];
    close(cycle(&field, &[0.2, 0.2, 1.0], &start).period(), 5.541_660_322_289_143, 1e-9);
    for (c, turns) in [(2.0, 1), (3.5, 2), (4.0, 4), (5.25, 3)] {
        assert_eq!(cycle(&field, &[0.2, 0.2, c], &start).turns, turns, "c = {c}");
    }
}

/// Roessler's first attractor (1976, Phys. Lett. 57A:397) at c = 5.7 is chaotic, with the largest exponent
/// 0.0714 (Sprott 2003, Chaos and Time-Series Analysis, from memory).
#[test]
fn chaos_does_not_settle() {
    let Verdict::Irregular(evidence) = run(&roessler(), &[0.2, 0.2, 5.7], &[1.0, 1.0, 0.0]).verdict else {
        panic!("it must be irregular")
    };
    assert_eq!(evidence.limit, Limit::Returns);
    assert!(evidence.nearest.expect("there are returns").distance > 1e-7);
    let exponent = evidence.exponent.expect("it was measured");
    assert!((exponent.value - 0.0714).abs() < 5.0 * exponent.spread + 5e-4, "{exponent:?}");
}

/// Exact: torus threshold at lam = 2; below it the cycle attracts with T = 8 pi, above a torus does. Its rotation
/// is near 8/21 of a turn, at lam = 2.001 near 1/3.
#[test]
fn the_torus_case_on_both_sides() {
    let field = torus_case();
    for lam in [1.95, 1.999] {
        let below = cycle(&field, &[lam], &[0.6, 0.0, 1.2]);
        close(below.period(), 8.0 * PI, 1e-9);
    }
    for lam in [2.001, 2.003, 2.01] {
        let settled = run(&field, &[lam], &[0.6, 0.0, 1.2]);
        assert!(matches!(settled.verdict, Verdict::QuasiPeriodic(_)), "lam = {lam}: {:?}", settled.verdict);
    }
}

/// Thresholds computed independently with 113 bits: doublings at 2.832445028, 3.837358168, 4.124214733; the window of
/// three turns from 5.185085783, its doubling at 5.379419821. Close to each on both sides the approach is slow (at
/// 2.8323 the multiplier is -0.9999), and nothing but the right number of turns may come out.
#[test]
fn turns_close_to_doublings_and_folds() {
    let field = roessler();
    let cases = [
        (2.83, 1),
        (2.8323, 1),
        (2.8326, 2),
        (2.84, 2),
        (3.83, 2),
        (3.8374, 4),
        (3.85, 4),
        (4.12, 4),
        (4.13, 8),
        (5.1851, 3),
        (5.37, 3),
        (5.38, 6),
    ];
    for (c, turns) in cases {
        assert_eq!(cycle(&field, &[0.2, 0.2, c], &[1.0, 1.0, 0.0]).turns, turns, "c = {c}");
    }
}

/// Exact: eigenvalues mu ± i of the rest at 0; slow spirals included.
#[test]
fn spirals_go_to_rest() {
    for mu in [-0.5, -1e-2, -1e-3, -1e-4, -1e-6] {
        let settled = run(&hopf_with_shear(), &[mu, 0.5], &[0.3, 0.1]);
        let Verdict::Equilibrium(rest) = settled.verdict else { panic!("mu = {mu}") };
        assert!(rest.state.iter().all(|x| x.abs() < 1e-12), "{rest:?}");
        assert!((rest.growth() - mu).abs() < 1e-12);
        assert!(settled.pushes.is_empty());
    }
}

/// A start exactly at the unstable rest of van der Pol's equation is pushed off it, and that is said.
#[test]
fn a_start_on_an_unstable_rest_is_pushed_and_reported() {
    let settled = run(&van_der_pol(), &[1.0], &[0.0, 0.0]);
    let Verdict::Cycle(cycle) = &settled.verdict else { panic!("it settles on the cycle") };
    close(cycle.period(), 6.663_286_859_323_13, 1e-9);
    assert_eq!(settled.pushes.len(), 1);
    assert!((settled.pushes[0].equilibrium.growth() - 0.5).abs() < 1e-12);
}

/// A classical Runge-Kutta integration of order 4 with fixed small steps, as a witness of its own.
fn witness(field: &TestField, parameters: &[f64], start: &[f64], time: f64, steps: usize) -> Vec<f64> {
    let n = start.len();
    let mut evaluator = field.evaluator(&[]);
    let mut rates = |t: f64, x: &[f64]| {
        let mut out = vec![0.0; n];
        evaluator.rates(Batch { len: 1, time: &[t], states: x, parameters }, &mut out);
        out
    };
    let moved = |x: &[f64], k: &[f64], h: f64| -> Vec<f64> { x.iter().zip(k).map(|(x, k)| x + h * k).collect() };
    let h = time / steps as f64;
    let mut x = start.to_vec();
    for step in 0..steps {
        let t = step as f64 * h;
        let a = rates(t, &x);
        let b = rates(t + 0.5 * h, &moved(&x, &a, 0.5 * h));
        let c = rates(t + 0.5 * h, &moved(&x, &b, 0.5 * h));
        let d = rates(t + h, &moved(&x, &c, h));
        for i in 0..n {
            x[i] += h / 6.0 * (a[i] + 2.0 * b[i] + 2.0 * c[i] + d[i]);
        }
    }
    x
}

/// A forced model returns at multiples of the forcing period; the witness confirms that the start of the
/// profile comes back (order 4, 40 000 steps: error about 1e-12).
#[test]
fn forced_duffing_settles_at_its_forcing_period() {
    let field = duffing();
    let parameters = [0.1, 0.04, 1.0, 1.0];
    let period = 2.0 * PI;
    let options = SettleOptions { forcing_period: Some(period), ..SettleOptions::default() };
    let settled = settle(&field, &parameters, &[0.0, 0.0], &options).expect("it can be simulated");
    let Verdict::Cycle(cycle) = settled.verdict else { panic!("{:?}", settled.verdict) };
    assert_eq!(cycle.turns, 1);
    close(cycle.period(), period, 1e-13);
    let start = cycle.orbit.node(0);
    let end = witness(&field, &parameters, start, period, 40_000);
    let gap = start.iter().zip(&end).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
    assert!(gap < 1e-8, "{gap}");
    let missing = settle(&field, &parameters, &[0.0, 0.0], &SettleOptions::default()).expect_err("no period");
    assert_eq!(missing, FlowError::ForcingPeriodMissing);
}

/// Units do not matter: van der Pol with x in units of 1e-9, y in units of 1e8, and with x riding on an offset
/// of 1000 in units of 1e-3 (where seven digits are lost to the offset).
#[test]
fn units_and_offsets_do_not_matter() {
    let field = scaled_van_der_pol();
    for (parameters, tolerance) in [([1e-9, 1e8, 0.0], 1e-9), ([1e-3, 1.0, 1000.0], 1e-7)] {
        let start = [parameters[2] + 0.5 * parameters[0], 0.0];
        close(cycle(&field, &parameters, &start).period(), 6.663_286_859_323_13, tolerance);
    }
}

/// Exact: T = 2 pi/(1 + k mu), multiplier exp(-4 pi mu/(1 + k mu)): 0.99874 and 0.999874 here. Waiting for it
/// would take 16 000 and 160 000 turns.
#[test]
fn slow_approaches_are_cut_short() {
    for mu in [1e-4, 1e-5] {
        let field = hopf_with_shear();
        let cycle = cycle(&field, &[mu, 0.5], &[1.3 * f64::sqrt(mu), 0.0]);
        close(cycle.period(), 2.0 * PI / (1.0 + 0.5 * mu), 1e-9);
        let radius = cycle.orbit.node(0).iter().map(|x| x * x).sum::<f64>().sqrt();
        close(radius, mu.sqrt(), 1e-6);
    }
}

/// Lorenz at r = 28, largest exponent 0.9056 (Viswanath 1998; Sprott 2003, from memory).
#[test]
fn lorenz_is_irregular() {
    let Verdict::Irregular(evidence) = run(&lorenz(), &[10.0, 28.0, 8.0 / 3.0], &[1.0, 2.0, 3.0]).verdict else {
        panic!("it must be irregular")
    };
    let exponent = evidence.exponent.expect("it was measured");
    assert!((exponent.value - 0.9056).abs() < 5.0 * exponent.spread && exponent.spread < 0.02, "{exponent:?}");
}

/// Period computed independently with 113 bits by single shooting, A = 1, B = 3.
#[test]
fn brusselator() {
    close(cycle(&common_brusselator(), &[1.0, 3.0], &[1.0, 1.0]).period(), 7.156_919_921_179_88, 1e-9);
}

/// Period computed independently (k6 = 1); the rates differ by a factor of 1e4 (Tyson 1991, PNAS 88:7328).
#[test]
fn tyson_cell_cycle() {
    close(cycle(&tyson(), &[0.015, 180.0, 1e-4, 1.0], &[0.1, 0.2]).period(), 35.597_934_978, 1e-9);
}

/// Exact: T = 2 sqrt 2 K(m)/x1 on the level h of a Hamiltonian, here near its saddle loop, eps = 1. The period
/// goes as -ln|h|, so an error of 1e-11 a step in h shows as 1e-11/|h| in it.
#[test]
fn towards_a_saddle_loop() {
    for (h, period) in [(-0.01, 7.408_711_125_539_787), (-1e-4, 11.983_577_749_548_43), (-1e-8, 21.193_269_600_141_67)]
    {
        let tolerance = f64::max(1e-9, 1e-11 / f64::abs(h));
        close(cycle(&saddle_loop(), &[1.0, h], &[1.2, 0.0]).period(), period, tolerance);
    }
}

/// Exact: rests at -1, 0, 1 with eigenvalues -2, 1, -2; a conserved sum; a start at rest.
#[test]
fn one_state_a_conserved_sum_and_a_start_at_rest() {
    let cubic = TestField::new(1, 0, |_, x, _, f, j| {
        f[0] = x[0] - x[0].powi(3);
        j[0] = 1.0 - 3.0 * x[0] * x[0];
    });
    let settled = run(&cubic, &[], &[0.0]);
    let Verdict::Equilibrium(rest) = &settled.verdict else { panic!("{:?}", settled.verdict) };
    assert!((rest.state[0] - 1.0).abs() < 1e-12 && (rest.growth() + 2.0).abs() < 1e-12);
    assert_eq!(settled.pushes.len(), 1);
    let settled = run(&cubic, &[], &[-1.0]);
    assert!(matches!(settled.verdict, Verdict::Equilibrium(_)) && settled.time == 0.0);
    let exchange = TestField::new(2, 0, |_, x, _, f, j| {
        f.copy_from_slice(&[x[1] - x[0], x[0] - x[1]]);
        j.copy_from_slice(&[-1.0, 1.0, 1.0, -1.0]);
    });
    let settled = run(&exchange, &[], &[1.0, 0.0]);
    let Verdict::Equilibrium(rest) = &settled.verdict else { panic!("{settled:?}") };
    assert!(rest.state.iter().all(|x| (x - 0.5).abs() < 1e-8), "{rest:?}");
}

/// x' = x grows without bound; the error tells where it was.
#[test]
fn divergence_is_an_error() {
    let field = TestField::new(1, 0, |_, x, _, f, j| {
        f[0] = x[0];
        j[0] = 1.0;
    });
    let error = settle(&field, &[], &[1.0], &SettleOptions::default()).expect_err("it diverges");
    let FlowError::Diverges { state_index: 0, time, state } = error else { panic!("{error}") };
    assert!((time - 1e30f64.ln()).abs() < 10.0, "e^t passes 1e30 at {}: {time}", 1e30f64.ln());
    close(state[0], time.exp(), 1e-8);
}

/// A slow drift never returns; limits of time, steps and a wish to stop end it in their own ways.
#[test]
fn limits_end_a_run() {
    let drift = TestField::new(1, 0, |_, _, _, f, j| {
        f[0] = 1.0;
        j[0] = 0.0;
    });
    let options = SettleOptions { longest_time: Some(1e4), ..SettleOptions::default() };
    let Verdict::NotSettled(evidence) = settle(&drift, &[], &[1.0], &options).expect("no error").verdict else {
        panic!("a drift settles nowhere")
    };
    assert_eq!(evidence.limit, Limit::Time);
    assert_eq!(evidence.returns, 0);
    let options = SettleOptions { steps: 300, ..SettleOptions::default() };
    let settled = settle(&roessler(), &[0.2, 0.2, 5.7], &[1.0, 1.0, 0.0], &options).expect("no error");
    assert!(matches!(&settled.verdict, Verdict::NotSettled(evidence) if evidence.limit == Limit::Steps));
    let stop = AtomicBool::new(true);
    let options = SettleOptions { abort: &stop, ..SettleOptions::default() };
    let error = settle(&roessler(), &[0.2, 0.2, 5.7], &[1.0, 1.0, 0.0], &options).expect_err("it was stopped");
    assert!(matches!(error, FlowError::Aborted { .. }));
}

/// The profile handed over is the cycle to what its degree can hold: error h^5 with 60 pieces dealt out well.
#[test]
fn profiles_follow_relaxation_oscillations() {
    let field = van_der_pol();
    for (mu, intervals, tolerance) in [(1.0, 40, 1e-5), (5.0, 60, 1e-4), (1000.0, 200, 2e-2)] {
        let cycle = cycle(&field, &[mu], &[2.0, 0.0]);
        let profile = cycle.profile(4, intervals);
        profile.validate().expect("a valid profile");
        let ranges: Vec<f64> = cycle.orbit.extremes().iter().map(|(low, high)| high - low).collect();
        let mut worst: f64 = 0.0;
        for t in cycle.orbit.node_times() {
            for (i, (a, b)) in profile.at(t).iter().zip(cycle.orbit.at(t)).enumerate() {
                worst = worst.max((a - b).abs() / ranges[i]);
            }
        }
        assert!(worst < tolerance, "mu = {mu}: {worst}");
    }
}

/// Seeded random quadratic models in 2 to 5 states, bounded by a cubic damping: every run ends, in numbers that
/// are finite.
#[test]
fn random_models_end_in_finite_numbers() {
    let options = SettleOptions { steps: 60_000, returns: 300, ..SettleOptions::default() };
    for seed in 1..=80u64 {
        let n = 2 + (seed % 4) as usize;
        let field = random_quadratic(n);
        let parameters: Vec<f64> = random_numbers(seed, n * n + n * n * n);
        match settle(&field, &parameters, &random_numbers(seed + 1000, n), &options) {
            Ok(settled) => match settled.verdict {
                Verdict::Cycle(cycle) => cycle.profile(4, 20).validate().expect("a valid profile"),
                Verdict::Equilibrium(rest) => assert!(rest.state.iter().all(|x| x.is_finite()), "seed {seed}"),
                _ => assert!(settled.time.is_finite()),
            },
            Err(error) => panic!("seed {seed}: {error}"),
        }
    }
}

/// Settles on one turn with the exact period, in at most so many steps and so much time.
fn settles_soon(field: &TestField, parameters: &[f64], start: &[f64], (period, time, steps): (f64, f64, usize)) {
    let settled = run(field, parameters, start);
    let Verdict::Cycle(cycle) = &settled.verdict else { panic!("{parameters:?}: {:?}", settled.verdict) };
    close(cycle.period(), period, 1e-9);
    assert_eq!(cycle.turns, 1, "{parameters:?}");
    assert!(cycle.state_index < 2 && !cycle.neutral, "{parameters:?}: {cycle:?}");
    let stats = settled.stats;
    assert!(settled.time <= time && stats.accepted + stats.rejected <= steps, "{} {stats:?}", settled.time);
}

/// Exact cycles in a plane of symmetry: the state across it dies out to the roundoff that the others feed into it, and
/// holds up nothing. The time asked for is that of the slowest multiplier, at mu = -0.1 exp(-0.63) a turn: 1e-11
/// takes 40 turns, and 48 returns make a window.
#[test]
fn a_state_that_dies_to_roundoff_holds_up_nothing() {
    for mu in [-0.1, -0.3, -1.0] {
        settles_soon(&twisted_band(), &[mu, 0.5, 1.0], &[1.02, 0.0, 0.01], (2.0 * PI, 600.0, 6_000));
    }
    settles_soon(&dying_oscillator(), &[], &[0.5, 0.1, 0.01, 0.0], (2.0 * PI, 600.0, 6_000));
}

/// The same where the rate of the dying state is in proportion to it, so that it dies for good, fast (m = -0.5) or
/// slowly. Exact: c x y is the derivative of c x^2/2, so the multiplier is exp(m T). Period of van der Pol's equation at
/// mu = 1 computed independently with 113 bits.
#[test]
fn a_state_that_dies_for_good_holds_up_nothing() {
    for m in [-5.0, -0.5, -0.1, -0.02] {
        let time = 600.0 + 60.0 / -m;
        let steps = (20.0 * time) as usize;
        settles_soon(&dying_passenger(), &[m, 0.3], &[1.5, 0.3, 0.01], (6.663_286_859_323_13, time, steps));
    }
}

/// A transient a million times wider than the cycle does not make its states dead: exact circle of radius 1e-3.
#[test]
fn a_wide_transient_is_not_taken_for_a_life() {
    let mu = 1e-6;
    let cycle = cycle(&hopf_with_shear(), &[mu, 0.5], &[1e3, 0.0]);
    close(cycle.period(), 2.0 * PI / (1.0 + 0.5 * mu), 1e-9);
    assert_eq!(cycle.turns, 1);
}

/// Conservative models settle on the cycle of their start, and say that it is one of a continuum; with the least
/// damping they go to rest, and attracting cycles with an undamped state, or with weak attraction, are not neutral.
/// Exact: the pendulum from q = 1 at rest has T = 4 K(sin^2 1/2) = 6.699...; small prey-predator cycles have
/// T = 2 pi/sqrt(a b).
#[test]
fn conservative_cycles_are_neutral() {
    let from_side = cycle(&pendulum(), &[0.0], &[1.0, 0.0]);
    // 4 K by the arithmetic-geometric mean of 1 and cos(1/2).
    let (mut a, mut b) = (1.0f64, 0.5f64.cos());
    (0..6).for_each(|_| (a, b) = (0.5 * (a + b), (a * b).sqrt()));
    close(from_side.period(), 2.0 * PI / a, 1e-9);
    assert!(from_side.neutral);
    let small = cycle(&prey_and_predator(), &[2.0, 0.5], &[0.501, 2.0]);
    close(small.period(), 2.0 * PI, 1e-5);
    assert!(small.neutral);
    assert!(cycle(&prey_and_predator(), &[1.0, 1.0], &[3.0, 0.2]).neutral);
    let damped = run(&pendulum(), &[1e-3], &[1.0, 0.0]);
    assert!(matches!(damped.verdict, Verdict::Equilibrium(_)), "{:?}", damped.verdict);
    assert!(!cycle(&van_der_pol(), &[1e-3], &[0.5, 0.0]).neutral);
    assert!(!cycle(&hopf_with_shear(), &[1e-4, 0.5], &[0.01, 0.0]).neutral);
}

/// A linear congruence (Knuth's MMIX constants), numbers in [-2, 2).
fn random_numbers(seed: u64, count: usize) -> Vec<f64> {
    let mut state = seed;
    let mut next = || {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        4.0 * ((state >> 11) as f64 / (1u64 << 53) as f64) - 2.0
    };
    (0..8).for_each(|_| {
        next();
    });
    (0..count).map(|_| next()).collect()
}
