//! Cases with numbers from other computations, or published.
//!
//! Where nothing else is said the source is: independent, single shooting with a high-order Taylor integrator in 113-bit
//! arithmetic and Newton's method on the extended system, two settings agreeing on the digits shown. A last digit may be
//! rounded either way, so a truth is known to one unit of it.

use super::Source::{Exact, Independent};
use super::{Claim, Kept, Run};
use crate::curve::van_der_pol;

pub(super) fn runs() -> Vec<Run> {
    let mut runs = Vec::new();
    runs.extend([1e-6, 1e-9, 1e-12].map(|accuracy| oscillator().accuracy(accuracy)));
    runs.push(strong_relaxation());
    runs.extend([1e-6, 1e-9, 1e-12].map(|accuracy| roessler().accuracy(accuracy)));
    runs.extend([
        roessler_window(),
        lorenz_window(),
        lorenz_symmetric(),
        lorenz_pair(),
        brusselator(),
        cell_cycle(),
        membrane(),
        canard(),
    ]);
    runs
}

/// The cycle by its Taylor series.
fn relaxation(kept: Kept) -> Claim {
    Claim::Cycle("a", kept, Box::new(|point| van_der_pol(point.value, point.period)), Independent)
}

fn oscillator() -> Run {
    Run::new(
        "van der Pol",
        "vanderpol",
        r#"start: Settle(at: {"mu": 1.0}), follow: (parameter: "mu", from: 0.1, to: 20), targets: [5]"#,
    )
    .period_at("a", 0.1, "6.28711127228872680605394", Independent)
    .claim(relaxation(Kept::Near(0.1)))
    .period_at("a", 1.0, "6.66328685932313018969968", Independent)
    .claim(relaxation(Kept::Near(1.0)))
    .period_at("a", 5.0, "11.6122306677195700346", Independent)
    .claim(relaxation(Kept::Near(5.0)))
    .period_at("a", 20.0, "34.6823233116526835671", Independent)
    .claim(relaxation(Kept::Near(20.0)))
}

fn strong_relaxation() -> Run {
    Run::new(
        "van der Pol to mu = 1000",
        "vanderpol",
        r#"start: Settle(at: {"mu": 1.0}), follow: (parameter: "mu", from: 1, to: 1000), targets: [20, 100]"#,
    )
    .period_at("a", 20.0, "34.6823233116526835671", Independent)
    .period_at("a", 100.0, "162.837071092370012132", Independent)
    .period_at("a", 1000.0, "1614.40112580833398307", Independent)
}

/// a = b = 0.2.
fn roessler() -> Run {
    Run::new(
        "Roessler",
        "roessler",
        r#"start: Settle(at: {"c": 1.0}), follow: (parameter: "c", from: 1.0, to: 4.2), pursue: (doublings: 2)"#,
    )
    .period_at("a", 1.0, "5.54166032228914306269790", Independent)
    .value("a/doubling1", "2.832445027862538913673846", Independent)
    .period("a/doubling1", "5.769820016506563190538408", Independent)
    .value("a.doubling1/doubling1", "3.837358168410093765696702", Independent)
    .value("a.doubling1.doubling1/doubling1", "4.124214732075501691678446", Independent)
    .finer("a", 1.0)
    .finer("a", 4.2)
    .finer("a.doubling1", 4.2)
}

fn roessler_window() -> Run {
    Run::new(
        "Roessler, three-turn window",
        "roessler",
        r#"start: Settle(at: {"c": 5.25}), follow: (parameter: "c", from: 5.1, to: 5.45), pursue: (doublings: 0)"#,
    )
    .value("a/fold1", "5.185085784084436575567018", Independent)
    .value("a/doubling1", "5.379419820792818286172024", Independent)
    .period("a/doubling1", "17.45243763015314592", Independent)
    .finer("a", 5.45)
}

