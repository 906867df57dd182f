//! Derivatives of compiled fields against independent ways: dual numbers, differences, values at 40
//! digits, and facts worked out by hand.

use crate::common::{Random, linearised, model_of, one_state, try_model_of};
use armilla_model::{Batch, Column, Direction, Gradient, Linearisation, Model, Scalar, Unary, test_derivatives};

fn assert_derivatives(model: &Model, what: &str) {
    let tests = test_derivatives(model, 1);
    assert!(tests.iter().any(|test| test.against == "dual numbers"), "{what}: nothing compared");
    assert!(tests.iter().any(|test| test.against != "dual numbers"), "{what}: nothing differenced");
    for test in tests {
        assert!(test.passed(), "{what}: {test:?}");
    }
}

/// Every function and the shapes that break naive rules, near points inside their domains.
#[test]
fn nasty_formulas() {
    for (formula, x, y) in [
        ("x^2*y - x^3 + x^7/y", 1.3, -0.7),
        ("(-x)^3 + (x - 5)^4", 1.3, 0.2),
        ("x^-3 + 1/(x*y)", 1.3, -0.7),
        ("x^70 + x^-66", 1.01, 0.2),
        ("x^y + y^x", 1.3, 2.1),
        ("x^a + a^x + (x*y)^0.5 + x^-0.5", 1.3, 2.1),
        ("x^(1/3) + x^2.5", 1.3, 2.1),
        ("x^k/(a^k + x^k)", 1.3, 2.1),
        ("pow(x, y) + pow(x, 3)", 1.3, 2.1),
        ("sin(x*y) + cos(x - y)^2 + tan(x/3)", 1.3, 2.1),
        ("asin(x/4) + acos(y/5) + atan(x*y)", 1.3, 2.1),
        ("atan2(y, x) + atan2(-x, y)", -1.3, 2.1),
        ("sinh(x) + cosh(y)*tanh(x - y)", 1.3, 2.1),
        ("tanh(40*x)", 1.3, 2.1),
        ("exp(-x^2) + expm1(x*y)", 1.3, 0.1),
        ("log(x) + log1p(x*y) + log10(x + y)", 1.3, 2.1),
        ("sqrt(x^2 + y^2) + cbrt(x*y)", 1.3, 2.1),
        ("cbrt(-x)", 1.3, 2.1),
        ("abs(x - 3)*y + abs(x)", 1.3, 2.1),
        ("min(x, y)*x + max(x*y, a)", 1.3, 2.1),
        ("floor(3*x)*y", 1.2, 2.1),
        ("x/(exp(x) - 1)*y", 1e-3, 2.1),
        ("(x - a)/(exp((x - a)/k) - 1)", 0.7, 1.0),
        ("0.1*(x + 40)/(1 - exp(-(x + 40)/10))", -40.0, 1.0),
        ("y*exp(x)/(1 + exp(x))", 3.0, 1.0),
        ("x*(y + x*(y + x*(y + x)))", 0.3, -0.4),
        ("(x + y)/(x - y)/(x*y)", 1.3, 0.4),
        ("sin(x*sin(k*t))*cos(k*t) + exp(y*sin(2*k*t))", 1.3, 0.4),
    ] {
        let forcing = if formula.contains("*t)") { "\"2*pi/k\"" } else { "" };
        let model = model_of(&[("x", x, formula), ("y", y, "x - a*y")], &[("a", 0.7), ("k", 2.3)], forcing);
        assert_derivatives(&model, formula);
    }
}

