//! `draw` and `export`: made again from the files of a run.

use std::fs;

use armilla_record::Results;

use crate::desk::Desk;
use crate::scenes::{x1, x3_traced};

fn x1_traced() -> Desk {
    let desk = Desk::with(&x1());
    assert_eq!(desk.run(&["trace", "x1.study.ron"]).code, 0);
    desk
}

#[test]
fn figures_are_drawn_again_to_the_byte() {
    let desk = x3_traced();
    let first = desk.files();
    fs::remove_dir_all(desk.path("x3.results/figures")).expect("figures");
    let said = desk.run(&["draw", "x3.results"]);
    assert_eq!((said.code, said.err.as_str()), (0, ""), "{said:?}");
    assert!(desk.files() == first);
    // Over figures that are there too.
    assert_eq!(desk.run(&["draw", "x3.results"]).code, 0);
    assert!(desk.files() == first);
}

/// Whoever wants another figure edits `study.ron` in the results.
#[test]
fn figures_follow_the_study_of_the_results() {
    let desk = x1_traced();
    desk.write("x1.results/study.ron", desk.read("x1.results/study.ron").replace("Max(\"x\")", "Period"));
    assert_eq!(desk.run(&["draw", "x1.results"]).code, 0);
    assert!(desk.read("x1.results/figures/diagram1.svg").contains("period"));
    desk.write("x1.results/study.ron", desk.read("x1.results/study.ron").replace("Period", "Max(\"level\")"));
    let said = desk.run(&["draw", "x1.results"]);
    assert_eq!(said.code, 1, "{said:?}");
    assert!(said.err.contains("the model has no state `level`"), "{}", said.err);
}

#[test]
fn a_damaged_branch_file_is_refused_in_words() {
    let desk = x1_traced();
    let text = desk.read("x1.results/branches/a.ron");
    for damaged in [text.replacen('5', "6", 1), text[..text.len() / 2].to_string(), String::new()] {
        desk.write("x1.results/branches/a.ron", &damaged);
        let before = desk.files();
        for command in ["draw", "export"] {
            let said = desk.run(&[command, "x1.results"]);
            assert_eq!((said.code, said.out.as_str()), (2, ""), "{said:?}");
            assert!(said.err.contains("a.ron"), "{}", said.err);
            assert!(desk.files() == before, "{command} changed something");
        }
    }
}

/// Exact: every node of every orbit lies on the circle of radius sqrt(mu) and its last time is the period.
#[test]
fn orbits_are_exported_as_a_table() {
    let desk = x1_traced();
    let said = desk.run(&["export", "x1.results", "--format", "csv"]);
    assert_eq!((said.code, said.err.as_str()), (0, ""), "{said:?}");
    let listed: Vec<&str> = said.out.lines().collect();
    let wanted =
        ["x1.results/export/quantities.csv", "x1.results/export/a.points.csv", "x1.results/export/a.orbits.csv"];
    assert_eq!(listed, wanted);
    assert_eq!(desk.read(wanted[0]), "role,name,label,unit\nstate,x,x,1\nstate,y,y,1\nparameter,mu,mu,1\n");
    assert_eq!(desk.read(wanted[1]), desk.read("x1.results/branches/a.csv"));
    let table = desk.read(wanted[2]);
    let mut lines = table.lines();
    assert_eq!(lines.next(), Some("orbit,parameter,period,turns,scaled_time,time,x_value,y_value"));
    let mut names = Vec::new();
    for line in lines {
        let cells: Vec<&str> = line.split(',').collect();
        let number = |k: usize| cells[k].parse::<f64>().expect("a number");
        let (mu, period, scaled, time, x, y) = (number(1), number(2), number(4), number(5), number(6), number(7));
        assert!((x.hypot(y) - mu.sqrt()).abs() < 2e-8 * mu.sqrt(), "{line}");
        assert_eq!(time.to_bits(), (scaled * period).to_bits());
        if names.last() != Some(&cells[0]) {
            assert_eq!(scaled, 0.0, "{line}");
            names.push(cells[0]);
        }
    }
    let branch = Results::open(&desk.path("x1.results")).expect("results").read_branch("a").expect("a branch");
    assert_eq!(names.len(), branch.profiles.len() + branch.events.len());
    for name in ["a/point0", "a/edge2", "a/start1", "a/target1", "a/edge1"] {
        assert!(names.contains(&name), "{name} in {names:?}");
    }
}

#[test]
fn exports_do_not_change_and_do_not_hinder_replacing() {
    let desk = x3_traced();
    assert_eq!(desk.run(&["export", "x3.results"]).code, 0);
    let first = desk.files();
    for file in ["quantities.csv", "a.points.csv", "a.orbits.csv", "a.npz", "a.doubling1.npz"] {
        assert!(first.contains_key(&format!("x3.results/export/{file}")), "{file}");
    }
    assert_eq!(desk.run(&["export", "x3.results"]).code, 0);
    assert!(desk.files() == first);
    let said = desk.run(&["trace", "x3.study.ron", "--replace"]);
    assert_eq!(said.code, 0, "{said:?}");
    assert!(!desk.path("x3.results/export").exists(), "exports of replaced results would mislead");
}
