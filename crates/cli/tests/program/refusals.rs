//! Every way to refuse. The exit codes are those of the table in the interface; the words are kept as snapshots
//! that were read by eye: each says what was asked, what is allowed, and what to change.

use crate::desk::{Desk, Said};
use crate::scenes::{X1_MODEL, X1_STUDY, x1};

/// Runs, and checks what no refusal may do: print a result, or change anything on disk.
fn refused(desk: &Desk, arguments: &[&str], code: i32) -> Said {
    let before = desk.files();
    let said = desk.run(arguments);
    assert_eq!(said.code, code, "{said:?}");
    assert_eq!(said.out, "");
    assert!(said.err.starts_with("armilla: "), "{}", said.err);
    assert!(!said.err.contains("panicked"), "{}", said.err);
    assert!(desk.files() == before, "something was left behind: {:?}", desk.files().keys());
    said
}

/// A study of X1 in which one piece of text is replaced.
fn with_study(from: &str, to: &str) -> Desk {
    assert!(X1_STUDY.contains(from), "{from}");
    Desk::with(&[("x1.model.ron", X1_MODEL), ("x1.study.ron", &X1_STUDY.replace(from, to))])
}

/// A study of X1 whose model has one piece of text replaced.
fn with_model(from: &str, to: &str) -> Desk {
    assert!(X1_MODEL.contains(from), "{from}");
    Desk::with(&[("x1.model.ron", &X1_MODEL.replace(from, to)), ("x1.study.ron", X1_STUDY)])
}

macro_rules! study_refused {
    ($name:ident, $from:expr, $to:expr) => {
        #[test]
        fn $name() {
            let said = refused(&with_study($from, $to), &["trace", "x1.study.ron"], 2);
            insta::assert_snapshot!(said.err);
        }
    };
}

macro_rules! model_refused {
    ($name:ident, $code:expr, $from:expr, $to:expr) => {
        #[test]
        fn $name() {
            let said = refused(&with_model($from, $to), &["trace", "x1.study.ron"], $code);
            insta::assert_snapshot!(said.err);
        }
    };
}

study_refused!(field_unknown, "targets:", "target:");
study_refused!(field_missing, "    follow: (parameter: \"mu\", from: 0.1, to: 1.0),\n", "");
study_refused!(field_of_a_field_unknown, "from: 0.1", "begin: 0.1");
study_refused!(ron_malformed, "start: Settle(),", "start: Settle(,");
study_refused!(
    ron_cut_short,
    "0.5],\n    figures: [Diagram(measure: Max(\"x\")), Portrait(axes: [\"x\", \"y\"])],\n)\n",
    "0.5"
);
study_refused!(parameter_unknown, "\"mu\", from", "\"mue\", from");
study_refused!(parameter_of_set_unknown, "start:", "set: { \"shear\": 1.0 }, start:");
study_refused!(parameter_set_twice, "start:", "set: { \"k\": 1.0, \"k\": 2.0 }, start:");
study_refused!(parameter_of_at_unknown, "Settle()", "Settle(at: { \"kk\": 1.0 })");
study_refused!(parameter_other_than_the_followed_in_at, "Settle()", "Settle(at: { \"k\": 1.0 })");
study_refused!(parameter_not_finite, "start:", "set: { \"k\": inf }, start:");
study_refused!(state_of_a_figure_unknown, "Max(\"x\")", "Max(\"xx\")");
study_refused!(measure_unknown, "Max(\"x\")", "Biggest(\"x\")");
study_refused!(start_unknown, "Settle()", "Guess()");
study_refused!(state_near_the_start_unknown, "Settle()", "Equilibrium(near: { \"xx\": 0.0 })");
study_refused!(start_outside_the_range, "from: 0.1, to: 1.0", "from: 0.3, to: 1.0");
study_refused!(range_empty, "from: 0.1, to: 1.0", "from: 0.25, to: 0.25");
study_refused!(range_not_finite, "to: 1.0", "to: inf");
study_refused!(target_outside_the_range, "targets: [0.5]", "targets: [0.5, 2.0]");
study_refused!(accuracy_too_fine, "targets:", "accuracy: 1e-20, targets:");
study_refused!(accuracy_too_coarse, "targets:", "accuracy: 0.5, targets:");
study_refused!(accuracy_negative, "targets:", "accuracy: -1e-9, targets:");
study_refused!(points_none, "targets:", "pursue: (points: 0), targets:");
study_refused!(degree_too_high, "targets:", "mesh: (degree: 40), targets:");
study_refused!(strides_out_of_order, "targets:", "stride: (shortest: 1.0, longest: 0.1), targets:");
study_refused!(transient_negative, "Settle()", "Settle(transient: -1.0)");
study_refused!(model_file_missing, "x1.model.ron", "y1.model.ron");
study_refused!(model_file_unnamed, "\"x1.model.ron\"", "\"\"");

