//! Cycles with exactly known multipliers, some of them strongly damped, in coordinates that mix everything.
//!
//! Exact, by hand: the circle `r' = r (1 - r^2)/2 * a, th' = 1` has period 2 pi and the multiplier exp(-2 pi a); states
//! `w' = M(th) w` beside it add the multipliers of that linear equation, known by construction. What the engine sees
//! is `s = S (x, y, w)` with a constant matrix S of determinant 1 whose inverse is exact in binary.

mod planted;

use std::f64::consts::{PI, TAU};

use planted::Planted;

#[test]
fn scratch() {
    let p = |radial| Planted::new(radial);
    let cases: Vec<(&str, Planted, Vec<f64>)> = vec![
        ("many", p(1.0).decay(30.0).decay(1e3).decay(1e6), vec![-1.0, -30.0, -1e3, -1e6]),
        ("many+", p(1.0).decay(30.0).decay(1e5).decay(1e6), vec![-1.0, -30.0, -1e5, -1e6]),
        ("two", p(1.0).decay(1e6).decay(1e6), vec![-1.0, -1e6, -1e6]),
        ("two1e3", p(1.0).decay(1e3).decay(1e3), vec![-1.0, -1e3, -1e3]),
        ("turn", p(0.5).turning(-1.0, -1e4, false), vec![-0.5, -1.0, -1e4]),
        ("turn+", p(0.5).turning(0.25, -1e6, false), vec![0.25, -0.5, -1e6]),
        ("half", p(0.5).turning(0.25, -1e5, true), vec![0.25, -0.5, -1e5]),
        ("half2", p(0.5).turning(-1e3, -1e5, true), vec![-0.5, -1e3, -1e5]),
        (
            "wide",
            p(36.0 / TAU).decay(18.0 / TAU).decay(-7.0 / TAU).turning(-0.2, 0.5, true),
            vec![7.0 / TAU, 0.5, -0.2, -18.0 / TAU, -36.0 / TAU],
        ),
        ("both100", p(1.0).decay(100.0).decay(-100.0), vec![100.0, -1.0, -100.0]),
        ("both1000", p(1.0).decay(1000.0).decay(-1000.0), vec![1000.0, -1.0, -1000.0]),
        ("bothturn", p(1.0).turning(100.0, -100.0, true), vec![100.0, -1.0, -100.0]),
        ("both1e5", p(1.0).decay(1e5).decay(-1e3), vec![1e3, -1.0, -1e5]),
        ("repel1e5", p(1.0).decay(-1e5), vec![1e5, -1.0]),
        ("canard5", p(1.0).swaying(-0.1, 5.0), vec![-0.1, -1.0]),
        ("canard10", p(1.0).swaying(0.1, 10.0), vec![0.1, -1.0]),
        ("canard15", p(1.0).swaying(0.1, 15.0), vec![0.1, -1.0]),
        ("canard50", p(1.0).swaying(-0.1, 50.0), vec![-0.1, -1.0]),
        ("canard5+1e5", p(1.0).swaying(0.1, 5.0).decay(1e5), vec![0.1, -1.0, -1e5]),
        ("canard1e4", p(1.0).swaying(-0.1, 1e4), vec![-0.1, -1.0]),
        ("sway1e4", p(1.0).swaying(-1e4, 0.9e4), vec![-1.0, -1e4]),
        ("sway2", p(1.0).swaying(-1e5, 0.9e5).swaying(-2e5, 1e5), vec![-1.0, -1e5, -2e5]),
    ];
    for (name, planted, rates) in cases {
        for mixed in [false, true] {
            let t = std::time::Instant::now();
            let planted = planted.clone().mixed(mixed);
            let Ok(point) = std::panic::catch_unwind(|| planted.describe(1e-9)) else {
                println!("{name} {mixed} FAULT");
                continue;
            };
            let errors: Vec<f64> = point
                .multipliers
                .iter()
                .zip(&rates)
                .map(|(m, r)| (m.log_modulus - TAU * r) / (1.0f64.max(TAU * r.abs())))
                .collect();
            println!(
                "{name} {mixed} {:?} {:?} {} {:?} T{:.1e} L{:.1e} N{} {:?}",
                errors,
                point.multipliers.iter().map(|m| (m.angle * 10.0).round()).collect::<Vec<_>>(),
                point.unstable_count,
                point.unresolved,
                point.trivial_defect,
                point.liouville_defect,
                point.intervals,
                t.elapsed()
            );
        }
    }
    let _ = PI;
}
