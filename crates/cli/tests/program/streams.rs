//! What goes to which stream.

use crate::desk::Desk;
use crate::scenes::x1;

/// Standard error is no terminal here, so nothing of the progress may reach it, asked to be quiet or not.
#[test]
fn no_progress_but_on_a_terminal() {
    let desk = Desk::with(&x1());
    let loud = desk.run(&["trace", "x1.study.ron"]);
    let quiet = desk.run(&["trace", "x1.study.ron", "--replace", "--quiet"]);
    assert_eq!((loud.code, loud.err.as_str()), (0, ""), "{loud:?}");
    assert_eq!((quiet.code, quiet.err.as_str()), (0, ""), "{quiet:?}");
    assert_eq!(loud.out, quiet.out, "the closing table comes either way");
}

#[test]
fn the_closing_table_names_events_ends_folder_and_caution() {
    let desk = Desk::with(&x1());
    let said = desk.run(&["trace", "x1.study.ron"]);
    for wanted in [
        "event",
        "a/start1",
        "a/target1",
        "a/edge1",
        "reaches the edge of the asked range, mu = 0.1",
        "reaches the edge of the asked range, mu = 1",
        "x1.results",
        "These numbers describe the model, not the machine; local codes and licensed practice decide.",
    ] {
        assert!(said.out.contains(wanted), "no `{wanted}` in\n{}", said.out);
    }
    assert!(!said.out.contains('\u{1b}'), "no colours where there is no terminal");
    // Exact: the period at the target mu = 1/2 is 2 pi/1.25; fourteen digits are printed or fewer.
    let row = said.out.lines().find(|line| line.starts_with("a/target1")).expect("a row");
    let period: f64 = row.split_whitespace().nth(3).expect("a period").parse().expect("a number");
    assert!((period - 2.0 * std::f64::consts::PI / 1.25).abs() < 1e-9, "{row}");
}

/// Whole words of the trade: no words of two or three capital letters but these.
#[test]
fn help_speaks_in_whole_words() {
    let desk = Desk::new();
    let allowed =
        ["CSV", "DIR", "NAME", "VALUE", "TIME", "FORMAT", "RESULTS", "MODEL", "STUDY", "FILE", "COMMAND", "OPTIONS"];
    for arguments in [
        &["--help"][..],
        &["check", "--help"],
        &["settle", "--help"],
        &["trace", "--help"],
        &["draw", "--help"],
        &["export", "--help"],
    ] {
        let said = desk.run(arguments);
        assert_eq!((said.code, said.err.as_str()), (0, ""), "{said:?}");
        assert!(said.out.contains("Usage: armilla"), "{}", said.out);
        for word in said.out.split(|c: char| !c.is_alphanumeric()) {
            let is_code = word.len() > 1
                && word.chars().all(|c| c.is_uppercase() || c.is_ascii_digit())
                && word.chars().any(char::is_uppercase);
            assert!(!is_code || allowed.contains(&word), "`{word}` in\n{}", said.out);
        }
        assert!(said.out.lines().all(|line| line.chars().count() <= 100), "{}", said.out);
    }
    let version = desk.run(&["--version"]);
    assert_eq!(version.out, format!("armilla {}\n", env!("CARGO_PKG_VERSION")));
}

/// A reader of the table that goes away early, as `head` does, is no fault of the program's.
#[cfg(unix)]
#[test]
fn a_closed_pipe_ends_without_a_panic() {
    let desk = Desk::with(&x1());
    let program = env!("CARGO_BIN_EXE_armilla");
    let script = format!("'{program}' check x1.model.ron | true; '{program}' trace x1.study.ron | true");
    let output =
        std::process::Command::new("sh").arg("-c").arg(script).current_dir(desk.path("")).output().expect("a shell");
    let err = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(!err.contains("panicked"), "{err}");
    assert!(desk.path("x1.results/thresholds.csv").exists());
}
