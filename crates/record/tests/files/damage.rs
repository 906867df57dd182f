//! Damage and contradictions are found, and told apart.

use std::fs;
use std::path::Path;

use armilla_record::*;

use crate::sample::{Bits, branch};

fn bytes_of(branch: &Branch) -> Vec<u8> {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("a.ron");
    write_branch_file(&path, branch).expect("a sound branch");
    fs::read(path).expect("it is there")
}

fn parse(bytes: &[u8]) -> Result<Branch, RecordError> {
    parse_branch(Path::new("branches/a.ron"), bytes)
}

/// A file with other text and the sum that fits it, as somebody might make one.
fn resealed(text: &str) -> Vec<u8> {
    use sha2::{Digest, Sha256};
    let body = &text[..text.rfind("// sha256").expect("a sealed file")];
    let sum: String = Sha256::digest(body).iter().map(|byte| format!("{byte:02x}")).collect();
    format!("{body}// sha256 of all lines above: {sum}\n").into_bytes()
}

#[test]
fn a_file_cut_anywhere_is_rejected() {
    let whole = bytes_of(&branch(3, "a", 4));
    parse(&whole).expect("the whole file");
    // Every cut near both ends, every 13th between.
    let middle = (400..whole.len().saturating_sub(400)).step_by(13);
    for k in (0..400).chain(middle).chain(whole.len() - 400..whole.len()) {
        let error = parse(&whole[..k]).expect_err("a cut file");
        assert!(matches!(error, RecordError::Damaged { .. } | RecordError::Malformed { line: 1, .. }), "{k}: {error}");
    }
}

#[test]
fn a_flipped_bit_anywhere_is_rejected() {
    let whole = bytes_of(&branch(4, "a", 3));
    let mut bits = Bits(11);
    for _ in 0..3000 {
        let mut flipped = whole.clone();
        let place = bits.below(whole.len() as u64);
        flipped[place] ^= 1 << bits.below(8);
        parse(&flipped).expect_err("a flipped bit");
    }
}

#[test]
fn a_lost_line_and_a_changed_digit_are_called_damage() {
    let text = String::from_utf8(bytes_of(&branch(5, "a", 3))).expect("text");
    let changed = text.replacen("accuracy: 1e-9", "accuracy: 2e-9", 1);
    assert_ne!(changed, text);
    let lines: Vec<&str> = text.lines().collect();
    let lost: String = lines.iter().enumerate().filter(|(k, _)| *k != 9).map(|(_, line)| format!("{line}\n")).collect();
    for text in [changed, lost, text.replace('\n', "\r\n")] {
        let error = parse(text.as_bytes()).expect_err("damage");
        assert!(!error.is_machine_fault());
        assert!(matches!(error, RecordError::Damaged { .. } | RecordError::Malformed { line: 1, .. }), "{error}");
    }
}

#[test]
fn a_later_format_is_refused_in_words() {
    let text = String::from_utf8(bytes_of(&branch(5, "a", 3))).expect("text");
    let later = text.replacen("format 3", "format 7", 1);
    let error = parse(&resealed(&later)).expect_err("format 7");
    let words = "branches/a.ron has format version 7, this armilla reads versions up to 3; use a newer armilla";
    assert_eq!(error.to_string(), words);
}

#[test]
fn unknown_fields_are_refused_with_their_place() {
    let text = String::from_utf8(bytes_of(&branch(5, "a", 3))).expect("text");
    let more = text.replacen("    accuracy:", "    colour: 3,\n    accuracy:", 1);
    let line = more.lines().position(|line| line.contains("colour")).expect("it was put there") + 1;
    match parse(&resealed(&more)).expect_err("an unknown field") {
        RecordError::Malformed { line: found, column: 5, what, .. } if found == line => {
            assert!(what.contains("colour") && what.contains("accuracy"), "{what}");
        }
        other => panic!("line {line}: {other:?}"),
    }
}

#[test]
fn foreign_files_are_no_branches() {
    for text in ["", "(format: 1)", "value,period\n1,2\n", "// armilla journal, format 1\n"] {
        let error = parse(text.as_bytes()).expect_err("no branch");
        assert!(matches!(error, RecordError::Malformed { line: 1, column: 1, .. }), "{error:?}");
    }
}

/// Changes a sound branch in one place.
type Spoil = fn(&mut Branch);

