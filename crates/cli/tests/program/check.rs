//! `check` shows a model as it was understood.

use crate::desk::Desk;
use crate::scenes::{X1_MODEL, x1};

#[test]
fn shows_equations_sizes_start_and_tests() {
    let said = Desk::with(&x1()).run(&["check", "x1.model.ron"]);
    assert_eq!((said.code, said.err.as_str()), (0, ""), "{said:?}");
    for wanted in [
        "model: X1: Hopf normal form with shear",
        "r2         = x^2 + y^2",
        "rate of x  = x * (mu - r2) - y * (1 + k * r2)",
        "rate of y  = y * (mu - r2) + x * (1 + k * r2)",
        // By hand: at (0.5, 0), mu = 1/4, k = 1/2 the rates are 0 and 0.5 (1 + 1/8).
        "x      0.5    0.0     1",
        "y      0.0    0.5625  1",
        "parameters                                         2",
    ] {
        assert!(said.out.contains(wanted), "no line `{wanted}` in\n{}", said.out);
    }
    let tests: Vec<&str> = said.out.lines().filter(|line| line.ends_with("passed")).collect();
    assert_eq!(tests.len(), 12, "six derivatives by two ways:\n{}", said.out);
    assert!(!said.out.contains("FAILED") && !said.out.contains("warning"), "{}", said.out);
}

/// Outside: places counted by hand in the text.
#[test]
fn warns_of_kinks_with_their_place() {
    let text = "(\n    states: {\"x\": (begin: 0.5)},\n    parameters: {\"k\": (value: 1.0)},\n    expressions: {\"dry\": \"max(x, 0)\"},\n    \
                rates: {\"x\": \"-k*abs(x) + floor(k) + min(k, dry)\"},\n)\n";
    let desk = Desk::with(&[("a.model.ron", text)]);
    let said = desk.run(&["check", "a.model.ron"]);
    assert_eq!(said.code, 0, "{said:?}");
    for wanted in [
        "warning: corners or jumps",
        "line 4, column 27: `max` in `dry`",
        "line 5, column 22: `abs` in `x`",
        "line 5, column 31: `floor` in `x`",
        "line 5, column 42: `min` in `x`",
    ] {
        assert!(said.out.contains(wanted), "no line `{wanted}` in\n{}", said.out);
    }
}

#[test]
fn a_rate_that_is_not_finite_ends_with_2() {
    let desk = Desk::with(&[("a.model.ron", &X1_MODEL.replace("\"x^2 + y^2\"", "\"x^2/y\""))]);
    let said = desk.run(&["check", "a.model.ron"]);
    assert_eq!(said.code, 2, "{said:?}");
    assert!(said.err.contains("comes from `r2`, whose formula is `x^2/y`"), "{}", said.err);
    assert!(said.err.contains("help: begin elsewhere"), "{}", said.err);
}

#[test]
fn shows_a_study_with_its_defaults_and_the_start_it_gives() {
    let desk = Desk::with(&x1());
    desk.write("b.study.ron", "(model: \"x1.model.ron\", set: {\"k\": 0.0}, start: Settle(at: {\"mu\": 1.0}), follow: (parameter: \"mu\", from: 2, to: 0.5))");
    let said = desk.run(&["check", "b.study.ron"]);
    assert_eq!(said.code, 0, "{said:?}");
    for wanted in ["accuracy: 1e-9", "points: 4000", "doublings: 4", "mu  1.0  1", "k   0.0  1", "measure: Max(\"x\")"]
    {
        assert!(said.out.contains(wanted), "no `{wanted}` in\n{}", said.out);
    }
    // By hand: at (0.5, 0) with mu = 1, k = 0 the rates are 0.5 (1 - 1/4) and 0.5.
    assert!(said.out.contains("x      0.5    0.375  1") && said.out.contains("y      0.0    0.5    1"), "{}", said.out);
    assert_eq!(desk.files().len(), 3, "check writes nothing");
}

#[test]
fn errors_are_those_of_trace() {
    let desk = Desk::with(&[("a.model.ron", &X1_MODEL.replace("mu - r2", "mu - rr2"))]);
    let said = desk.run(&["check", "a.model.ron"]);
    assert_eq!((said.code, said.out.as_str()), (2, ""), "{said:?}");
    assert!(said.err.contains("a.model.ron:8:") && said.err.contains("did you mean `r2`?"), "{}", said.err);
    assert_eq!(desk.run(&["check", "none.study.ron"]).code, 2);
    assert_eq!(desk.run(&["check", "none.model.ron"]).code, 2);
}
