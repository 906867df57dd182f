//! No input makes the reader, the compiler or the printer panic.

use crate::common::{Random, random_formula};
use armilla_model::{Model, test_derivatives};

const SEED_FILE: &str = r#"(
    title: "A forced membrane", note: r"raw text",
    states: { "V": (begin: -60, unit: "mV", label: "V\u{6d}"), "n": (begin: "1/3") }, // a comment
    parameters: { "gain": (value: 1.2e0, uncertainty: 0.05), "lag": (value: "8/3", unit: "s", label: "τ"), },
    expressions: {
        "open": "0.01*(10 - V)/(exp((10 - V)/10) - 1)",
        "drive": "gain * (1 - n)^3 - abs(V)/max(lag, 2)",
    },
    rates: { "V": "drive - V^2 + sin(2*pi*t/lag)", "n": "open*(1 - n) - atan2(n, V)*-2^-n" },
    forcing: (period: "lag"),
)
"#;

const PIECES: &[&str] = &[
    "(",
    ")",
    "{",
    "}",
    "\"",
    ",",
    ":",
    "^",
    "*",
    "/",
    "-",
    "+",
    "e",
    ".",
    "0",
    "9",
    "1e308",
    "t",
    "pi",
    "V",
    "n",
    "exp(",
    "log(",
    "\\",
    "\n",
    " ",
    "r#\"",
    "/*",
    "//",
    "τ",
    "\u{301}",
    "inf",
    "NaN",
    "gain",
    "x^y",
    "#",
    "'",
    "_",
    "1/0",
    "begin",
    "rates: {}",
    "99999999999999999999",
    "^-2147483648",
    "^2147483647",
];

fn mutated(random: &mut Random, text: &str) -> String {
    let mut characters: Vec<char> = text.chars().collect();
    for _ in 0..=random.below(4) {
        let at = random.below(characters.len().max(1));
        let until = (at + random.below(12)).min(characters.len());
        match random.below(4) {
            0 => drop(characters.drain(at..until)),
            1 => {
                let copied: Vec<char> = characters[at..until].to_vec();
                let to = random.below(characters.len() + 1);
                characters.splice(to..to, copied);
            }
            _ => {
                let piece: Vec<char> = random.choose(PIECES).chars().collect();
                let end = if random.below(2) == 0 { at } else { until };
                characters.splice(at..end, piece);
            }
        }
        if characters.is_empty() {
            break;
        }
    }
    characters.into_iter().collect()
}

fn exercise(text: &str) -> bool {
    match Model::parse(text, "fuzz.model.ron") {
        Ok(model) => {
            assert_eq!(model.equations().len(), model.states().len() + model.expressions().len());
            let _ = model.check_start(&model.values()).map_err(|error| error.to_string());
            assert!(model.sizes().instructions.is_some());
            true
        }
        Err(error) => {
            assert!(error.to_string().contains("fuzz.model.ron:"));
            false
        }
    }
}

#[test]
fn mutated_files() {
    assert!(exercise(SEED_FILE));
    let mut random = Random(99);
    let mut valid = 0;
    for _ in 0..6000 {
        valid += usize::from(exercise(&mutated(&mut random, SEED_FILE)));
    }
    // Both ends are reached: mutations of comments, labels and numbers stay valid.
    assert!((100..5900).contains(&valid), "{valid} valid files");
}

#[test]
fn truncated_files() {
    for (end, _) in SEED_FILE.char_indices() {
        exercise(&SEED_FILE[..end]);
    }
}

/// Long flat formulas and long chains of expressions: nothing recurses with their length.
#[test]
fn long_formulas() {
    let sum = vec!["x"; 20_000].join(" + ");
    let product = vec!["(1 + x)"; 3_000].join(" * ");
    let chain: String = (1..3_000).map(|i| format!("\"e{i}\": \"e{} * x + 1\",", i - 1)).collect();
    let text = format!(
        "(states: {{ \"x\": (begin: 0.001), \"y\": (begin: 1) }}, expressions: {{ \"e0\": \"x\", {chain} }},
          rates: {{ \"x\": \"{sum}\", \"y\": \"({product})/(exp(e2999) - 1)\" }})"
    );
    assert!(exercise(&text));
}

/// A ring of 2000 states, each coupled to its neighbours and to a common expression: read and compiled
/// in a time that grows with its size only (seconds, where a quadratic step would take minutes).
#[test]
fn large_sparse_model() {
    let n = 2000;
    let states: String = (0..n).map(|i| format!("\"x{i}\": (begin: {i}),")).collect();
    let rates: String = (0..n)
        .map(|i| format!("\"x{i}\": \"k*x{} - x{i}^2 + sin(x{}) + scale\",", (i + 1) % n, (i + n - 1) % n))
        .collect();
    let text = format!(
        "(states: {{ {states} }}, parameters: {{ \"k\": (value: 2) }}, expressions: {{ \"scale\": \"k^2/3\" }},
          rates: {{ {rates} }})"
    );
    let model = Model::parse(&text, "large").expect("a valid model");
    let at = crate::common::linearised(&model);
    assert_eq!(at.jacobian.len(), 3 * n);
    // Row 7, by hand: sin(x6), -x7^2, k x8.
    assert_eq!(&at.jacobian[21..24], &[6.0_f64.cos(), -14.0, 2.0]);
    assert!((at.rates[7] - (16.0 - 49.0 + 6.0_f64.sin() + 4.0 / 3.0)).abs() < 1e-13);
    assert!((at.columns[7] - (8.0 + 4.0 / 3.0)).abs() < 1e-14);
    assert!(exercise(&text.replace("large", "fuzz")));
}

#[test]
fn random_models_survive_the_self_test() {
    let mut random = Random(5);
    for seed in 0..100 {
        let formula = random_formula(&mut random, 6);
        let model =
            crate::common::try_model_of(&[("x", 0.0, &formula), ("y", -1.0, "x - y")], &[("a", 0.0), ("k", -2.0)], "");
        if let Ok(model) = model {
            test_derivatives(&model, seed);
        }
    }
}