#[test]
fn contradictions_are_neither_written_nor_read() {
    let spoils: [(&str, Spoil); 24] = [
        ("value is NaN", |b| b.points[1].value = f64::NAN),
        ("period is inf", |b| b.points[0].period = f64::INFINITY),
        ("profile_error is not a number", |b| b.points[0].profile_error = f64::NAN),
        ("log_modulus of a multiplier is NaN", |b| b.points[0].multipliers[0].log_modulus = f64::NAN),
        ("log_modulus of a multiplier is inf", |b| b.points[0].multipliers[0].log_modulus = f64::INFINITY),
        ("outside (-pi, pi]", |b| b.points[0].multipliers[0].angle = -std::f64::consts::PI),
        ("maxima for", |b| b.points[2].maxima.push(0.0)),
        ("spreads are missing", |b| b.points[2].spreads.clear()),
        ("more multipliers are unstable", |b| b.points[0].unstable_count = 100),
        ("more eigenvalues are unstable", |b| {
            b.of = Solutions::Equilibria;
            b.points[0].multipliers.clear();
            b.points[0].unstable_count = 1;
        }),
        ("none has both", |b| b.points[0].eigenvalues.push(Eigenvalue { re: 0.0, im: 0.0 })),
        ("points are not in the order", |b| b.points.swap(0, 2)),
        ("two events are named", |b| b.events[1] = b.events[0].clone()),
        ("the name must be a/", |b| b.events[0].name = "b/fold1".into()),
        ("value is -inf", |b| b.events[0].value = f64::NEG_INFINITY),
        ("error is NaN", |b| b.events[0].error = Some(f64::NAN)),
        ("point 99", |b| b.profiles[0].point = 99),
        ("mesh must ascend", |b| b.profiles[0].profile.mesh[0] = 0.5),
        ("node values", |b| b.profiles[0].profile.values.push(0.0)),
        ("does not ascend", |b| b.range = (2.0, 1.0)),
        ("accuracy", |b| b.accuracy = 0.0),
        ("no name of a branch", |b| b.name = "../a".into()),
        ("no name of an event", |b| b.born_at = Some("a".into())),
        ("at least one state and one point", |b| {
            b.points.clear();
            b.profiles.clear();
        }),
    ];
    let sound = (0..).map(|seed| branch(seed, "a", 4)).find(|b| b.states.len() > 1 && b.events.len() > 1);
    let sound = sound.expect("one of the seeds");
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("a.ron");
    for (words, spoil) in spoils {
        let mut spoiled = sound.clone();
        spoil(&mut spoiled);
        let error = write_branch_file(&path, &spoiled).expect_err(words);
        assert!(matches!(error, RecordError::Inconsistent { .. }), "{error:?}");
        assert!(error.to_string().contains(words), "`{error}` should contain `{words}`");
        assert!(!path.exists(), "{words}");
    }
    let text = String::from_utf8(bytes_of(&sound)).expect("text").replacen("accuracy: 1e-9", "accuracy: NaN", 1);
    let error = parse(&resealed(&text)).expect_err("not a number");
    assert!(matches!(error, RecordError::Inconsistent { .. }), "{error:?}");
}

#[test]
fn a_damaged_table_of_thresholds_is_refused_with_its_place() {
    let path = Path::new("thresholds.csv");
    let header = THRESHOLD_COLUMNS.join(",");
    let good = format!("{header}\na/fold1,a,fold,gain,1.5,1e-12,6.25,,1,0.0,,\n");
    assert_eq!(parse_threshold_table(path, good.as_bytes()).expect("sound").len(), 1);
    let later = format!("{header},more\na/fold1,a,fold,gain,1.5,1e-12,6.25,,1,0.0,,,x\n");
    assert_eq!(parse_threshold_table(path, later.as_bytes()).expect("columns may be added").len(), 1);
    let place = |text: &str| match parse_threshold_table(path, text.as_bytes()) {
        Err(RecordError::Malformed { line, column, .. }) => (line, column),
        other => panic!("{other:?}"),
    };
    assert_eq!(place(&good.replace("1.5", "one")), (2, 5));
    assert_eq!(place(&good.replace("1.5", "NaN")), (2, 5));
    assert_eq!(place(&good.replace(",fold,", ",bend,")), (2, 3));
    assert_eq!(place(&good.replace("period_error", "x")), (1, 8));
    assert_eq!(place(&good.replace(",0.0,,", ",0.0,")).0, 2);
    assert_eq!(place(""), (1, 1));
}
