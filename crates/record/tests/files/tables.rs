//! Columns and rows as the interface fixes them.

use std::fs;

use armilla_record::*;

use crate::sample::{branch, quantity};

fn small() -> Branch {
    let mut b = (0..).map(|seed| branch(seed, "a", 3)).find(|b| b.states.len() == 3).expect("one of the seeds");
    b.states = ["level", "flow", "valve"].map(quantity).to_vec();
    b
}

/// Outside: the results table of the interface, written out for three states and two multipliers, with the columns
/// added since at its end.
#[test]
fn branch_columns_are_those_of_the_interface() {
    let wanted = "point,value,period,turns,stable,unstable_count,trivial_defect,liouville_defect,profile_error,\
                  level_max,level_min,level_mean,flow_max,flow_min,flow_mean,valve_max,valve_min,valve_mean,\
                  multiplier1_log_modulus,multiplier1_angle,multiplier2_log_modulus,multiplier2_angle,\
                  degree,intervals,choice,reached,unresolved_count,unresolved_below,unresolved_log_sum";
    assert_eq!(branch_columns(&small()).join(","), wanted);
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("a.csv");
    write_branch_table(&path, &small()).expect("a table");
    let text = fs::read_to_string(path).expect("there");
    assert_eq!(text.lines().next(), Some(wanted));
    assert_eq!(text.lines().count(), 1 + 3);
}

/// Outside: the same, for thresholds, and RFC 4180 (2005), rules 5 to 7, for the quotes.
#[test]
fn threshold_columns_and_quotes_are_right() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("thresholds.csv");
    let row = Threshold {
        event: "a.doubling1/period-blow-up2".into(),
        branch: "a.doubling1".into(),
        kind: EventKind::PeriodBlowUp,
        parameter: "gain".into(),
        value: 0.1 + 0.2,
        error: Some(1e-12),
        period: Some(f64::INFINITY),
        period_error: None,
        turns: 2,
        angle: Some(std::f64::consts::PI),
        criticality: Some(Criticality::Subcritical),
        note: "says \"no\", twice".into(),
    };
    write_threshold_table(&path, &[row]).expect("a table");
    let wanted = "event,branch,kind,parameter,value,error,period,period_error,turns,angle,criticality,note\n\
                  a.doubling1/period-blow-up2,a.doubling1,period-blow-up,gain,0.30000000000000004,1e-12,inf,,2,\
                  3.141592653589793,subcritical,\"says \"\"no\"\", twice\"\n";
    assert_eq!(fs::read_to_string(path).expect("there"), wanted);
}

#[test]
fn missing_multipliers_leave_their_cells_empty() {
    let mut b = small();
    b.points[1].unstable_count = 0;
    b.points[1].multipliers.clear();
    (b.points[1].degree, b.points[1].intervals) = (5, 40);
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("a.csv");
    write_branch_table(&path, &b).expect("a table");
    let text = fs::read_to_string(path).expect("there");
    assert!(text.lines().nth(2).expect("the row").ends_with(",,,,5,40,unstated,unstated,0,,"), "{text}");
}

fn with_events(name: &str, events: &[(&str, f64)]) -> Branch {
    let mut b = branch(1, name, 2);
    let sample = (0..).find_map(|seed| branch(seed, "x", 1).events.pop()).expect("one of the seeds");
    b.events = events
        .iter()
        .map(|&(event, distance)| {
            let word = event.trim_end_matches(|c: char| c.is_ascii_digit());
            let kind = EventKind::ALL.into_iter().find(|kind| kind.word() == word).expect("a kind");
            Event { name: format!("{name}/{event}"), kind, distance, ..sample.clone() }
        })
        .collect();
    b
}

/// Outside: "in order of descent (parent, distance from its start, kind), not of time".
#[test]
fn rows_stand_in_order_of_descent_whatever_the_order_of_time() {
    let tree = [
        with_events("a.doubling2", &[("fold1", 0.5)]),
        with_events("a.doubling1.doubling10", &[("target1", 0.1)]),
        with_events("a.doubling1", &[("doubling10", 2.0), ("doubling9", 1.0), ("edge1", 3.0)]),
        with_events("b", &[("start1", 0.0)]),
        with_events(
            "a",
            &[
                ("doubling2", -4.0),
                ("start1", 0.0),
                ("edge1", -5.0),
                ("doubling1", 1.5),
                ("torus1", 1.5),
                ("fold1", 1.5),
            ],
        ),
        with_events("a.doubling1.doubling9", &[("target1", 0.1)]),
    ];
    let wanted = [
        "a/edge1",
        "a/doubling2",
        "a/start1",
        "a/fold1",
        "a/doubling1",
        "a/torus1",
        "a.doubling2/fold1",
        "a.doubling1/doubling9",
        "a.doubling1/doubling10",
        "a.doubling1/edge1",
        "a.doubling1.doubling9/target1",
        "a.doubling1.doubling10/target1",
        "b/start1",
    ];
    let mut order: Vec<usize> = (0..tree.len()).collect();
    for turn in 0..tree.len() {
        order.rotate_left(1);
        order.swap(0, turn);
        let shuffled: Vec<Branch> = order.iter().map(|&k| tree[k].clone()).collect();
        let rows = Threshold::rows(&shuffled);
        let found: Vec<&str> = rows.iter().map(|row| row.event.as_str()).collect();
        assert_eq!(found, wanted);
    }
}

#[test]
fn a_circle_of_descent_or_a_lost_parent_loses_no_branch() {
    let mut tree = [branch(1, "a.fold1", 1), branch(2, "b", 1), branch(3, "c.fold1", 1)];
    tree[0].born_at = Some("b/fold1".into());
    tree[1].born_at = Some("a.fold1/fold1".into());
    tree[2].born_at = Some("c/fold1".into());
    assert_eq!(descent_order(&tree), [2, 0, 1]);
    tree[1].born_at = Some("b/fold1".into());
    assert_eq!(descent_order(&tree), [1, 0, 2]);
}
