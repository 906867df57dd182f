//! Cases whose cycles and thresholds follow by hand.
//!
//! Digits: the formula beside them, evaluated in 40 decimals at the 64-bit values of the parameters.

use armilla_record::Point;

use super::Source::Exact;
use super::{Kept, Run};
use crate::curve::{branched, circle, near_loop, twisted};
use crate::matching::Curve;

/// 2 pi.
const TURN: &str = "6.2831853071795864769252867666";

/// Each accuracy at which a case is run.
const ACCURACIES: [f64; 3] = [1e-6, 1e-9, 1e-12];

pub(super) fn runs() -> Vec<Run> {
    let cases = [hopf, fold, twisted_band, supercritical, subcritical, transcritical, pitchfork, torus];
    let more = [turning_pair, bent_transcritical, bent_pitchfork];
    let mut runs: Vec<Run> =
        cases.into_iter().chain(more).flat_map(|case| ACCURACIES.map(|accuracy| case().accuracy(accuracy))).collect();
    runs.push(saddle_loop());
    runs.extend(births());
    runs
}

/// X1. r = sqrt(mu), T = 2 pi/(1 + k mu), k = 1/2; born at mu = 0 with T = 2 pi.
fn hopf() -> Run {
    Run::new(
        "X1, circle with shear",
        "x1",
        r#"start: Settle(at: {"mu": 0.25}), follow: (parameter: "mu", from: -0.5, to: 1.5)"#,
    )
    .value("a/hopf1", "0.0", Exact)
    .period("a/hopf1", TURN, Exact)
    .period_at("a", 0.25, "5.5850536063818546461558105", Exact)
    .cycle("a", Kept::Near(0.25), |point| circle(point.value.sqrt(), &[]))
    .period_at("a", 1.5, "3.5903916041026208439573067", Exact)
    .cycle("a", Kept::Near(1.5), |point| circle(point.value.sqrt(), &[]))
}

/// X2. r^2 = (1 +- sqrt(1 + 4 mu))/2, T = 2 pi; fold at mu = -1/4, birth at mu = 0.
fn fold() -> Run {
    Run::new(
        "X2, fold of circles",
        "x2",
        r#"start: Settle(at: {"mu": 0.1}), follow: (parameter: "mu", from: -0.4, to: 0.5), targets: [-0.1]"#,
    )
    .value("a/fold1", "-0.25", Exact)
    .period("a/fold1", TURN, Exact)
    .value("a/hopf1", "0.0", Exact)
    .period_at("a", 0.1, TURN, Exact)
    // From the inner circle's birth on: the inner one first, shortly before the fold, the outer one.
    .cycle("a", Kept::Share(0.25), circle_of_fold)
    .cycle("a", Kept::Share(0.5), circle_of_fold)
    .cycle("a", Kept::Share(1.0), circle_of_fold)
    .period_at("a", -0.1, TURN, Exact)
}

/// The circle that a point is: the nearer one.
fn circle_of_fold(point: &Point) -> Curve {
    let root = (1.0 + 4.0 * point.value).sqrt();
    let sign = if point.maxima[0].powi(2) > 0.5 { 1.0 } else { -1.0 };
    circle((0.5 * (1.0 + sign * root)).sqrt(), &[])
}

/// X3. T = 2 pi/om, om = 1.3; doubling at mu = 0; doubled cycle of amplitude sqrt(mu) and twice the period.
fn twisted_band() -> Run {
    Run::new(
        "X3, twisted band",
        "x3",
        r#"set: {"kap": 0.5, "om": 1.3}, start: Settle(at: {"mu": -0.1}), follow: (parameter: "mu", from: -0.2, to: 0.2), pursue: (doublings: 1), targets: [0.1]"#,
    )
    .value("a/doubling1", "0.0", Exact)
    .period("a/doubling1", "4.8332194670612202017594041", Exact)
    .period_at("a", -0.1, "4.8332194670612202017594041", Exact)
    .cycle("a", Kept::Near(-0.1), |_| circle(1.0, &[0.0]))
    .cycle("a", Kept::Near(0.2), |_| circle(1.0, &[0.0]))
    .period_at("a.doubling1", 0.1, "9.6664389341224404035188082", Exact)
    .cycle("a.doubling1", Kept::Near(0.1), |point| twisted(point.value.sqrt()))
    .cycle("a.doubling1", Kept::Near(0.2), |point| twisted(point.value.sqrt()))
}

