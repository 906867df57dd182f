//! Unstable cycles of the odd flow of Kuramoto and Sivashinsky, 16 modes.

use std::f64::consts::PI;

use armilla_tests::{Motion, absolute, branch, relative, sampled_job};

/// `a_k' = (k^2 - nu k^4) a_k - k Sum a_m a_(k-m)`, the sum over all m with a_(-m) = -a_m.
fn rates(_: f64, a: &[f64], out: &mut [f64]) {
    let n = a.len() as i64;
    let mode = |k: i64| match k {
        0 => 0.0,
        k if k.abs() > n => 0.0,
        k if k > 0 => a[k as usize - 1],
        k => -a[(-k) as usize - 1],
    };
    for k in 1..=n {
        let sum: f64 = (k - n..=n).map(|m| mode(m) * mode(k - m)).sum();
        let square = (k * k) as f64;
        out[k as usize - 1] = (square - 0.02991 * square * square) * a[k as usize - 1] - k as f64 * sum;
    }
}

/// A state on each cycle, found by close returns of a long run and Newton's method on the map over the period (SciPy's LSODA
/// and MINPACK's hybrd).
const STATES: [[f64; 16]; 3] = [
    [
        -5.529836078e-01,
        2.026387661e-01,
        2.114053366e-01,
        -2.336231165e+00,
        6.415374180e-01,
        3.652722046e-02,
        -8.714381537e-02,
        -6.769891574e-01,
        2.105721437e-01,
        6.554565502e-04,
        -1.232856513e-02,
        -7.659080407e-02,
        3.481571337e-02,
        -2.875185128e-03,
        -2.159922056e-03,
        -7.174723135e-03,
    ],
    [
        2.642778930e-01,
        -1.132660706e-01,
        -7.703002889e-01,
        -7.931521376e-01,
        8.307848493e-01,
        -1.821961194e+00,
        6.360118660e-02,
        1.048846804e-02,
        -1.208807384e-01,
        -1.665718746e-01,
        1.104123732e-01,
        -9.380022064e-02,
        -2.522308822e-03,
        1.797828457e-03,
        -1.678204262e-03,
        -8.712955255e-03,
    ],
    [
        -5.824283058e-01,
        -2.117744020e-01,
        9.145100670e-01,
        -1.901492771e+00,
        -1.379503636e+00,
        -1.249010013e+00,
        5.777827312e-01,
        -1.500372176e-01,
        -2.110792092e-01,
        -3.818980321e-01,
        -4.284599932e-02,
        -7.628132783e-03,
        1.695441683e-02,
        -3.897787428e-02,
        -1.827852785e-02,
        -8.749692308e-03,
    ],
];

/// nu = 0.029910: periods 0.897653443, 0.870729479, leading multipliers 3.298183, -2.014327 (Christiansen, Cvitanovic &
/// Putkaradze 1997, Nonlinearity 10:55, from memory; recomputed by single shooting in 113 bits to these digits). The
/// third, T = 1.751810703637, by single shooting with the classical method of Runge and Kutta, 8000 steps, and Newton's
/// method (leading multiplier -3.801854 by differences). From one period of samples with 2 % noise, the period not stated.
#[test]
fn three_unstable_cycles() {
    let names: Vec<String> = (1..=16).map(|k| format!("a{k}")).collect();
    let names: Vec<&str> = names.iter().map(String::as_str).collect();
    let motion = Motion { rates: &rates, steps: 5000.0 };
    for (state, (period, multiplier)) in
        STATES.iter().zip([(0.897_653_443, 3.298_183f64), (0.870_729_479, -2.014_327), (1.751_810_703_637, -3.801_854)])
    {
        for noise in [0.0, 0.02] {
            let table = motion.table(&names, state, (0.0, period, 160), noise);
            let traced = sampled_job(
                "kuramoto",
                &table,
                r#"start: Samples(file: "cycle.csv"), follow: (parameter: "nu", from: 0.02991, to: 0.0300), accuracy: 1e-9,
                   pursue: (doublings: 0, points: 3)"#,
            )
            .unwrap_or_else(|fault| panic!("{period}, noise {noise}: {fault}"));
            let point = branch(&traced, "a").points.iter().find(|point| point.value == 0.02991).expect("the start");
            relative(&format!("period, noise {noise}"), point.period, period, 1.2e-9);
            let leading = point.multipliers[0];
            // Half a unit of the last digit given.
            absolute("leading multiplier", leading.log_modulus.exp(), multiplier.abs(), 1e-6);
            assert_eq!(leading.angle, if multiplier < 0.0 { PI } else { 0.0 });
            assert_eq!(point.unstable_count, 1);
        }
    }
}
