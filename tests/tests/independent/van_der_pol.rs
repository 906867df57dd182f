//! The van der Pol oscillator `x' = y, y' = mu (1 - x^2) y - x`.

use armilla_tests::{absolute, branch, event, job, relative};

/// Source of periods and log multipliers: independent, single shooting with a high-order Taylor integrator in 113-bit
/// arithmetic and Newton's method, two settings agreeing on the digits shown. Source of amplitudes: independent, Taylor
/// series of order 40 and 50 in 36 and 42 decimal digits, secant method on the half-period map, both agreeing on the
/// digits shown; it gives the same periods, and for mu = 1 the amplitude of the first source.
struct Known {
    mu: f64,
    period: f64,
    amplitude: Option<f64>,
    log_multiplier: f64,
}

#[expect(clippy::excessive_precision, reason = "the digits of the source")]
const KNOWN: [Known; 6] = [
    Known {
        mu: 0.1,
        period: 6.287_111_272_288_726_806_053_94,
        amplitude: Some(2.000_103_979_872_795_923_817_740_932),
        log_multiplier: -0.629_103_921_026_019_595_576_227,
    },
    Known {
        mu: 1.0,
        period: 6.663_286_859_323_130_189_699_68,
        amplitude: Some(2.008_619_860_874_843_136_509_64),
        log_multiplier: -7.058_932_808_798_959_179_02,
    },
    Known {
        mu: 5.0,
        period: 11.612_230_667_719_570_034_6,
        amplitude: Some(2.021_508_061_562_321_323_838_742_025),
        log_multiplier: -85.452_018_544_883_540_651_3,
    },
    // Its log multiplier comes from the second source: the integral of mu (1 - x^2) carried along in the Taylor series, order
    // 30 and 40 in 30 and 36 decimal digits agreeing on the digits shown; for mu = 5 it gives the digits of the first.
    Known {
        mu: 20.0,
        period: 34.682_323_311_652_683_567_1,
        amplitude: Some(2.007_789_970_865_430_297_274_867_4),
        log_multiplier: -1_194.764_379_909_780_095_004_633_1,
    },
    Known {
        mu: 100.0,
        period: 162.837_071_092_370_012_132,
        amplitude: None,
        log_multiplier: -28_997.988_457_287_026_5,
    },
    Known {
        mu: 1000.0,
        period: 1_614.401_125_808_333_983_07,
        amplitude: None,
        log_multiplier: -2_886_973.413_087_451_65,
    },
];

fn known(mu: f64) -> &'static Known {
    KNOWN.iter().find(|known| known.mu == mu).expect("a value of the table")
}

#[test]
fn period_amplitude_and_multiplier() {
    let traced = job(
        "vanderpol",
        r#"start: Settle(at: {"mu": 1.0}), follow: (parameter: "mu", from: 0.05, to: 6.0), targets: [0.1, 5.0], accuracy: 1e-11"#,
    );
    let a = branch(&traced, "a");
    for known in KNOWN.iter().filter(|known| known.mu <= 5.0) {
        let point = a.points.iter().find(|point| point.value == known.mu).expect("a point at the value");
        relative(&format!("period at mu = {}", known.mu), point.period, known.period, 1e-10);
        let amplitude = known.amplitude.expect("in the table");
        relative(&format!("amplitude at mu = {}", known.mu), point.maxima[0], amplitude, 1e-10);
        relative("amplitude by symmetry", -point.minima[0], amplitude, 1e-10);
        relative(
            &format!("log multiplier at mu = {}", known.mu),
            point.multipliers[0].log_modulus,
            known.log_multiplier,
            1e-10,
        );
        let event = traced.branches.iter().flat_map(|b| &b.events).find(|e| e.value == known.mu).expect("an event");
        let error = (event.period - known.period).abs();
        assert!(error <= event.period_error.expect("an error"), "error {error:e} is not covered: {event:?}");
    }
    assert_eq!(event(&traced, "a/start1").value, 1.0);
}

/// From hardly damped to a logarithm of -2.9 million, never unstable.
#[test]
fn log_multipliers_up_to_strong_relaxation() {
    let traced = job(
        "vanderpol",
        r#"start: Settle(at: {"mu": 5.0}), follow: (parameter: "mu", from: 1.0, to: 1000.0), targets: [20.0, 100.0], accuracy: 1e-10"#,
    );
    let a = branch(&traced, "a");
    for mu in [1.0, 5.0, 20.0, 100.0, 1000.0] {
        let point = a.points.iter().find(|point| point.value == mu).expect("a point at the value");
        relative(&format!("period at mu = {mu}"), point.period, known(mu).period, 1e-10);
        let found = point.multipliers[0].log_modulus;
        relative(&format!("log multiplier at mu = {mu}"), found, known(mu).log_multiplier, 1e-10);
    }
    assert!(a.points.iter().all(|point| point.is_stable() && point.unresolved.is_none()));
}