/// X4, g = -1.3, e = 0.7. Circle of period 2 pi; doubling at l = 0; doubled cycle of amplitude U = sqrt(-l/g) and period
/// 4 pi/(1 + e U^2).
fn supercritical() -> Run {
    Run::new(
        "X4, g < 0",
        "x4",
        r#"set: {"g": -1.3, "e": 0.7}, start: Settle(at: {"l": -0.05}), follow: (parameter: "l", from: -0.15, to: 0.15), pursue: (doublings: 1), targets: [0.1]"#,
    )
    .value("a/doubling1", "0.0", Exact)
    .period("a/doubling1", TURN, Exact)
    .cycle("a", Kept::Near(0.1), |_| circle(1.0, &[0.0]))
    .period_at("a.doubling1", 0.1, "11.924293283698485310320452", Exact)
    .cycle("a.doubling1", Kept::Near(0.1), |point| twisted((point.value.abs() / 1.3).sqrt()))
    .period_at("a.doubling1", 0.15, "11.627246831791405697042827", Exact)
    .cycle("a.doubling1", Kept::Near(0.15), |point| twisted((point.value.abs() / 1.3).sqrt()))
}

/// X4, g = 1.3, e = 0.7: the doubled cycle is unstable and lives at l < 0.
fn subcritical() -> Run {
    Run::new(
        "X4, g > 0",
        "x4",
        r#"set: {"g": 1.3, "e": 0.7}, start: Settle(at: {"l": -0.05}), follow: (parameter: "l", from: -0.15, to: 0.15), pursue: (doublings: 1), targets: [-0.1]"#,
    )
    .value("a/doubling1", "0.0", Exact)
    .cycle("a", Kept::Near(-0.1), |_| circle(1.0, &[0.0]))
    .period_at("a.doubling1", -0.1, "11.924293283698485310320452", Exact)
    .cycle("a.doubling1", Kept::Near(-0.1), |point| twisted((point.value.abs() / 1.3).sqrt()))
    .cycle("a.doubling1", Kept::Near(-0.15), |point| twisted((point.value.abs() / 1.3).sqrt()))
}

/// X12. T = 2 pi/om, om = 1.5; crossing at mu = 0; z in closed form.
fn transcritical() -> Run {
    Run::new(
        "X12, transcritical",
        "x12",
        r#"start: Settle(at: {"mu": 0.2}), follow: (parameter: "mu", from: -0.1, to: 0.5)"#,
    )
    .value("a/transcritical1", "0.0", Exact)
    .period("a/transcritical1", "4.1887902047863909846168578", Exact)
    .period_at("a", 0.2, "4.1887902047863909846168578", Exact)
    .cycle("a", Kept::Near(0.2), |point| branched(1, (point.value, 0.7, 1.5)))
    .cycle("a", Kept::Near(0.5), |point| branched(1, (point.value, 0.7, 1.5)))
}

/// X13. The same with a pair.
fn pitchfork() -> Run {
    Run::new(
        "X13, pitchfork",
        "x13",
        r#"start: Settle(at: {"mu": 0.2}), follow: (parameter: "mu", from: -0.1, to: 0.5)"#,
    )
    .value("a/pitchfork1", "0.0", Exact)
    .period("a/pitchfork1", "4.1887902047863909846168578", Exact)
    .period_at("a", 0.2, "4.1887902047863909846168578", Exact)
    .cycle("a", Kept::Near(0.2), |point| branched(2, (point.value, 0.7, 1.5)))
    .cycle("a", Kept::Near(0.5), |point| branched(2, (point.value, 0.7, 1.5)))
}

/// X5. Circle of radius r0 at z0, T = 2 pi/c, c = 1/4; torus at lam = 2; birth where 2 lam - b + d (1 - lam^2) = 0.
fn torus() -> Run {
    let curve = |point: &Point| {
        // z + d (1 - z^2) = b - lam, the root near 1.
        let (lam, b, d) = (point.value, 3.0, 0.2);
        let z = (1.0 - (1.0f64 - 4.0 * d * (b - lam - d)).sqrt()) / (2.0 * d);
        circle((lam * z - z * z).sqrt(), &[z])
    };
    const PERIOD: &str = "25.132741228718345907701147";
    Run::new(
        "X5, circle and torus",
        "x5",
        r#"start: Settle(at: {"lam": 1.9}), follow: (parameter: "lam", from: 1.6, to: 2.2)"#,
    )
    .period_at("a", 1.9, PERIOD, Exact)
    .cycle("a", Kept::Near(1.9), curve)
    .cycle("a", Kept::Near(2.2), curve)
    .value("a/torus1", "2.0", Exact)
    .period("a/torus1", PERIOD, Exact)
    .angle("a/torus1", "2.398797377099941013114758", Exact)
    .value("a/hopf1", "1.6833752096446001662310434", Exact)
    .period("a/hopf1", PERIOD, Exact)
}

