//! A run that is killed.

use std::fs;

use armilla_record::*;

use crate::sample::branch;

fn entries() -> Vec<JournalEntry> {
    let events = (0..20).flat_map(|seed| branch(seed, "a", 1).events).take(6);
    let mut entries: Vec<JournalEntry> = events.map(|event| JournalEntry::Event(Box::new(event))).collect();
    entries.insert(3, JournalEntry::Branch { name: "a.doubling1".into(), points: 120 });
    entries
}

#[test]
fn a_journal_cut_anywhere_gives_all_its_whole_entries_and_goes_on() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("journal.ron");
    let entries = entries();
    let mut journal = Journal::open(&path).expect("begun");
    let mut ends = vec![fs::metadata(&path).expect("there").len() as usize];
    for entry in &entries {
        journal.add(entry).expect("added");
        ends.push(fs::metadata(&path).expect("on disk before the run goes on").len() as usize);
    }
    drop(journal);
    let whole = fs::read(&path).expect("there");
    for k in (0..whole.len()).step_by(7).chain(ends.iter().flat_map(|&end| [end - 1, end])) {
        fs::write(&path, &whole[..k]).expect("cut");
        let n = ends.iter().filter(|&&end| end <= k).count().saturating_sub(1);
        let read = Journal::read(&path).expect("a cut is no fault");
        assert_eq!(read.entries, entries[..n], "{k}");
        assert_eq!(read.torn, k > 0 && !ends.contains(&k), "{k}");
        let mut journal = Journal::open(&path).expect("continued");
        journal.add(&entries[6]).expect("added");
        let read = Journal::read(&path).expect("mended");
        assert_eq!(read.entries[..n], entries[..n]);
        assert_eq!((read.entries.len(), read.entries.last(), read.torn), (n + 1, Some(&entries[6]), false));
    }
}

#[test]
fn damage_before_the_last_line_is_no_cut() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("journal.ron");
    let mut journal = Journal::open(&path).expect("begun");
    entries().iter().for_each(|entry| journal.add(entry).expect("added"));
    let whole = fs::read(&path).expect("there");
    let last = whole[..whole.len() - 1].iter().rposition(|&byte| byte == b'\n').expect("lines");
    for k in (0..last).step_by(11) {
        let mut flipped = whole.clone();
        flipped[k] ^= 1;
        fs::write(&path, flipped).expect("written");
        Journal::read(&path).expect_err("damage");
        Journal::open(&path).expect_err("damage");
    }
    fs::write(&path, "// armilla journal, format 2\n").expect("written");
    assert!(matches!(Journal::read(&path), Err(RecordError::Format { found: 2, known: 1, .. })));
    fs::write(&path, "my diary\n").expect("written");
    assert!(matches!(Journal::open(&path), Err(RecordError::Malformed { .. })));
    assert_eq!(fs::read_to_string(&path).expect("kept"), "my diary\n");
}

#[test]
fn a_killed_run_leaves_its_events() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = place.path().join("level.results");
    let mut results = Results::create(&folder, false).expect("a free place");
    let found = (0..).map(|seed| branch(seed, "a", 2)).find(|b| b.events.len() > 2).expect("one of the seeds");
    results.write_study("(model: \"level.model.ron\")\n").expect("written");
    found.events.iter().for_each(|event| results.write_event(event).expect("written"));
    results.write_branch(&found).expect("written");
    // As if killed: nothing of the run is ended.
    std::mem::forget(results);
    let results = Results::open(&folder).expect("results");
    let journal = results.read_journal().expect("sound").expect("there");
    let mut wanted: Vec<JournalEntry> =
        found.events.iter().map(|event| JournalEntry::Event(Box::new(event.clone()))).collect();
    wanted.push(JournalEntry::Branch { name: "a".into(), points: 2 });
    assert_eq!(journal, JournalContent { entries: wanted, torn: false });
}
