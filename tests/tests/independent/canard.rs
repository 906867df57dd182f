//! The canard explosion: `eps x' = y - x^3/3 + x, y' = a - x`, eps = 0.05.

use armilla_record::EndReason;
use armilla_tests::{absolute, branch, job};

#[test]
fn the_branch_is_followed_through_the_explosion() {
    let traced = job("canard", r#"start: Settle(at: {"a": 0.9}), follow: (parameter: "a", from: 0.8, to: 1.05)"#);
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let a = branch(&traced, "a");
    let amplitude = |point: &armilla_record::Point| point.maxima[0] - point.minima[0];
    let within: Vec<_> = a.points.iter().filter(|point| (1.6..=2.8).contains(&amplitude(point))).collect();
    assert!(within.len() >= 3, "{} points in the explosion", within.len());
    for point in within {
        // Independent: single shooting with a Taylor integrator in 113-bit arithmetic: all amplitudes between 1.6 and 2.8
        // within 1e-8 of this value, which is known to 1e-8.
        absolute(&format!("explosion at amplitude {}", amplitude(point)), point.value, 0.993_490_93, 2e-8);
        // Published: 1 - eps/8 - 3 eps^2/32 - 173 eps^3/1024 + O(eps^4) (Zvonkin & Shubin 1984, Russ. Math. Surv. 39:69; from
        // memory); eps^4 is 6e-6.
        absolute("against the series", point.value, 0.993_494_506_8, 6e-6);
    }
    // From relaxation to birth, all on one branch.
    assert!(a.points.iter().any(|point| amplitude(point) > 3.9) && a.points.iter().any(|point| amplitude(point) < 0.2));
    assert!(matches!(a.ends.1.reason, EndReason::Equilibrium { .. }), "{:?}", a.ends);
}