/// A pair that turns about a circle of period 2 pi by 2 pi W, W = 0.37, through the unit circle at l = 0.
fn turning_pair() -> Run {
    Run::new(
        "pair that turns about a circle",
        "turning_pair",
        r#"set: {"al": 0.8, "be": 0.5, "ga": 0.9, "de": -0.6}, start: Settle(at: {"l": -0.1}), follow: (parameter: "l", from: -0.2, to: 0.2)"#,
    )
    .value("a/torus1", "0.0", Exact)
    .period("a/torus1", TURN, Exact)
    .angle("a/torus1", "2.3247785636564469965", Exact)
}

/// A transcritical crossing and a pitchfork at mu = 0 in a bent coordinate, where no mesh keeps the cycle that is crossed.
fn bent(case: &'static str, set: &str, event: &'static str) -> Run {
    let fields =
        format!(r#"set: {{{set}}}, start: Settle(at: {{"mu": -0.2}}), follow: (parameter: "mu", from: -0.3, to: 0.5)"#);
    Run::new(case, "bent_crossing", &fields).value(event, "0.0", Exact).period(
        event,
        "4.1887902047863909846168578",
        Exact,
    )
}

fn bent_transcritical() -> Run {
    bent("bent transcritical", r#""q": 1.0"#, "a/transcritical1")
}

fn bent_pitchfork() -> Run {
    bent("bent pitchfork", r#""q": 0.0, "c": 1.0"#, "a/pitchfork1")
}

/// X14, eps = 1. T = 2 sqrt 2 K(m)/x1; the loop through the saddle at h = 0.
fn saddle_loop() -> Run {
    Run::new(
        "X14, towards a saddle loop",
        "x14",
        r#"start: Settle(at: {"h": -0.2}), follow: (parameter: "h", from: -0.24, to: 0.1), targets: [-0.1, -0.01, -1e-4, -1e-6, -1e-8]"#,
    )
    .period_at("a", -0.24, "4.4769541468745459682819765", Exact)
    .period_at("a", -0.2, "4.6306753041491334277025820", Exact)
    .cycle("a", Kept::Near(-0.2), |point| near_loop(point.value))
    .period_at("a", -0.1, "5.2361632505102828001710803", Exact)
    .cycle("a", Kept::Near(-0.1), |point| near_loop(point.value))
    .period_at("a", -0.01, "7.4087111255397868142868907", Exact)
    .cycle("a", Kept::Near(-0.01), |point| near_loop(point.value))
    .period_at("a", -1e-4, "11.983577949748432403062355", Exact)
    .cycle("a", Kept::Near(-1e-4), |point| near_loop(point.value))
    .period_at("a", -1e-6, "16.588109221299652322939589", Exact)
    .cycle("a", Kept::Near(-1e-6), |point| near_loop(point.value))
    .period_at("a", -1e-8, "21.193269600141670554539752", Exact)
    .value("a/period-blow-up1", "0.0", Exact)
}

/// Births of cycles at a state of rest: eigenvalues by hand.
fn births() -> [Run; 3] {
    [
        // X7: B = 1 + A^2, T = 2 pi/A.
        Run::new(
            "X7, Brusselator's birth",
            "x10",
            r#"start: Settle(at: {"B": 3}), follow: (parameter: "B", from: 1.5, to: 4)"#,
        )
        .value("a/hopf1", "2.0", Exact)
        .period("a/hopf1", TURN, Exact),
        // X8: F = 1/(cos f - cos 2f), frequency F (sin f + sin 2f), f = 2 pi/5.
        Run::new(
            "X8, ring of five",
            "lorenz96",
            r#"start: Settle(at: {"F": 1.2}), follow: (parameter: "F", from: 0.5, to: 3)"#,
        )
        .value("a/hopf1", "0.89442719099991587856366947", Exact)
        .period("a/hopf1", "4.5650013370043967484317745", Exact),
        // X9: al = 3 sqrt 2, p = sqrt 2, (s + 1)^6 = -(4/3)^3, so T = 2 pi sqrt 3.
        Run::new(
            "X9, repressilator",
            "repressilator",
            r#"start: Settle(at: {"al": 10}), follow: (parameter: "al", from: 3, to: 20)"#,
        )
        .value("a/hopf1", "4.2426406871192851464050662", Exact)
        .period("a/hopf1", "10.882796185405307103564470", Exact),
    ]
}
