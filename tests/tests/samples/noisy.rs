//! Stable cycles from samples with noise, their period stated and not.

use std::sync::atomic::{AtomicUsize, Ordering};

use armilla_tests::{Motion, branch, relative, sampled_job};

fn van_der_pol(_: f64, x: &[f64], out: &mut [f64]) {
    out[0] = x[1];
    out[1] = (1.0 - x[0] * x[0]) * x[1] - x[0];
}

fn roessler(c: f64) -> impl Fn(f64, &[f64], &mut [f64]) {
    move |_, x, out| {
        out[0] = -x[1] - x[2];
        out[1] = x[0] + 0.2 * x[1];
        out[2] = 0.2 + x[2] * (x[0] - c);
    }
}

/// van der Pol's oscillator, mu = 1: T = 6.66328685932313018969968, computed independently by single shooting with a
/// high-order Taylor integrator in 113-bit arithmetic. From samples of one period, of a little less and more, and of five,
/// with 3 % noise and without.
#[test]
fn van_der_pol_with_noise() {
    let motion = Motion { rates: &van_der_pol, steps: 400.0 };
    let start = motion.state_after(&[2.0, 0.0], 0.0, 60.0);
    for (span, count) in [(6.663_286_859, 200), (6.5, 120), (7.0, 200), (33.0, 700)] {
        for noise in [0.0, 0.03] {
            let table = motion.table(&["x", "y"], &start, (2.5, span, count), noise);
            for period in ["", ", period: 6.7"] {
                let traced = sampled_job(
                    "vanderpol",
                    &table,
                    &format!(
                        r#"start: Samples(file: "cycle.csv"{period}), follow: (parameter: "mu", from: 0.9, to: 1.1), accuracy: 1e-10"#
                    ),
                )
                .unwrap_or_else(|fault| panic!("span {span}, noise {noise}{period}: {fault}"));
                assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
                let at = branch(&traced, "a").points.iter().find(|point| point.value == 1.0).expect("the start");
                relative("period", at.period, 6.663_286_859_323_130_189_699_68, 1e-11);
                assert_eq!(at.turns, 1);
                let told = &traced.notes[0];
                assert!(told.contains(&format!("{count} samples; period")), "{told}");
                let noise_told = percent_after(told, "noise about ");
                if !period.is_empty() {
                    // A period that is off shows as noise.
                    continue;
                }
                if noise == 0.0 {
                    assert!(noise_told < 0.05, "{told}");
                } else {
                    // Ranges of noisy samples are larger, by up to six standard deviations.
                    assert!(noise_told > 2.2 && noise_told < 3.3, "{told}");
                }
            }
        }
    }
}

/// Roessler's band, a = b = 0.2, c = 1 (T = 5.54166032228914306269790), and the three-turn cycle at its first doubling
/// c = 5.379419820792818286172024 (T = 17.45243763015314592): independent computation as above. There the samples are those
/// of a run at c = 5.3, where that cycle attracts: the model that they are held against need not be the one they came from.
#[test]
fn roessler_with_noise() {
    let band = roessler(1.0);
    let motion = Motion { rates: &band, steps: 300.0 };
    let start = motion.state_after(&[0.5, 0.0, 0.2], 0.0, 400.0);
    for (span, count, noise) in [(5.541_660_322, 150, 0.0), (5.541_660_322, 150, 0.03), (18.0, 500, 0.03)] {
        let table = motion.table(&["x", "y", "z"], &start, (0.0, span, count), noise);
        let traced = sampled_job(
            "roessler",
            &table,
            r#"start: Samples(file: "cycle.csv"), follow: (parameter: "c", from: 0.9, to: 1.1), accuracy: 1e-10"#,
        )
        .unwrap_or_else(|fault| panic!("span {span}, noise {noise}: {fault}"));
        let at = branch(&traced, "a").points.iter().find(|point| point.value == 1.0).expect("the start");
        relative("period", at.period, 5.541_660_322_289_143_062_697_90, 1e-10);
    }
    let chaotic = roessler(5.3);
    let motion = Motion { rates: &chaotic, steps: 200.0 };
    let start = motion.state_after(&[1.0, 1.0, 0.0], 0.0, 3000.0);
    for noise in [0.0, 0.03] {
        let table = motion.table(&["x", "y", "z"], &start, (0.0, 60.0, 1200), noise);
        let traced = sampled_job(
            "roessler",
            &table,
            r#"set: {"c": 5.379419820792818}, start: Samples(file: "cycle.csv"), accuracy: 1e-10,
               follow: (parameter: "c", from: 5.379419820792818, to: 5.38), pursue: (doublings: 0)"#,
        )
        .unwrap_or_else(|fault| panic!("noise {noise}: {fault}"));
        let at =
            branch(&traced, "a").points.iter().find(|point| point.value == 5.379_419_820_792_818).expect("the start");
        relative("period", at.period, 17.452_437_630_153_145_92, 1e-9);
        assert_eq!(at.turns, 3);
        let first = at.multipliers[0];
        assert!(first.log_modulus.abs() < 1e-6 && first.angle == std::f64::consts::PI, "{first:?}");
    }
}

/// The number in per cent behind some words.
fn percent_after(text: &str, words: &str) -> f64 {
    let rest = text.split(words).nth(1).unwrap_or_else(|| panic!("no `{words}` in `{text}`"));
    rest.split(' ').next().and_then(|number| number.parse().ok()).unwrap_or_else(|| panic!("no number in `{text}`"))
}

/// A cycle whose states are of most different sizes, sampled unevenly: more densely where it moves fast, as an integrator
/// with steps of its own would write it. Exact by construction: van der Pol's oscillator in other units of state and time has
/// the same period in those units.
#[test]
fn uneven_samples_in_other_units() {
    let calls = AtomicUsize::new(0);
    let rates = |t: f64, x: &[f64], out: &mut [f64]| {
        calls.fetch_add(1, Ordering::Relaxed);
        van_der_pol(t, x, out);
    };
    let motion = Motion { rates: &rates, steps: 400.0 };
    let mut state = motion.state_after(&[2.0, 0.0], 0.0, 60.0);
    let (mut time, mut text) = (0.0, "y,t,x\n".to_string());
    while time < 6.5 {
        text.push_str(&format!("{:.9e},{time:.9},{:.9e}\n", state[1], state[0]));
        let step = 0.15 / (1.0 + state[1].abs());
        state = motion.state_after(&state, time, step);
        time += step;
    }
    let traced = sampled_job(
        "vanderpol",
        &text,
        r#"start: Samples(file: "cycle.csv"), follow: (parameter: "mu", from: 0.9, to: 1.1), accuracy: 1e-10"#,
    )
    .unwrap_or_else(|fault| panic!("{fault}"));
    let at = branch(&traced, "a").points.iter().find(|point| point.value == 1.0).expect("the start");
    relative("period", at.period, 6.663_286_859_323_130_189_699_68, 1e-11);
    assert!(calls.load(Ordering::Relaxed) > 0);
}
