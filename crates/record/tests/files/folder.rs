//! Creating, replacing, refusing, restoring.

use std::fs;
use std::path::{Path, PathBuf};

use armilla_record::*;

use crate::sample::branch;

/// A folder with results of one branch in it.
fn old_results(place: &Path) -> PathBuf {
    let folder = place.join("level.results");
    let mut results = Results::create(&folder, false).expect("a free place");
    results.write_study("(old: true)\n").expect("written");
    results.write_branch(&branch(1, "a", 3)).expect("written");
    results.write_figure("diagram1", "<svg/>").expect("written");
    results.finish().expect("finished");
    folder
}

/// All paths below a folder, relative, sorted.
fn listing(folder: &Path) -> Vec<String> {
    fn list(top: &Path, folder: &Path, all: &mut Vec<String>) {
        for entry in fs::read_dir(folder).expect("a folder") {
            let path = entry.expect("an entry").path();
            all.push(path.strip_prefix(top).expect("inside").display().to_string());
            if path.is_dir() && !path.is_symlink() {
                list(top, &path, all);
            }
        }
    }
    let mut all = Vec::new();
    list(folder, folder, &mut all);
    all.sort();
    all
}

/// Outside: the names of the interface.
#[test]
fn a_finished_folder_holds_exactly_the_files_of_the_interface() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = place.path().join("below").join("level.results");
    let (one, two) = (branch(1, "a", 3), branch(2, "a.doubling1", 2));
    let mut results = Results::create(&folder, false).expect("a free place");
    assert!(!folder.exists(), "nothing is touched before the first file");
    results.write_study("(model: \"level.model.ron\")\n").expect("written");
    one.events.iter().for_each(|event| results.write_event(event).expect("written"));
    results.write_branch(&two).expect("written");
    results.write_branch(&one).expect("written");
    results.write_thresholds(&Threshold::rows(&[two.clone(), one.clone()])).expect("written");
    results.write_figure("diagram1", "<svg/>").expect("written");
    results.write_figure("portrait1.svg", "<svg/>").expect("written");
    results.finish().expect("finished");
    let wanted = [
        "branches",
        "branches/a.csv",
        "branches/a.doubling1.csv",
        "branches/a.doubling1.ron",
        "branches/a.ron",
        "figures",
        "figures/diagram1.svg",
        "figures/portrait1.svg",
        "study.ron",
        "thresholds.csv",
    ];
    assert_eq!(listing(&folder), wanted);
    let results = Results::open(&folder).expect("results");
    assert_eq!(results.read_all_branches().expect("sound"), [one.clone(), two.clone()]);
    assert_eq!(results.read_branch("a.doubling1").expect("sound"), two);
    assert_eq!(results.read_study().expect("there"), "(model: \"level.model.ron\")\n");
    assert_eq!(results.read_thresholds().expect("sound"), Threshold::rows(&[one, two]));
    assert_eq!(results.read_journal().expect("none"), None);
    assert_eq!(listing(place.path()).len(), wanted.len() + 2, "nothing else");
}

#[test]
fn an_existing_folder_is_refused_untouched() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = old_results(place.path());
    let before = listing(place.path());
    let error = Results::create(&folder, false).expect_err("it exists");
    assert!(matches!(error, RecordError::Exists { .. }) && !error.is_machine_fault(), "{error:?}");
    assert!(error.to_string().contains("--replace"), "{error}");
    // An empty one too: it may be kept for something else.
    let empty = place.path().join("empty.results");
    fs::create_dir(&empty).expect("made");
    assert!(matches!(Results::create(&empty, false), Err(RecordError::Exists { .. })));
    fs::remove_dir(&empty).expect("removed");
    assert_eq!(listing(place.path()), before);
}

#[test]
fn a_folder_that_appears_during_the_computation_is_refused() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = place.path().join("level.results");
    let mut results = Results::create(&folder, false).expect("a free place");
    old_results(place.path());
    assert!(matches!(results.write_study("(new: true)"), Err(RecordError::Exists { .. })));
    assert_eq!(Results::open(&folder).expect("old").read_study().expect("old"), "(old: true)\n");
}

#[test]
fn old_results_last_until_new_ones_are_complete() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = old_results(place.path());
    let before = listing(&folder);
    let mut results = Results::create(&folder, true).expect("it may be replaced");
    assert_eq!(listing(&folder), before, "nothing is touched before the first file");
    results.write_study("(new: true)\n").expect("written");
    let aside = results.kept_aside().expect("the old ones are kept").to_path_buf();
    assert_eq!(listing(&aside), before);
    results.write_branch(&branch(9, "a", 2)).expect("written");
    results.finish().expect("finished");
    assert!(!aside.exists());
    let results = Results::open(&folder).expect("results");
    assert_eq!(results.read_study().expect("there"), "(new: true)\n");
    assert_eq!(results.read_branch("a").expect("sound"), branch(9, "a", 2));
    assert!(!folder.join("figures").exists(), "nothing of the old ones is left");
    assert_eq!(fs::read_dir(place.path()).expect("a folder").count(), 1);
}