model_refused!(name_undeclared, 2, "\"x*(mu - r2)", "\"x*(mu - r3)");
model_refused!(model_malformed, 2, "states: {", "states: [");
model_refused!(model_field_unknown, 2, "expressions:", "formulas:");
model_refused!(rate_missing, 2, "        \"y\": \"y*(mu - r2) + x*(1 + k*r2)\",\n", "");
model_refused!(formula_malformed, 2, "\"x^2 + y^2\"", "\"x^2 + * y^2\"");
model_refused!(rate_singular_at_the_start, 2, "y*(mu - r2) + x", "1/y + x");
model_refused!(rate_not_a_number_at_the_start, 2, "y*(mu - r2) + x", "log(-x) + x");
model_refused!(time_without_forcing, 2, "\"x*(mu - r2)", "\"cos(t) + x*(mu - r2)");

/// By hand: cos t does not repeat with the period 6.
#[test]
fn forcing_of_another_period() {
    let desk = with_model("\"x*(mu - r2)", "\"0.1*cos(t) + x*(mu - r2)");
    desk.write(
        "x1.model.ron",
        desk.read("x1.model.ron").replace("    rates:", "    forcing: (period: \"6\"),\n    rates:"),
    );
    let said = refused(&desk, &["trace", "x1.study.ron"], 2);
    insta::assert_snapshot!(said.err);
}

/// x' = -x, y' = 0: every (0, y) is at rest, so that none can be followed.
#[test]
fn settles_at_rest_in_a_continuum() {
    let desk = with_model("x*(mu - r2) - y*(1 + k*r2)", "-x");
    desk.write("x1.model.ron", desk.read("x1.model.ron").replace("y*(mu - r2) + x*(1 + k*r2)", "0*y"));
    let said = refused(&desk, &["trace", "x1.study.ron"], 1);
    assert!(
        said.err.contains("settles at rest") && said.err.contains("help: start at parameter values"),
        "{}",
        said.err
    );
}

/// x' = x^2 from 0.5 reaches infinity at time 2 exactly.
#[test]
fn motion_without_bound() {
    let desk = with_model("x*(mu - r2) - y*(1 + k*r2)", "x^2");
    let said = refused(&desk, &["trace", "x1.study.ron"], 1);
    assert!(
        said.err.contains("at time 2.0 (x = ") && said.err.contains("help: the motion blows up there"),
        "{}",
        said.err
    );
}

/// Two circles with periods 2 pi and 2 pi/sqrt(2): no period closes both.
#[test]
fn motion_that_does_not_settle() {
    let desk = Desk::with(&[
        (
            "two.model.ron",
            r#"(
                states: { "x": (begin: 1.0), "y": (begin: 0.0), "u": (begin: 1.0), "v": (begin: 0.0) },
                parameters: { "mu": (value: 1.0) },
                rates: {
                    "x": "x*(mu - x^2 - y^2) - y", "y": "y*(mu - x^2 - y^2) + x",
                    "u": "u*(1 - u^2 - v^2) - sqrt(2)*v", "v": "v*(1 - u^2 - v^2) + sqrt(2)*u",
                },
            )"#,
        ),
        (
            "two.study.ron",
            "(model: \"two.model.ron\", start: Settle(), follow: (parameter: \"mu\", from: 0.5, to: 2.0))",
        ),
    ]);
    let said = refused(&desk, &["trace", "two.study.ron"], 1);
    assert!(said.err.contains("the motion did not settle: "), "{}", said.err);
    assert!(said.err.contains("help: "), "{}", said.err);
}

#[test]
fn study_missing() {
    let said = refused(&Desk::new(), &["trace", "no such.study.ron"], 2);
    insta::assert_snapshot!(said.err);
}

