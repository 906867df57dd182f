//! `settle` says on what the motion settles.

use std::f64::consts::PI;

use crate::desk::Desk;
use crate::scenes::x1;

fn period(out: &str) -> f64 {
    let line = out.lines().find_map(|line| line.trim_start().strip_prefix("period ")).expect("a period");
    line.parse().expect("a number")
}

/// Exact: at mu = 1/4, k = 1/2 the period is 2 pi/1.125 and both states reach 1/2.
#[test]
fn a_cycle_with_period_and_turns() {
    let said = Desk::with(&x1()).run(&["settle", "x1.model.ron"]);
    assert_eq!((said.code, said.err.as_str()), (0, ""), "{said:?}");
    assert!(said.out.starts_with("cycle of 1 turn, reached by time "), "{}", said.out);
    assert!((period(&said.out) - 2.0 * PI / 1.125).abs() < 1e-9, "{}", said.out);
    assert!(said.out.contains("5.00000000e-1"), "{}", said.out);
    assert!(said.out.lines().all(|line| !line.ends_with(' ')), "no blanks at the end of a line");
}

/// Exact: at mu = -1/4 the origin attracts at the rate 1/4.
#[test]
fn a_state_of_rest() {
    let said = Desk::with(&x1()).run(&["settle", "x1.model.ron", "--set", "mu=-0.25"]);
    assert_eq!((said.code, said.err.as_str()), (0, ""), "{said:?}");
    assert!(said.out.starts_with("equilibrium, reached by time "), "{}", said.out);
    assert!(said.out.contains("slowest decay rate 0.25 per time unit"), "{}", said.out);
}

/// Exact: two circles with the ratio of periods sqrt(2) never close.
#[test]
fn neither_is_said_in_words_and_exits_with_1() {
    let desk = Desk::with(&[(
        "two.model.ron",
        r#"(
            states: { "x": (begin: 1.0), "y": (begin: 0.0), "u": (begin: 1.0), "v": (begin: 0.0) },
            parameters: {},
            rates: {
                "x": "x*(1 - x^2 - y^2) - y", "y": "y*(1 - x^2 - y^2) + x",
                "u": "u*(1 - u^2 - v^2) - sqrt(2)*v", "v": "v*(1 - u^2 - v^2) + sqrt(2)*u",
            },
        )"#,
    )]);
    let said = desk.run(&["settle", "two.model.ron"]);
    assert_eq!(said.code, 1, "{said:?}");
    assert!(said.out.starts_with("did not settle: it is quasi-periodic"), "{}", said.out);
    assert!(said.out.contains("`x` between -1.0 and 1.0"), "{}", said.out);
}

/// Exact: x'' = -x - 0.2 x' + cos t settles on a cycle of the period 2 pi of the forcing, of amplitude 5.
#[test]
fn a_forced_model_settles_on_its_forcing() {
    let desk = Desk::with(&[(
        "push.model.ron",
        r#"(
            states: { "x": (begin: 0.0, unit: "m"), "v": (begin: 0.0, unit: "m/s") },
            parameters: { "omega": (value: 1.0, unit: "1/s") },
            rates: { "x": "v", "v": "-x - 0.2*v + cos(omega*t)" },
            forcing: (period: "2*pi/omega"),
        )"#,
    )]);
    let said = desk.run(&["settle", "push.model.ron"]);
    assert_eq!(said.code, 0, "{said:?}");
    assert!((period(&said.out) - 2.0 * PI).abs() < 1e-12, "{}", said.out);
    assert!(said.out.contains("5.00000000e0  m\n"), "{}", said.out);
}
