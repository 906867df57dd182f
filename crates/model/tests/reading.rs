//! Reading model files: what is understood, and every error as it is shown.

use armilla_model::{Batch, Column, Linearisation, Model};

const LEVEL: &str = r#"(
    title: "Level control with a slow valve",
    note: "Where the equations come from, in one line.",
    states: { "level": (begin: 0.4, unit: "m"), "flow": (begin: 0.0, unit: "m^3/s", label: "q") },
    parameters: { "gain": (value: 1.2, unit: "1/s", uncertainty: 0.05), "lag": (value: "8/3", unit: "s", label: "τ") },
    expressions: { "drive": "gain * (1 - level)" },
    rates: { "level": "flow - level^2", "flow": "(drive - flow) / lag" },
)
"#;

#[test]
fn the_model_of_the_documentation() {
    let model = Model::parse(LEVEL, "level.model.ron").expect("a valid model");
    assert_eq!(model.title(), "Level control with a slow valve");
    assert_eq!(model.states()[1].label, "q");
    assert_eq!(model.states()[0].label, "level");
    assert_eq!(model.values(), [1.2, 8.0 / 3.0]);
    assert_eq!(model.parameters()[0].uncertainty, Some(0.05));
    assert_eq!(model.begin(), [0.4, 0.0]);
    assert_eq!(model.expressions()[0].text, "gain * (1 - level)");
    assert!(model.forcing().is_none());
    assert_eq!(model.fingerprint().len(), 64);

    let field = model.field();
    assert_eq!(field.pattern().nnz(), 4);
    let mut evaluator = field.evaluator(&[Column::Parameter(1), Column::Parameter(0)]);
    let (mut rates, mut jacobian, mut columns) = ([0.0; 2], [0.0; 4], [0.0; 4]);
    let at = Batch { len: 1, time: &[], states: &[0.4, 0.3], parameters: &model.values() };
    let out = Linearisation { rates: &mut rates, jacobian: &mut jacobian, columns: &mut columns };
    evaluator.linearise(at, out);
    let lag = 8.0 / 3.0;
    let close = |found: &[f64], exact: &[f64]| {
        for (a, b) in found.iter().zip(exact) {
            assert!((a - b).abs() <= 4.0 * f64::EPSILON, "{found:?} for {exact:?}");
        }
    };
    close(&rates, &[0.3 - 0.4 * 0.4, (1.2 * 0.6 - 0.3) / lag]);
    close(&jacobian, &[-0.8, 1.0, -1.2 / lag, -1.0 / lag]);
    close(&columns, &[0.0, -(1.2 * 0.6 - 0.3) / (lag * lag), 0.0, 0.6 / lag]);
}
