//! Samples that cannot be used: what is said of them, and by whose fault.

use armilla_study::ErrorClass;
use armilla_tests::sampled_job;

const FIELDS: &str = r#"start: Samples(file: "cycle.csv"), follow: (parameter: "mu", from: 0.9, to: 1.1)"#;

fn table(header: &str, row: impl Fn(f64) -> String) -> String {
    let rows: String = (0..60).map(|k| row(0.12 * f64::from(k)) + "\n").collect();
    format!("{header}\n{rows}")
}

#[test]
fn the_input_is_wrong() {
    let good = |t: f64| format!("{t},{},{}", 2.0 * t.cos(), -2.0 * t.sin());
    let line = |t: f64| format!("{t},{t},{}", 2.0 * t);
    for (text, fields, words) in [
        (table("t,x,z", good), FIELDS, "cycle.csv:1: the samples lack the state `y`"),
        (table("t,a,b", good), FIELDS, "cycle.csv:1: the samples lack the states `x`, `y`"),
        (table("time,x,y", good), FIELDS, "cycle.csv:1: the samples lack the time `t`"),
        (table("t,x,y", good).replace("0.36,", "0.24,"), FIELDS, "cycle.csv:5: the time 0.24 does not lie after"),
        (table("t,x,y", good), &FIELDS.replace("cycle.csv", "other.csv"), "the samples cannot be read"),
        (
            table("t,x,y", good),
            &FIELDS.replace("csv\"", "csv\", period: -1.0"),
            "the period must be a finite time above 0",
        ),
        (table("t,x,y", line), FIELDS, "they show no period"),
        (table("t,x,y", good), &FIELDS.replace("csv\"", "csv\", period: 30.0"), "of the period without a sample"),
    ] {
        let fault = sampled_job("vanderpol", &text, fields).expect_err("a refusal");
        assert_eq!(fault.class(), ErrorClass::Input, "{fault}");
        let fault = fault.to_string();
        assert!(fault.contains(words) && fault.contains("help:"), "{words}: {fault}");
    }
}

/// Samples of a cycle that the model has not: what Newton's method finds lies elsewhere, and the distance is told.
#[test]
fn a_cycle_that_is_none_of_the_model() {
    let other = |t: f64| format!("{t},{},{}", 9.0 + 0.5 * (3.0 * t).cos(), (6.0 * t).sin());
    let fault = sampled_job("vanderpol", &table("t,x,y", other), FIELDS).expect_err("a refusal");
    assert_eq!(fault.class(), ErrorClass::NotReached, "{fault}");
    assert!(fault.to_string().contains("no cycle of the model was found near the samples"), "{fault}");
}
