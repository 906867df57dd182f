//! Every error of a model file as the user sees it, by snapshots.

use armilla_model::Model;

/// A valid model in which one piece of text is replaced.
const VALID: &str = r#"(
    title: "Level control",
    states: { "level": (begin: 0.4, unit: "m"), "flow": (begin: 0.0) },
    parameters: { "gain": (value: 1.2, unit: "1/s"), "lag": (value: "8/3") },
    expressions: { "drive": "gain * (1 - level)" },
    rates: {
        "level": "flow - level^2",
        "flow": "(drive - flow) / lag",
    },
)
"#;

fn error_of(text: &str) -> String {
    match Model::parse(text, "level.model.ron") {
        Ok(_) => panic!("no error in {text}"),
        Err(error) => error.to_string(),
    }
}

/// The errors after each replacement (old text, new text).
fn errors(replacements: &[(&str, &str)]) -> String {
    let mut shown = String::new();
    for (old, new) in replacements {
        assert!(VALID.contains(old), "{old}");
        let error = error_of(&VALID.replacen(old, new, 1));
        shown += &format!("{error}\n\n");
    }
    shown
}

#[test]
fn the_unchanged_model_is_valid() {
    Model::parse(VALID, "level.model.ron").expect("a valid model");
}

#[test]
fn names() {
    let shown = errors(&[
        ("flow - level^2", "flow - levle^2"),
        ("flow - level^2", "flow - pressure"),
        ("flow - level^2", "flow - Gain"),
        ("\"lag\": (", "\"level\": ("),
        ("\"lag\": (", "\"gain\": ("),
        ("\"drive\": ", "\"flow\": "),
        ("\"flow\": (begin", "\"level\": (begin"),
        ("\"drive\": \"gain * (1 - level)\"", "\"drive\": \"gain\", \"drive\": \"lag\""),
        ("\"lag\": (", "\"sin\": ("),
        ("\"lag\": (", "\"pi\": ("),
        ("\"lag\": (", "\"t\": ("),
        ("\"lag\": (", "\"2lag\": ("),
        ("\"lag\": (", "\"time lag\": ("),
        ("\"lag\": (", "\"\": ("),
        ("flow - level^2", "flow - level^2 + sin(t)"),
    ]);
    insta::assert_snapshot!(shown);
}

#[test]
fn rates_and_expressions() {
    let shown = errors(&[
        ("        \"flow\": \"(drive - flow) / lag\",\n", ""),
        ("\"flow\": \"(drive", "\"flwo\": \"(drive"),
        ("\"flow\": \"(drive", "\"gain\": \"(drive"),
        ("\"flow\": \"(drive - flow) / lag\",", "\"flow\": \"drive\", \"flow\": \"lag\","),
        ("gain * (1 - level)", "gain * (1 - drive)"),
        (
            "\"drive\": \"gain * (1 - level)\"",
            "\"drive\": \"gain * push\", \"push\": \"level + pull\", \"pull\": \"2*drive\"",
        ),
        ("{ \"level\": (begin: 0.4, unit: \"m\"), \"flow\": (begin: 0.0) }", "{}"),
    ]);
    insta::assert_snapshot!(shown);
}

#[test]
fn formulas() {
    let shown = errors(&[
        ("flow - level^2", "flow - "),
        ("flow - level^2", ""),
        ("flow - level^2", "flow - (level^2"),
        ("flow - level^2", "flow - level)^2"),
        ("flow - level^2", "flow * * level"),
        ("flow - level^2", "flow level"),
        ("flow - level^2", "2level"),
        ("flow - level^2", "level**2"),
        ("flow - level^2", "level % 2"),
        ("flow - level^2", "flow − level"),
        ("flow - level^2", "1,5 * level"),
        ("flow - level^2", "1.2.3 * level"),
        ("flow - level^2", "1e * level"),
        ("flow - level^2", "level(1 - level)"),
        ("flow - level^2", "sin(level, flow)"),
        ("flow - level^2", "atan2(level)"),
        ("flow - level^2", "exp()"),
        ("flow - level^2", "ln(level)"),
        ("flow - level^2", "sine(level)"),
        ("flow - level^2", "bessel(level)"),
        ("flow - level^2", "sqrt * level"),
        ("flow - level^2", "level + 1e999"),
        ("flow - level^2", "level + 1/0"),
        ("flow - level^2", "level / (1 - 1)"),
        ("flow - level^2", "level + log(-1)"),
        ("\"flow - level^2\"", "\"flow\n            - levle^2\""),
        ("\"flow - level^2\"", "r#\"flow - levle\"#"),
        ("\"flow - level^2\"", "\"flow - \\u{6c}evle\""),
        ("flow - level^2", &"(".repeat(100_000)),
    ]);
    insta::assert_snapshot!(shown);
}

