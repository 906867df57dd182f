//! Facts of common practice on Roessler's band (a = b = 0.2), by the whole program through the command line: the first
//! doubling lies a little below c = 3, the second a little below 4, the third a little above 4, and the three-turn window
//! opens a little above 5 and lasts a good while. And of a converter under current-mode control: it doubles at a duty of
//! one half. No source but the practice; the digits are checked elsewhere.

use std::collections::HashMap;
use std::path::Path;
use std::process::Command;

/// One row of `thresholds.csv`.
struct Row {
    value: f64,
    turns: usize,
}

/// The text of a test model.
fn model(name: &str) -> String {
    let models = Path::new(env!("CARGO_MANIFEST_DIR")).join("../../tests/models");
    std::fs::read_to_string(models.join(name)).expect("the model is there")
}

/// Runs `armilla trace` on a model and the fields of a study, and reads the thresholds by their full names.
fn traced(place: &Path, model: &str, fields: &str) -> HashMap<String, Row> {
    std::fs::write(place.join("band.model.ron"), model).expect("a model written");
    let study = place.join("band.study.ron");
    std::fs::write(&study, format!("(model: \"band.model.ron\", {fields})")).expect("a study written");
    let output =
        Command::new(env!("CARGO_BIN_EXE_armilla")).arg("trace").arg(&study).output().expect("the program runs");
    let said = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{said}");
    thresholds(&place.join("band.results/thresholds.csv"))
}

fn thresholds(path: &Path) -> HashMap<String, Row> {
    let text = std::fs::read_to_string(path).expect("a threshold table");
    let mut lines = text.lines();
    let head: Vec<&str> = lines.next().expect("a head").split(',').collect();
    let column = |name: &str| head.iter().position(|column| *column == name).expect("a column of the interface");
    let (event, value, turns) = (column("event"), column("value"), column("turns"));
    lines
        .map(|line| {
            // Only the last column, the note, may hold commas.
            let cells: Vec<&str> = line.split(',').collect();
            let row =
                Row { value: cells[value].parse().expect("a number"), turns: cells[turns].parse().expect("a number") };
            (cells[event].to_string(), row)
        })
        .collect()
}

#[test]
fn doublings_lie_where_practice_has_them() {
    let place = tempfile::tempdir().expect("a folder");
    let found = traced(
        place.path(),
        &model("roessler.model.ron"),
        r#"start: Settle(at: {"c": 2.0}), follow: (parameter: "c", from: 1.0, to: 4.5), pursue: (doublings: 2)"#,
    );
    let value = |name: &str| found.get(name).unwrap_or_else(|| panic!("{name} among {:?}", found.keys())).value;
    let (first, second, third) =
        (value("a/doubling1"), value("a.doubling1/doubling1"), value("a.doubling1.doubling1/doubling1"));
    // "A little" is a quarter.
    assert!(first < 3.0 && first > 2.75, "{first}");
    assert!(second < 4.0 && second > 3.75, "{second}");
    assert!(third > 4.0 && third < 4.25, "{third}");
    assert_eq!(found["a.doubling1.doubling1/doubling1"].turns, 4);
}

#[test]
fn the_three_turn_window_opens_above_five_and_lasts() {
    let place = tempfile::tempdir().expect("a folder");
    let found = traced(
        place.path(),
        &model("roessler.model.ron"),
        r#"start: Settle(at: {"c": 5.25}), follow: (parameter: "c", from: 5.1, to: 5.45), pursue: (doublings: 0)"#,
    );
    let (opens, doubles) = (&found["a/fold1"], &found["a/doubling1"]);
    assert_eq!((opens.turns, doubles.turns), (3, 3));
    assert!(opens.value > 5.0 && opens.value < 5.25, "{}", opens.value);
    assert!(doubles.value - opens.value > 0.1, "{} to {}", opens.value, doubles.value);
}

/// Averaged over a clock period, a perturbation of the inductor current is multiplied by -D/(1 - D) at duty D. The
/// twisted band of the models carries that multiplier as the one of its circle, so it must double at D = 1/2.
#[test]
fn current_mode_control_doubles_at_a_duty_of_one_half() {
    let place = tempfile::tempdir().expect("a folder");
    let band = model("x4.model.ron");
    let converter = band
        .replace("\"l\": (value: -0.05, unit: \"1\")", "\"duty\": (value: 0.4, unit: \"1\")")
        .replace("\"r\": \"sqrt", "\"l\": \"log(duty/(1 - duty))/(2*pi)\",\n        \"r\": \"sqrt");
    assert_ne!(band, converter);
    let found = traced(
        place.path(),
        &converter,
        r#"start: Settle(at: {"duty": 0.4}), follow: (parameter: "duty", from: 0.3, to: 0.7), pursue: (doublings: 1)"#,
    );
    let doubling = &found["a/doubling1"];
    assert!((doubling.value - 0.5).abs() < 1e-10, "{}", doubling.value);
    assert_eq!(found["a.doubling1/start1"].turns, 2);
}
