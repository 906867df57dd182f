//! What `check` shows of a model.

use crate::common::model_of;
use armilla_model::{Kink, Model, test_derivatives};

#[test]
fn equations_as_understood() {
    let equation = |formula: &str| {
        let model = model_of(&[("x", 1.0, formula), ("y", 1.0, "x")], &[("a", 2.0), ("k", 3.0)], "");
        model.equations()[0].text.clone()
    };
    // Each formula with its text; reading the text again gives the same.
    for (formula, text) in [
        ("-y - x", "-y - x"),
        ("(a*x)*(y+1)", "a * x * (y + 1)"),
        ("a-(x-y)", "a - (x - y)"),
        ("a/(x/y)", "a / (x / y)"),
        ("a/(x*y)", "a / (x * y)"),
        ("-x^2", "-x^2"),
        ("(-x)^3", "-x^3"),
        ("(x+y)^2", "(x + y)^2"),
        ("x^-2", "x^-2"),
        ("x^(a+1)", "x^(a + 1)"),
        ("x^a^y", "x^(a^y)"),
        ("2^-x", "2^(-x)"),
        ("(x^a)^y", "(x^a)^y"),
        ("-(x+y)", "-(x + y)"),
        ("0.50*x + 2e0", "0.5 * x + 2"),
        ("atan2(y, x + 1)*pi", "atan2(y, x + 1) * pi"),
        ("2*3*x", "6 * x"),
        ("a*(-x)", "-a * x"),
        ("sin(-x)", "sin(-x)"),
        ("(a - x)/(exp((a - x)/k) - 1)", "k * x_over_expm1((a - x) / k)"),
    ] {
        assert_eq!(equation(formula), text);
        if !text.contains("x_over") {
            assert_eq!(equation(text), text);
        }
    }
}

const WITH_EXPRESSIONS: &str = r#"(
    states: { "x": (begin: 1, unit: "m"), "y": (begin: 0) },
    parameters: { "a": (value: 2) },
    expressions: {
        "push": "a*max(x, y)",
        "root": "sqrt(y - 1)",
    },
    rates: { "x": "push - floor(x)*2", "y": "abs(x)*root + root^2" },
)"#;

#[test]
fn expressions_are_printed_by_name() {
    let model = Model::parse(WITH_EXPRESSIONS, "m").expect("a valid model");
    let shown: Vec<String> = model.equations().iter().map(ToString::to_string).collect();
    assert_eq!(
        shown,
        [
            "push = a * max(x, y)",
            "root = sqrt(y - 1)",
            "rate of x = push - floor(x) * 2",
            "rate of y = abs(x) * root + root^2"
        ]
    );
    let sizes = model.sizes();
    assert_eq!((sizes.states, sizes.parameters, sizes.nonzeros), (2, 1, 4));
}

#[test]
fn kinks_have_their_place() {
    let model = Model::parse(WITH_EXPRESSIONS, "m").expect("a valid model");
    let kink = |function: &str, formula: &str, line, column| Kink {
        function: function.to_owned(),
        formula: formula.to_owned(),
        line,
        column,
    };
    assert_eq!(model.kinks(), [kink("max", "push", 5, 20), kink("floor", "x", 8, 27), kink("abs", "y", 8, 46)]);
}

#[test]
fn rates_at_the_start() {
    let model = Model::parse(WITH_EXPRESSIONS, "m").expect("a valid model");
    let start = model.at_start(&[2.0]);
    assert_eq!((start[0].value, start[0].rate), (1.0, 0.0));
    let error = model.check_start(&[2.0]).expect_err("sqrt(-1)");
    assert_eq!(
        error.to_string(),
        "the rate of `y` at the start is NaN, not a finite number; it comes from `root`, whose formula is `sqrt(y - 1)`"
    );
    let model = model_of(&[("x", 0.0, "1/x")], &[], "");
    let error = model.check_start(&[]).expect_err("1/0").to_string();
    assert_eq!(error, "the rate of `x` at the start is inf, not a finite number; its formula is `1/x`");
}

#[test]
fn self_test_covers_every_derivative() {
    let model = model_of(&[("x", 1.0, "a*x^2*y"), ("y", 2.0, "x*cos(a*y)*sin(t)")], &[("a", 0.7)], "\"2*pi\"");
    let tests = test_derivatives(&model, 0);
    assert_eq!(tests.len(), 12);
    for test in &tests {
        assert!(test.passed() && test.compared >= 8, "{test:?}");
    }
    assert_eq!(tests, test_derivatives(&model, 0));
}

/// The period of a forcing and its slope in a parameter, by a dual number.
#[test]
fn period_of_the_forcing() {
    use num_dual::Dual64;
    let model = model_of(&[("x", 1.0, "cos(omega*t) - x")], &[("omega", 4.0)], "\"2*pi/omega\"");
    let forcing = model.forcing().expect("a forced model");
    assert_eq!(forcing.period(&[4.0]), std::f64::consts::FRAC_PI_2);
    let slope = forcing.period(&[Dual64::new(4.0, 1.0)]).eps;
    assert!((slope + std::f64::consts::PI / 8.0).abs() < 1e-15);
}

#[test]
fn fingerprint_is_that_of_the_text() {
    let text = "(states: {\"x\": (begin: 1)}, rates: {\"x\": \"-x\"})";
    let model = Model::parse(text, "m").expect("a valid model");
    // By `sha256sum` of the same bytes.
    assert_eq!(model.fingerprint(), "e422e070dec10e73df73a3c9bdc8bd8154f29f5eda44b814c6726bd1ad3b2c19");
}