#[test]
fn values() {
    let shown = errors(&[
        ("value: \"8/3\"", "value: \"8/gain\""),
        ("value: \"8/3\"", "value: \"8/\""),
        ("value: \"8/3\"", "value: \"8/0\""),
        ("value: \"8/3\"", "value: 1e999"),
        ("value: \"8/3\"", "value: inf"),
        ("value: \"8/3\"", "value: NaN"),
        ("value: \"8/3\"", "value: true"),
        ("value: \"8/3\"", "value: [1, 2]"),
        ("value: \"8/3\"", "value: 1, uncertainty: -0.1"),
        ("begin: 0.4", "begin: \"sqrt(-1)\""),
        ("begin: 0.4", "begin: \"gain\""),
        ("\"flow - level^2\"", "level"),
    ]);
    insta::assert_snapshot!(shown);
}

#[test]
fn shape_of_the_file() {
    let shown = errors(&[
        ("unit: \"m\"", "units: \"m\""),
        ("title:", "titel:"),
        ("begin: 0.4, unit: \"m\"", "unit: \"m\""),
        ("    rates: {", "    speeds: {"),
        ("begin: 0.4, ", "begin: 0.4, begin: 0.5, "),
        ("title: \"Level control\"", "title: 3"),
        ("title: \"Level control\",", "title: \"Level control\""),
        ("title: \"Level control\",", "title: \"Level control,"),
        ("    rates: {\n", "    rates: \n"),
        ("    },\n)", "    }"),
        ("    },\n)", "    },\n))"),
        ("\"lag\": (value: \"8/3\")", "\"lag\": 3"),
        ("\"lag\": (value: \"8/3\")", "\"lag\" (value: 3)"),
        ("\"lag\": (value: \"8/3\")", "lag: (value: 3)"),
        ("\"lag\": (value: \"8/3\")", "3: (value: 3)"),
        (VALID, ""),
        (VALID, "title: \"Level control\""),
        (VALID, "()"),
    ]);
    insta::assert_snapshot!(shown);
}

#[test]
fn forcing() {
    let with = |period: &str| format!("    }},\n    forcing: (period: {period}),\n)");
    let forced = VALID.replace("flow - level^2", "flow - sin(t)");
    let mut shown = errors(&[("    },\n)", &with("\"2*pi\""))]);
    for period in ["\"2*pi/omega\"", "\"2*level\"", "\"t\"", "\"-gain\"", "0", "\"1/(gain - 1.2)\""] {
        shown += &format!("{}\n\n", error_of(&forced.replacen("    },\n)", &with(period), 1)));
    }
    shown += &error_of(&forced.replacen("    },\n)", "    },\n    forcing: (),\n)", 1));
    insta::assert_snapshot!(shown);
}

/// Several errors: the first in the order of the file is shown.
#[test]
fn first_error_in_the_file() {
    let text = VALID.replace("flow - level^2", "flow - a").replace("8/3", "8/b").replace("gain * (", "c * (");
    assert!(error_of(&text).contains("`b` cannot"));
    // A wrong expression must not make those that use it wrong.
    let text = VALID.replace("\"drive\": \"gain", "\"first\": \"1/drive\", \"drive\": \"gian");
    assert!(error_of(&text).contains("`gian`"));
}

#[test]
fn unreadable_file() {
    let error = Model::read("no/such/file.model.ron").expect_err("no such file").to_string();
    assert!(error.starts_with("cannot read the model file `no/such/file.model.ron`: "), "{error}");
}