/// Hodgkin & Huxley 1952 (Journal of Physiology 117:500), in today's sign of the voltage, with the
/// rates' quotients at 0/0 (V = 10, 25) and away from it.
#[test]
fn membrane_rates() {
    let model = |voltage: f64| {
        model_of(
            &[
                ("V", voltage, "current - 120*m^3*h*(V - 115) - 36*n^4*(V + 12) - 0.3*(V - 10.6)"),
                ("m", 0.3, "0.1*(25 - V)/(exp((25 - V)/10) - 1)*(1 - m) - 4*exp(-V/18)*m"),
                ("n", 0.4, "0.01*(10 - V)/(exp((10 - V)/10) - 1)*(1 - n) - 0.125*exp(-V/80)*n"),
                ("h", 0.5, "0.07*exp(-V/20)*(1 - h) - h/(exp((30 - V)/10) + 1)"),
            ],
            &[("current", 9.8)],
            "",
        )
    };
    for voltage in [10.0, 25.0, 0.0, -55.0, 100.0] {
        assert_derivatives(&model(voltage), &format!("V = {voltage}"));
    }
    // By hand at V = 25: u/(e^u - 1) = 1 - u/2 + …, u = (25 - V)/10, so the opening rate is 1 and its
    // slope in V is 1/20.
    let at = linearised(&model(25.0));
    let exact_rate = (1.0 - 0.3) - 4.0 * (-25.0_f64 / 18.0).exp() * 0.3;
    let exact_slope = 0.05 * (1.0 - 0.3) + 4.0 / 18.0 * (-25.0_f64 / 18.0).exp() * 0.3;
    assert!((at.rates[1] - exact_rate).abs() < 1e-15);
    assert!((at.jacobian[4] - exact_slope).abs() < 1e-15);
}

/// `u/(exp(u) - 1)` and its derivatives at 60 digits, rounded (mpmath, Taylor series and Leibniz' rule).
#[rustfmt::skip]
const SAFE_QUOTIENT: [(f64, [f64; 6]); 13] = [
    (0.0, [1.0, -0.5, 0.16666666666666666, 0.0, -0.03333333333333333, 0.0]),
    (1e-12, [0.9999999999995, -0.49999999999983336, 0.16666666666666666, -3.3333333333333334e-14, -0.03333333333333333, 2.380952380952381e-14]),
    (-0.0001, [1.0000500008333333, -0.5000166666666611, 0.1666666665, 3.3333333293650797e-06, -0.033333333214285714, -2.3809523753968255e-06]),
    (0.0001, [0.9999500008333333, -0.4999833333333389, 0.1666666665, -3.3333333293650797e-06, -0.033333333214285714, 2.3809523753968255e-06]),
    (0.5, [0.7707470412683991, -0.4173549619795836, 0.1625612878605824, -0.016179199392629226, -0.0304423285796403, 0.011229659838201032]),
    (-1.9, [2.2341602661266355, -0.7829435142253703, 0.11753176997215031, 0.04184478550952486, -0.004404589138627274, -0.019137656701375707]),
    (1.999, [0.3132408553583087, -0.20562653725290406, 0.11337061402560288, -0.042188373597782804, -0.0025504006330480406, 0.018300628493315825]),
    (2.001, [0.3128298289687781, -0.2053998804049884, 0.11328623220200086, -0.04219343780986169, -0.00251381748449874, 0.01828251253751759]),
    (-2.5, [2.72356372458463, -0.8458694696691611, 0.09227143684336024, 0.04138340049486738, 0.00529828758735047, -0.012764935348390462]),
    (7.0, [0.006388999772552135, -0.005482116850486641, 0.004579409809639439, -0.003684238240418776, 0.002802517298215292, -0.001944490849539906]),
    (-30.0, [30.000000000002807, -0.9999999999972863, 2.6201344312762646e-12, 2.5265582015888438e-12, 2.4329819719023685e-12, 2.3394057422177495e-12]),
    (300.0, [1.5444600667236042e-128, -1.5393118665011922e-128, 1.5341636662787801e-128, -1.529015466056368e-128, 1.523867265833956e-128, -1.518719065611544e-128]),
    (-800.0, [800.0, -1.0, 0.0, 0.0, 0.0, 0.0]),
];

#[test]
fn safe_quotient_to_order_five() {
    // At 0 the derivatives are the Bernoulli numbers (Abramowitz & Stegun 1964, 23.1.1).
    assert_eq!(SAFE_QUOTIENT[0].1, [1.0, -0.5, 1.0 / 6.0, 0.0, -1.0 / 30.0, 0.0]);
    for (u, derivatives) in SAFE_QUOTIENT {
        for (order, expected) in (0..).zip(derivatives) {
            let found = u.unary(Unary::Bernoulli(order));
            // Order 4 and 5 have zeros near |u| = 3 and at 0; 1/30 is the size of order 4 there.
            let size = expected.abs().max(if u.abs() < 3.0 { 1e-2 } else { 0.0 });
            let allowed = if order < 3 { 4e-15 } else { 1e-12 };
            assert!((found - expected).abs() <= allowed * size, "{order} at {u}: {found} for {expected}");
        }
    }
}