#[test]
fn study_is_a_folder_or_no_text() {
    let desk = Desk::new();
    desk.write("folder.study.ron/inside", "");
    desk.write("bytes.study.ron", b"(model: \"\xff\xfe\")");
    for name in ["folder.study.ron", "bytes.study.ron"] {
        let said = refused(&desk, &["trace", name], 2);
        assert!(said.err.contains(name), "{}", said.err);
    }
}

#[test]
fn model_is_a_folder_or_no_text() {
    for bytes in [None, Some(b"(title: \"\xff\")")] {
        let desk = Desk::with(&[("x1.study.ron", X1_STUDY)]);
        match bytes {
            None => desk.write("x1.model.ron/inside", ""),
            Some(bytes) => desk.write("x1.model.ron", bytes),
        }
        let said = refused(&desk, &["trace", "x1.study.ron"], 2);
        assert!(said.err.contains("x1.model.ron"), "{}", said.err);
    }
}

#[test]
fn model_given_as_a_study() {
    let said = refused(&Desk::with(&x1()), &["trace", "x1.model.ron"], 2);
    insta::assert_snapshot!(said.err);
}

#[test]
fn results_exist() {
    let desk = Desk::with(&x1());
    desk.write("x1.results/study.ron", "// armilla study, format 1\n()\n");
    let said = refused(&desk, &["trace", "x1.study.ron"], 2);
    assert!(said.err.contains("x1.results exists; allow it to be replaced (--replace)"), "{}", said.err);
}

#[test]
fn results_hold_what_is_not_ours() {
    let desk = Desk::with(&x1());
    desk.write("x1.results/study.ron", "// armilla study, format 1\n()\n");
    desk.write("x1.results/thesis.tex", "the only copy");
    let said = refused(&desk, &["trace", "x1.study.ron", "--replace"], 2);
    assert!(said.err.contains("thesis.tex"), "{}", said.err);
}

/// Works for root too, whom permissions do not stop: a file stands where a folder is needed.
#[test]
fn results_cannot_be_written() {
    let desk = Desk::with(&x1());
    desk.write("in the way", "");
    for out in ["in the way", "in the way/x1.results"] {
        let said = refused(&desk, &["trace", "x1.study.ron", "--out", out], 3);
        assert!(said.err.contains("choose another folder"), "{}", said.err);
    }
}

/// Outside: no one, not even root, makes files in the kernel's own /proc.
#[cfg(target_os = "linux")]
#[test]
fn results_where_the_machine_refuses() {
    let said = refused(&Desk::with(&x1()), &["trace", "x1.study.ron", "--out", "/proc/armilla.results"], 3);
    assert!(said.err.contains("/proc"), "{}", said.err);
}

#[test]
fn settings_of_settle_that_are_wrong() {
    let desk = Desk::with(&x1());
    for (set, words) in [
        ("mu", "must have the form NAME=VALUE"),
        ("mu=fast", "`fast` is not a number"),
        ("mu=inf", "must be finite"),
        ("nu=1", "did you mean `mu`?"),
        ("speed=1", "the model's parameters are mu, k"),
    ] {
        let said = refused(&desk, &["settle", "x1.model.ron", "--set", set], 2);
        assert!(said.err.contains(words), "{}", said.err);
    }
    let said = refused(&desk, &["settle", "x1.model.ron", "--transient=-1"], 2);
    assert!(said.err.contains("transient"), "{}", said.err);
}

#[test]
fn folders_that_are_no_results() {
    let desk = Desk::with(&x1());
    desk.write("empty/inside", "");
    for command in ["draw", "export"] {
        for folder in ["nowhere", "x1.model.ron", "empty"] {
            let said = refused(&desk, &[command, folder], 2);
            assert!(said.err.contains("is no results folder"), "{}", said.err);
        }
    }
}

#[test]
fn format_of_a_later_version() {
    let said = refused(&Desk::new(), &["export", "x1.results", "--format", "parquet"], 2);
    insta::assert_snapshot!(said.err);
}

/// Arguments that are no arguments exit with 2 like all wrong input; the words are those of the library.
#[test]
fn arguments_unknown() {
    let desk = Desk::with(&x1());
    for arguments in
        [&["follow"][..], &["trace"], &["trace", "x1.study.ron", "--fast"], &["export", "a", "--format", "xls"], &[]]
    {
        let said = desk.run(arguments);
        assert_eq!(said.code, 2, "{said:?}");
        assert!(said.err.contains("--help"), "{}", said.err);
    }
    assert_eq!(desk.files().len(), 2);
}
