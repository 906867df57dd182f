//! Ctrl-C, and worse, at any time of a run.

use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

use armilla_record::{EndReason, JournalEntry, Results};

use crate::desk::{Desk, Said};
use crate::scenes::{X1_MODEL, X1_STUDY, x1};

/// Longer than any step takes on a busy machine.
const PATIENCE: Duration = Duration::from_secs(60);

/// X1 with strides so short that it would run for hours, and a target that is met at once.
fn long_study() -> String {
    X1_STUDY.replace(
        "targets: [0.5]",
        "targets: [0.2505], pursue: (points: 100000000), stride: (initial: 1e-4, shortest: 1e-6, longest: 1e-4)",
    )
}

fn started(desk: &Desk, arguments: &[&str]) -> Child {
    desk.command(arguments).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().expect("the program starts")
}

fn wait_until(what: &str, mut is_so: impl FnMut() -> bool) {
    let begin = Instant::now();
    while !is_so() {
        assert!(begin.elapsed() < PATIENCE, "waited in vain until {what}");
        std::thread::sleep(Duration::from_millis(5));
    }
}

fn signal(child: &Child, name: &str) {
    let done = Command::new("kill").args([name, &child.id().to_string()]).status().expect("kill");
    assert!(done.success());
}

fn ended(mut child: Child) -> Said {
    wait_until("it ends", || child.try_wait().expect("a child").is_some());
    child.wait_with_output().expect("its words").into()
}

fn has_event(desk: &Desk, name: &str) -> bool {
    std::fs::read_to_string(desk.path("x1.results/journal.ron")).is_ok_and(|text| text.contains(name))
}

#[test]
fn what_was_found_is_on_disk() {
    let desk = Desk::with(&[("x1.model.ron", X1_MODEL), ("x1.study.ron", &long_study())]);
    let child = started(&desk, &["trace", "x1.study.ron"]);
    wait_until("the target is met", || has_event(&desk, "a/target1"));
    signal(&child, "-INT");
    let said = ended(child);
    assert_eq!(said.code, 1, "{said:?}");
    assert!(said.err.contains("stopped by the user; everything found so far is in the results folder"), "{}", said.err);
    assert!(said.out.contains("a/target1"), "{}", said.out);
    let results = Results::open(&desk.path("x1.results")).expect("results");
    let branch = results.read_branch("a").expect("a branch");
    assert!(
        matches!(branch.ends.0.reason, EndReason::Interrupted)
            || matches!(branch.ends.1.reason, EndReason::Interrupted)
    );
    assert!(branch.points.len() > 3);
    let thresholds = results.read_thresholds().expect("thresholds");
    assert!(thresholds.iter().any(|row| row.event == "a/target1" && row.value == 0.2505));
    assert!(desk.path("x1.results/figures/diagram1.svg").exists());
    assert!(!desk.path("x1.results/journal.ron").exists());
    assert!(desk.files().keys().all(|name| !name.contains(".armilla-")), "no temporary files stay");
}

#[test]
fn while_settling_nothing_is_written() {
    let desk = Desk::with(&[
        ("x1.model.ron", X1_MODEL),
        ("x1.study.ron", &X1_STUDY.replace("Settle()", "Settle(transient: 1e9)")),
    ]);
    desk.write("x1.results/study.ron", "// armilla study, format 1\n()\n");
    let before = desk.files();
    for arguments in [&["trace", "x1.study.ron", "--replace"][..], &["settle", "x1.model.ron", "--transient", "1e9"]] {
        let child = started(&desk, arguments);
        // Time to set the handler; before that, Ctrl-C ends the program at once, as it does any other.
        std::thread::sleep(Duration::from_millis(500));
        signal(&child, "-INT");
        let said = ended(child);
        assert_eq!(said.code, 1, "{said:?}");
        assert!(said.err.contains("stopped"), "{}", said.err);
        assert!(desk.files() == before);
    }
}

/// Killed outright, a run leaves its journal, and the folder can be replaced.
#[test]
fn a_killed_run_leaves_its_events() {
    let desk = Desk::with(&[("x1.model.ron", X1_MODEL), ("x1.study.ron", &long_study())]);
    let mut child = started(&desk, &["trace", "x1.study.ron"]);
    wait_until("the target is met", || has_event(&desk, "a/target1"));
    child.kill().expect("a child");
    child.wait().expect("it ends");
    let results = Results::open(&desk.path("x1.results")).expect("results");
    let journal = results.read_journal().expect("whole lines").expect("a journal");
    let is_target = |entry: &JournalEntry| matches!(entry, JournalEntry::Event(event) if event.name == "a/target1");
    assert!(journal.entries.iter().any(is_target));
    for command in ["draw", "export"] {
        let said = desk.run(&[command, "x1.results"]);
        assert_eq!(said.code, 2, "{command}: {said:?}");
        assert!(said.err.contains("holds no branch yet"), "{}", said.err);
    }
    x1().iter().for_each(|(name, text)| desk.write(name, text));
    let said = desk.run(&["trace", "x1.study.ron", "--replace"]);
    assert_eq!(said.code, 0, "{said:?}");
    assert!(!desk.path("x1.results/journal.ron").exists());
}