#[test]
fn a_run_cut_short_keeps_both_and_a_later_one_replaces_only_its_own() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = old_results(place.path());
    let mut results = Results::create(&folder, true).expect("it may be replaced");
    results.write_study("(cut: true)\n").expect("written");
    let aside = results.kept_aside().expect("kept").to_path_buf();
    drop(results);
    assert_eq!(Results::open(&aside).expect("old").read_study().expect("old"), "(old: true)\n");
    assert_eq!(Results::open(&folder).expect("cut").read_study().expect("cut"), "(cut: true)\n");
    let mut results = Results::create(&folder, true).expect("it may be replaced");
    results.write_study("(new: true)\n").expect("written");
    assert_ne!(results.kept_aside(), Some(aside.as_path()));
    results.finish().expect("finished");
    assert_eq!(Results::open(&aside).expect("old").read_study().expect("old"), "(old: true)\n");
    assert_eq!(fs::read_dir(place.path()).expect("a folder").count(), 2);
}

#[test]
fn a_run_that_fails_before_its_first_file_puts_the_old_results_back() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = old_results(place.path());
    let before = listing(place.path());
    let mut results = Results::create(&folder, true).expect("it may be replaced");
    let mut spoiled = branch(2, "a", 3);
    spoiled.points[0].value = f64::NAN;
    results.write_branch(&spoiled).expect_err("a contradiction");
    drop(results);
    assert_eq!(listing(place.path()), before);
    drop(Results::create(&folder, true).expect("it may be replaced"));
    assert_eq!(listing(place.path()), before);
}

#[test]
fn what_is_not_wholly_ours_is_never_replaced() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let foreign = |make: &dyn Fn(&Path), entry: &str| {
        let folder = old_results(place.path());
        make(&folder);
        let before = listing(&folder);
        let error = Results::create(&folder, true).expect_err(entry);
        assert!(matches!(error, RecordError::Foreign { .. }) && !error.is_machine_fault(), "{entry}: {error:?}");
        assert!(error.to_string().contains(entry), "`{error}` should name `{entry}`");
        assert_eq!(listing(&folder), before);
        fs::remove_dir_all(&folder).expect("removed");
    };
    let write = |folder: &Path, name: &str| fs::write(folder.join(name), "mine").expect("written");
    foreign(&|folder| write(folder, "notes.txt"), "notes.txt");
    foreign(&|folder| write(folder, "branches/plot.py"), "branches/plot.py");
    foreign(&|folder| write(folder, "figures/photo.png"), "figures/photo.png");
    foreign(&|folder| fs::create_dir(folder.join("data")).expect("made"), "data");
    foreign(&|folder| fs::create_dir(folder.join("branches/branches")).expect("made"), "branches/branches");
    // A study.ron alone does not make a folder ours: somebody may call his own file so.
    foreign(&|folder| write(folder, "study.ron"), "no file in it says that armilla wrote it");
    #[cfg(unix)]
    foreign(
        &|folder| {
            let elsewhere = place.path().join("elsewhere.csv");
            fs::write(&elsewhere, "mine").expect("written");
            std::os::unix::fs::symlink(elsewhere, folder.join("branches/b.csv")).expect("linked");
        },
        "branches/b.csv",
    );
}

#[test]
fn a_file_added_during_the_run_is_not_removed() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = old_results(place.path());
    let mut results = Results::create(&folder, true).expect("it may be replaced");
    results.write_study("(new: true)\n").expect("written");
    let aside = results.kept_aside().expect("kept").to_path_buf();
    fs::write(aside.join("notes.txt"), "mine").expect("written");
    assert!(matches!(results.finish(), Err(RecordError::Foreign { .. })));
    assert_eq!(fs::read_to_string(aside.join("notes.txt")).expect("kept"), "mine");
    assert_eq!(Results::open(&folder).expect("new").read_study().expect("new"), "(new: true)\n");
}

#[test]
fn empty_folders_and_leftovers_of_a_killed_run_may_be_replaced() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = place.path().join("level.results");
    fs::create_dir_all(folder.join("branches")).expect("made");
    let mut results = Results::create(&folder, true).expect("nothing is lost");
    results
        .write_event(&(0..).find_map(|seed| branch(seed, "a", 1).events.pop()).expect("one of the seeds"))
        .expect("written");
    drop(results);
    fs::remove_dir(place.path().join("level.results.replaced").join("branches")).expect("kept, empty");
    fs::write(folder.join(".armilla-x1y2"), "half a file").expect("written");
    fs::write(folder.join(".DS_Store"), "").expect("written");
    let mut results = Results::create(&folder, true).expect("the journal marks it");
    results.write_study("(new: true)\n").expect("written");
    results.finish().expect("finished");
    assert_eq!(listing(&folder), ["study.ron"]);
}