/// A third state that follows the oscillator, `z' = k (x - z)`, all three mixed: the multiplier of z is exp(-k T) exactly,
/// the other that of the oscillator. One direction is damped up to a thousand times more strongly than the other.
#[test]
fn an_oscillator_that_drives_a_slower_state() {
    for k in [0.01, 0.5] {
        let traced = job(
            "vanderpol_follower",
            &format!(
                r#"set: {{"k": {k}}}, start: Settle(at: {{"mu": 5.0}}), follow: (parameter: "mu", from: 4.0, to: 1000.0), targets: [20.0, 100.0]"#
            ),
        );
        let a = branch(&traced, "a");
        for mu in [5.0, 20.0, 100.0, 1000.0] {
            let point = a.points.iter().find(|point| point.value == mu).expect("a point at the value");
            let [slow, fast] = point.multipliers[..] else { panic!("two multipliers: {point:?}") };
            // The accuracy asked, of max(1, |log|).
            let exact = -k * known(mu).period;
            absolute(&format!("slow, mu = {mu}"), slow.log_modulus, exact, 1e-9 * exact.abs().max(1.0));
            relative(&format!("fast, mu = {mu}"), fast.log_modulus, known(mu).log_multiplier, 1e-9);
        }
        assert!(a.points.iter().all(|point| point.is_stable() && point.unresolved.is_none()));
    }
}

/// Frequency for small mu, published (Andersen & Geer 1982, SIAM J. Appl. Math. 42:678; coefficients from memory):
/// 1 - mu^2/16 + 17 mu^4/3072 + O(mu^6). What is left over must be of sixth order with a coefficient well below the last.
#[test]
fn frequency_for_small_mu() {
    let traced = job("vanderpol", r#"start: Settle(at: {"mu": 0.1}), follow: (parameter: "mu", from: 0.05, to: 0.2)"#);
    for point in &branch(&traced, "a").points {
        let mu = point.value;
        let series = 1.0 - mu * mu / 16.0 + 17.0 * mu.powi(4) / 3072.0;
        absolute(
            &format!("frequency at mu = {mu}"),
            std::f64::consts::TAU / point.period,
            series,
            1e-4 * mu.powi(6) + 1e-11,
        );
    }
}

/// From nearly harmonic to relaxation in one study. Source as above.
#[test]
#[expect(clippy::excessive_precision, reason = "the digits of the source")]
fn one_study_up_to_1000() {
    let traced = job(
        "vanderpol",
        r#"start: Settle(at: {"mu": 1.0}), follow: (parameter: "mu", from: 1, to: 1000), targets: [20, 100]"#,
    );
    let a = branch(&traced, "a");
    for (mu, period) in [
        (20.0, 34.682_323_311_652_683_567_1),
        (100.0, 162.837_071_092_370_012_132),
        (1000.0, 1_614.401_125_808_333_983_07),
    ] {
        let event = a.events.iter().find(|event| event.value == mu).expect("an event at the value");
        relative(&format!("period at mu = {mu}"), event.period, period, 1e-12);
        let error = event.period_error.expect("an error");
        assert!((event.period - period).abs() <= error, "{:e} is not covered: {event:?}", event.period - period);
    }
    for (mu, log_multiplier) in [(100.0, -28_997.988_457_287_026_5), (1000.0, -2_886_973.413_087_451_65)] {
        let point = a.points.iter().find(|point| point.value == mu).expect("a point at the value");
        relative(&format!("log multiplier at {mu}"), point.multipliers[0].log_modulus, log_multiplier, 1e-8);
    }
    assert!(a.points.iter().all(|point| point.is_stable()));
    // Published: T ~ (3 - 2 ln 2) mu + 7.014322 mu^(-1/3) (Grasman 1987, Asymptotic Methods for Relaxation Oscillations; from
    // memory); what follows is of order ln(mu)/mu.
    let law = |mu: f64| (3.0 - 2.0 * 2f64.ln()) * mu + 7.014_322 * mu.powf(-1.0 / 3.0);
    let last = &a.points[a.points.len() - 1];
    absolute("against the law of large mu", last.period, law(last.value), last.value.ln() / last.value);
}