/// In a formula, in any scaling, through values and every derivative the evaluator gives.
#[test]
fn safe_quotient_in_a_field() {
    // w = (x - 5)/4, f = 3 (x - 5)/(exp(w) - 1) = 12 g(w), so the k-th derivative is 12 g^(k)/4^k.
    for shift in [0.0, 1e-12, -1e-4, 1e-4] {
        let model = one_state("3*(x - 5)/(exp((x - 5)/4) - 1)", 5.0 + shift);
        let w = (5.0 + shift - 5.0) / 4.0;
        // Taylor series of g to order 5, terms beyond w^4 are below 1e-20.
        let g = [1.0 - w / 2.0 + w * w / 12.0, -0.5 + w / 6.0 - w.powi(3) / 180.0, 1.0 / 6.0 - w * w / 60.0, -w / 30.0];
        let at = linearised(&model);
        assert!((at.rates[0] - 12.0 * g[0]).abs() < 1e-14);
        assert!((at.jacobian[0] - 3.0 * g[1]).abs() < 1e-14);
        let states = [5.0 + shift];
        let batch = Batch { len: 1, time: &[], states: &states, parameters: &[] };
        let one = Direction { states: &[1.0], columns: &[] };
        let mut evaluator = model.field().evaluator(&[]);
        let mut out = [0.0];
        evaluator.second(batch, one, one, &mut out);
        assert!((out[0] - 0.75 * g[2]).abs() < 1e-15, "{shift}");
        evaluator.third(batch, [one; 3], &mut out).expect("compiled fields have third derivatives");
        assert!((out[0] - 0.1875 * g[3]).abs() < 1e-15, "{shift}");
        let mut states_out = [0.0];
        let gradient = Gradient { states: &mut states_out, columns: &mut [] };
        evaluator.second_gradient(batch, &[2.0], one, gradient);
        assert!((states_out[0] - 1.5 * g[2]).abs() < 1e-15, "{shift}");
    }
}

/// Powers with a state at zero: the slope in the exponent is 0 there, not 0 times infinity.
#[test]
fn power_of_zero() {
    let model = model_of(&[("x", 0.0, "x^h/(1 + x^h)")], &[("h", 4.0)], "");
    let at = linearised(&model);
    assert_eq!((at.rates[0], at.jacobian[0], at.columns[0]), (0.0, 0.0, 0.0));
}

/// Constants are folded exactly and rounded once: 0.1*3 is the number nearest to 0.3.
#[test]
fn constants_are_rounded_once() {
    let at = linearised(&one_state("0.1*3*x", 1.0));
    assert_eq!(at.jacobian[0], 0.3);
    assert_ne!(0.1 * 3.0, 0.3);
    let at = linearised(&one_state("0.1*x^3", 1.0));
    assert_eq!(at.jacobian[0], 0.3);
}

#[test]
fn pattern_holds_what_the_formulas_use() {
    let model =
        model_of(&[("x", 1.0, "y"), ("y", 1.0, "0*x + a*z"), ("z", 1.0, "x^0 + floor(y) + z")], &[("a", 1.0)], "");
    let field = model.field();
    let entries: Vec<(usize, usize)> = field.pattern().entries().collect();
    assert_eq!(entries, [(0, 1), (1, 2), (2, 2)]);
}