/// The shortest cycle of r = 28 that is not symmetric lies on the branch of this window.
fn lorenz_window() -> Run {
    Run::new(
        "Lorenz, window near r = 100",
        "lorenz",
        r#"start: Settle(at: {"r": 100.5}), follow: (parameter: "r", from: 28, to: 102), pursue: (doublings: 0)"#,
    )
    .value("a/fold1", "100.7949714213739937617", Independent)
    .value("a/doubling1", "99.97965110547087420220", Independent)
    .period_at("a", 28.0, "2.30590726393984774942663", Independent)
    .finer("a", 28.0)
}

/// The shortest cycle of r = 28 (period: Viswanath 2003, Nonlinearity 16:1035, and independent).
fn lorenz_symmetric() -> Run {
    Run::new(
        "Lorenz, symmetric",
        "lorenz",
        r#"start: Settle(at: {"r": 350}), follow: (parameter: "r", from: 28, to: 350), pursue: (doublings: 0)"#,
    )
    .period_at("a", 28.0, "1.5586522107161747275678702", Independent)
    .finer("a", 28.0)
}

/// The symmetric cycle of large r breaks its symmetry and the pair doubles. Source: single shooting with a Taylor series of
/// order 28 and 30 decimals, the first also of order 34 and 36.
fn lorenz_pair() -> Run {
    Run::new(
        "Lorenz, a symmetry that breaks",
        "lorenz",
        r#"start: Settle(at: {"r": 350}), follow: (parameter: "r", from: 200, to: 360), pursue: (doublings: 0)"#,
    )
    .value("a/pitchfork1", "312.973532984161612863", Independent)
    .period("a/pitchfork1", "0.411166056121265551964", Independent)
    .value("a.pitchfork1/doubling1", "229.406708561443450438", Independent)
    .period("a.pitchfork1/doubling1", "0.480866820311095173443", Independent)
    .finer("a.pitchfork1", 200.0)
}

fn brusselator() -> Run {
    Run::new(
        "Brusselator",
        "x10",
        r#"start: Settle(at: {"B": 3}), follow: (parameter: "B", from: 2.1, to: 4), targets: [2.5]"#,
    )
    .period_at("a", 2.5, "6.5772843419", Independent)
    .period_at("a", 3.0, "7.15691992117987981979987", Independent)
    .finer("a", 4.0)
}

/// Births exact: the trace of the Jacobian at the state of rest vanishes, solved in 40 decimals.
fn cell_cycle() -> Run {
    Run::new(
        "Tyson's cell cycle",
        "tyson",
        r#"start: Settle(at: {"k6": 1}), follow: (parameter: "k6", from: 0.2, to: 1.6)"#,
    )
    .period_at("a", 1.0, "35.597934978", Independent)
    .value("a/hopf2", "0.36406588408319731190778186", Exact)
    .period("a/hopf2", "18.306829880710505141593489", Exact)
    .value("a/hopf1", "1.4625890895367049943448342", Exact)
    .period("a/hopf1", "27.034213267649628915963737", Exact)
}

/// Births exact: Hurwitz's determinant of the Jacobian at the state of rest vanishes, solved in 40 decimals (published as
/// 9.78 and 154.5: Hassard 1978, J. Theor. Biol. 71:401; from memory).
fn membrane() -> Run {
    Run::new(
        "Hodgkin-Huxley",
        "hodgkin_huxley",
        r#"start: Settle(at: {"I": 10}), follow: (parameter: "I", from: 6, to: 160), pursue: (doublings: 0)"#,
    )
    .value("a/fold1", "6.26452127451", Independent)
    .value("a/hopf2", "9.7796379953931263325136133", Exact)
    .period("a/hopf2", "10.717882807935417308611562", Exact)
    .value("a/hopf1", "154.52663366580800086256233", Exact)
    .period("a/hopf1", "5.9112394413376591390013454", Exact)
}

fn canard() -> Run {
    Run::new("canard", "canard", r#"start: Settle(at: {"a": 0.9}), follow: (parameter: "a", from: 0.8, to: 1.05)"#)
        // By hand: the state of rest x = a loses its stability where x^2 = 1.
        .value("a/hopf1", "1.0", Exact)
        // By hand: frequency 1/sqrt(eps), so T = 2 pi sqrt(0.05).
        .period("a/hopf1", "1.4049629462081452831094397", Exact)
        .finer("a", 0.8)
}
