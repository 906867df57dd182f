//! Reading model files: what is understood, and every error as it is shown.

use armilla_model::{Batch, Column, Linearisation, Model};

/// The page for users; its example and its error are tested here.
const PAGE: &str = include_str!(concat!(env!("CARGO_MANIFEST_DIR"), "/../../docs/models.md"));

fn block_of_page(language: &str) -> &'static str {
    let (_, rest) = PAGE.split_once(&format!("```{language}\n")).expect("the page has such a block");
    rest.split_once("```").expect("the block ends").0
}

#[test]
fn the_model_of_the_documentation() {
    let model = Model::parse(block_of_page("ron"), "level.model.ron").expect("a valid model");
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

#[test]
fn the_error_of_the_documentation() {
    let text = block_of_page("ron").replace("level^2", "levle^2");
    let error = Model::parse(&text, "level.model.ron").expect_err("a wrong name");
    assert_eq!(error.to_string(), block_of_page("text").trim_end());
}

#[test]
fn functions_of_the_documentation() {
    for (name, _) in armilla_model::FUNCTIONS {
        assert!(PAGE.contains(&format!("{name} ")) || PAGE.contains(&format!("{name}`")), "{name}");
    }
}

/// Other ways to write the same: letters of any alphabet, raw texts, numbers as formulas, line breaks
/// inside of formulas, trailing commas, comments.
#[test]
fn other_ways_to_write() {
    let text = "(states: { \"θ\": (begin: +1.5e0), \"b_2\": (begin: .5, unit: Some(\"m\")) }, /* no parameters */
        rates: { \"θ\": 2, // a number
            \"b_2\": r#\"θ
               *b_2\"#, },)";
    for text in [text.to_owned(), text.replace('\n', "\r\n")] {
        let model = Model::parse(&text, "m").expect("a valid model");
        assert_eq!(model.begin(), [1.5, 0.5]);
        let rates: Vec<f64> = model.at_start(&[]).iter().map(|state| state.rate).collect();
        assert_eq!(rates, [2.0, 0.75]);
        assert_eq!(model.states()[1].unit, "m");
    }
}