/// Any batch length, shared and per-point parameters: each point as if it were alone, to the last bit
/// for equal ways of giving the parameters.
#[test]
fn batches_equal_single_points() {
    let model = model_of(
        &[("x", 1.0, "a*x*y - x^3/k + exp(-x)"), ("y", 1.0, "x/a + sin(y)*k"), ("z", 0.5, "x - z/k")],
        &[("a", 0.7), ("k", 2.3)],
        "",
    );
    let field = model.field();
    let mut evaluator = field.evaluator(&[Column::Parameter(1), Column::Parameter(0)]);
    let mut random = Random(7);
    for len in [1, 2, 7, 8, 63, 64, 65, 128, 200] {
        let states = random.vector(3 * len);
        let parameters: Vec<f64> = random.vector(2 * len).iter().map(|p| p + 2.0).collect();
        for per_point in [false, true] {
            let given = if per_point { parameters.clone() } else { vec![0.7, 2.3] };
            let at = Batch { len, time: &[], states: &states, parameters: &given };
            let whole = crate::common::Everything::of(&mut *evaluator, at, 2, field.pattern().nnz());
            for k in 0..len {
                let state: Vec<f64> = (0..3).map(|i| states[i * len + k]).collect();
                let own: Vec<f64> = (0..2).map(|i| if per_point { given[i * len + k] } else { given[i] }).collect();
                let at = Batch { len: 1, time: &[], states: &state, parameters: &own };
                let alone = crate::common::Everything::of(&mut *evaluator, at, 2, field.pattern().nnz());
                whole.assert_point(k, len, &alone, if per_point && len > 1 { 1e-14 } else { 0.0 });
            }
        }
    }
    evaluator.rates(Batch { len: 0, time: &[], states: &[], parameters: &[0.7, 2.3] }, &mut []);
}

/// An absent part of a direction is a zero part.
#[test]
fn absent_parts_are_zero() {
    let model = model_of(&[("x", 1.0, "a*x^3*y"), ("y", 2.0, "x*y/a")], &[("a", 0.7)], "");
    let mut evaluator = model.field().evaluator(&[Column::Parameter(0)]);
    let states = [1.1, 2.2];
    let at = Batch { len: 1, time: &[], states: &states, parameters: &[0.7] };
    let u = Direction { states: &[0.3, -0.4], columns: &[] };
    let padded = Direction { states: &[0.3, -0.4], columns: &[0.0] };
    let column = Direction { states: &[], columns: &[1.0] };
    let (mut a, mut b) = ([0.0; 2], [0.0; 2]);
    evaluator.second(at, u, column, &mut a);
    evaluator.second(at, padded, column, &mut b);
    assert_eq!(a, b);
    // Mixed derivative of the column a by hand: d/da of J u.
    let [x, y] = states;
    let exact = [3.0 * x * x * y * 0.3 - x.powi(3) * 0.4, -(y * 0.3 - x * 0.4) / 0.49];
    for (found, exact) in a.iter().zip(exact) {
        assert!((found - exact).abs() < 1e-14);
    }
}

/// Random formulas of every operation: compiled programs, the graph over machine numbers and over dual
/// numbers agree.
#[test]
fn random_formulas() {
    let mut random = Random(2024);
    let mut compared = 0;
    for round in 0..400 {
        let formula = crate::common::random_formula(&mut random, 5);
        let states = [("x", 0.8, formula.as_str()), ("y", 1.7, "x*y - y")];
        // Some random formulas hold a constant such as log(-1), which is refused.
        let Ok(model) = try_model_of(&states, &[("a", 0.6), ("k", 2.5)], "") else { continue };
        if model.check_start(&model.values()).is_err() {
            continue;
        }
        for test in test_derivatives(&model, round) {
            compared += test.compared;
            // Cancellation in a random formula can be strong; a wrong rule gives order 1.
            let allowed = if test.against == "dual numbers" { 1e-6 } else { 1e-4 };
            assert!(test.worst <= allowed, "{formula}: {test:?}");
        }
    }
    assert!(compared > 20_000, "{compared} entries compared");
}

#[test]
fn linearise_and_rates_agree() {
    let model = model_of(&[("x", 1.0, "x/3 - x^2*a"), ("y", 2.0, "x/(y*y + a)")], &[("a", 0.7)], "");
    let mut evaluator = model.field().evaluator(&[]);
    let states = [1.234, -0.77];
    let at = Batch { len: 1, time: &[], states: &states, parameters: &[0.7] };
    let (mut alone, mut joint, mut jacobian) = ([0.0; 2], [0.0; 2], [0.0; 3]);
    evaluator.rates(at, &mut alone);
    evaluator.linearise(at, Linearisation { rates: &mut joint, jacobian: &mut jacobian, columns: &mut [] });
    assert_eq!(alone, joint);
}