/// Files in the way, because nothing is unwritable to the superuser of a test machine.
#[test]
fn unwritable_places_are_found_before_anything_is_computed() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let file = place.path().join("plain");
    fs::write(&file, "mine").expect("written");
    let inside = file.join("level.results");
    let deep = file.join("deep").join("level.results");
    for path in [&file, &inside, &deep] {
        for replace in [false, true] {
            let error = Results::create(path, replace).expect_err("no folder");
            assert!(matches!(error, RecordError::NotAFolder { .. }) && error.is_machine_fault(), "{error:?}");
        }
        Results::check_writable(path).expect_err("no folder");
    }
    assert_eq!(listing(place.path()), ["plain"]);
    Results::check_writable(&place.path().join("a").join("b")).expect("folders are made as needed");
    assert_eq!(listing(place.path()), ["plain"], "trying leaves no trace");
}

#[cfg(unix)]
#[test]
fn a_folder_without_permission_is_told_as_such() {
    use std::os::unix::fs::PermissionsExt;
    let place = tempfile::tempdir().expect("a temporary folder");
    let locked = place.path().join("locked");
    fs::create_dir(&locked).expect("made");
    fs::set_permissions(&locked, fs::Permissions::from_mode(0o555)).expect("locked");
    if fs::write(locked.join("x"), "").is_ok() {
        eprintln!("not checked: this user may write anywhere");
        return;
    }
    let error = Results::create(&locked.join("level.results"), false).expect_err("locked");
    assert!(matches!(error, RecordError::Permission { .. }) && error.is_machine_fault(), "{error:?}");
}

#[cfg(unix)]
#[test]
fn a_link_to_results_is_followed_and_kept() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let disk = place.path().join("disk");
    fs::create_dir(&disk).expect("made");
    let folder = old_results(&disk);
    let link = place.path().join("link.results");
    std::os::unix::fs::symlink(&folder, &link).expect("linked");
    let mut results = Results::create(&link, true).expect("it may be replaced");
    results.write_study("(new: true)\n").expect("written");
    results.finish().expect("finished");
    assert!(link.is_symlink());
    assert_eq!(Results::open(&link).expect("there").read_study().expect("there"), "(new: true)\n");
    assert_eq!(listing(&disk), ["level.results", "level.results/study.ron"]);
}

#[test]
fn only_results_are_opened() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let file = place.path().join("plain");
    fs::write(&file, "mine").expect("written");
    for path in [place.path().to_path_buf(), file, place.path().join("none")] {
        let error = Results::open(&path).expect_err("no results");
        assert!(matches!(error, RecordError::NotResults { .. }) && !error.is_machine_fault(), "{error:?}");
    }
}

#[test]
fn a_long_cascade_and_beyond_are_kept_under_their_full_names() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = place.path().join("deep.results");
    let mut results = Results::create(&folder, false).expect("a free place");
    let names: Vec<String> = [10, 24, 60, 61].iter().map(|&k| format!("a{}", ".doubling1".repeat(k))).collect();
    for (k, name) in names.iter().enumerate() {
        results.write_branch(&branch(k as u64, name, 1)).expect("written");
    }
    results.finish().expect("finished");
    assert!(folder.join("branches").join(format!("{}.csv", names[0])).exists());
    let results = Results::open(&folder).expect("results");
    for (k, name) in names.iter().enumerate() {
        assert_eq!(results.read_branch(name).expect("sound"), branch(k as u64, name, 1));
    }
    let all: Vec<String> = results.read_all_branches().expect("sound").into_iter().map(|b| b.name).collect();
    assert_eq!(all, names);
}

#[test]
fn a_branch_file_under_another_name_is_refused() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = old_results(place.path());
    fs::copy(folder.join("branches/a.ron"), folder.join("branches/b.ron")).expect("copied");
    let results = Results::open(&folder).expect("results");
    for error in [results.read_branch("b").expect_err("a"), results.read_all_branches().expect_err("a")] {
        assert!(matches!(error, RecordError::Inconsistent { .. }), "{error:?}");
    }
    assert!(matches!(results.read_branch("../a"), Err(RecordError::BadName { .. })));
}

/// `armilla draw` adds figures to results that are there.
#[test]
fn figures_may_be_drawn_again() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let folder = old_results(place.path());
    let mut results = Results::open(&folder).expect("results");
    results.write_figure("diagram1", "<svg>2</svg>").expect("written");
    results.write_figure("../diagram", "<svg/>").expect_err("outside");
    results.finish().expect("finished");
    assert_eq!(fs::read_to_string(folder.join("figures/diagram1.svg")).expect("there"), "<svg>2</svg>");
}
