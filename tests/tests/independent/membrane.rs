//! The squid axon at 6.3 degrees (Hodgkin & Huxley 1952, J. Physiol. 117:500), g = 120, 36, 0.3, E = 115, -12, 10.599 mV from
//! rest, followed in the current.

use armilla_record::EndReason;
use armilla_tests::{branch, event, job, relative};

#[test]
fn from_spikes_through_the_fold_onto_the_unstable_branch() {
    let traced = job(
        "hodgkin_huxley",
        r#"start: Settle(at: {"I": 10}), follow: (parameter: "I", from: 5, to: 160), pursue: (doublings: 0)"#,
    );
    assert!(traced.shortfalls.is_empty(), "{:?}", traced.shortfalls);
    let a = branch(&traced, "a");
    // Independent: single shooting with a Taylor integrator in 113-bit arithmetic, twelve digits.
    let fold = event(&traced, "a/fold1");
    relative("end of the stable branch", fold.value, 6.264_521_274_51, 2e-12);
    assert!((fold.value - 6.264_521_274_51).abs() <= fold.error.expect("an error") + 1e-11, "{fold:?}");
    // Spikes are stable down to the fold and unstable behind it.
    for point in &a.points {
        let spikes = point.distance > fold.distance && point.value < 150.0;
        assert!(!spikes || point.is_stable(), "{point:?}");
        // The branch turns once more before it shrinks to rest; it is nowhere stable there but between its two doublings.
        assert!(point.distance > fold.distance || point.value > fold.value, "{point:?}");
    }
    assert!(a.points.iter().filter(|point| point.distance < fold.distance).count() > 10);
    // Exact: Hurwitz's determinant of the Jacobian at rest vanishes; solved in 40 decimals. Published as 9.78 and 154.5
    // (Hassard 1978, J. Theor. Biol. 71:401; Rinzel & Miller 1980, Math. Biosci. 49:27; from memory).
    for (name, current, period) in [
        ("a/hopf2", 9.779_637_995_393_126_3, 10.717_882_807_935_417_3),
        ("a/hopf1", 154.526_633_665_808_000_9, 5.911_239_441_337_659_14),
    ] {
        let hopf = event(&traced, name);
        relative(name, hopf.value, current, 1e-11);
        relative("period there", hopf.period, period, 1e-11);
        assert!((hopf.value - current).abs() <= hopf.error.expect("an error"), "{hopf:?}");
        assert!((hopf.period - period).abs() <= hopf.period_error.expect("an error"), "{hopf:?}");
    }
    for end in [&a.ends.0, &a.ends.1] {
        assert!(matches!(end.reason, EndReason::Equilibrium { .. }), "{end:?}");
    }
}
