//! What is written reads back to the last bit.

use std::fs;
use std::path::Path;

use armilla_record::*;

use crate::sample::{all_bits, branch, branch_of_format_2, branch_of_today};

#[test]
fn branches_of_random_bits_read_back_to_the_last_bit() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("a.ron");
    let mut checked = 0;
    for seed in 0..250 {
        let written = branch_of_today(seed, "a.doubling1", 1 + seed as usize % 9);
        write_branch_file(&path, &written).expect("a sound branch");
        let read = parse_branch(&path, &fs::read(&path).expect("it is there")).expect("a sound file");
        assert_eq!(read, written, "seed {seed}");
        assert_eq!(all_bits(&read), all_bits(&written), "seed {seed}");
        checked += all_bits(&read).len();
    }
    assert!(checked > 100_000, "{checked} numbers");
}

/// The file of format version 1 as first written; it must be readable for ever.
/// If `sample` has to change, keep its old form for this test; never write this file anew.
#[test]
fn a_kept_file_of_format_1_still_reads() {
    let kept = include_bytes!("branch-format-1.ron");
    let read = parse_branch(Path::new("branch-format-1.ron"), kept).expect("format 1 is known");
    let written = branch(15, "a.doubling1", 4);
    assert_eq!(read, written);
    assert_eq!(all_bits(&read), all_bits(&written));
}

/// The same for format 2.
#[test]
fn a_kept_file_of_format_2_still_reads() {
    let kept = include_bytes!("branch-format-2.ron");
    let read = parse_branch(Path::new("branch-format-2.ron"), kept).expect("format 2 is known");
    let written = branch_of_format_2(15, "a.doubling1", 4);
    assert_eq!(read, written);
    assert_eq!(all_bits(&read), all_bits(&written));
}

/// The same for format 3.
#[test]
fn a_kept_file_of_format_3_still_reads() {
    let kept = include_bytes!("branch-format-3.ron");
    let read = parse_branch(Path::new("branch-format-3.ron"), kept).expect("format 3 is known");
    let written = branch_of_today(15, "a.doubling1", 4);
    assert_eq!(read, written);
    assert_eq!(all_bits(&read), all_bits(&written));
}

/// Outside: any RON reader, here with no type of ours; the two comment lines do not disturb it.
#[test]
fn the_file_is_plain_ron_with_no_line_beyond_reason() {
    let text = include_str!("branch-format-3.ron");
    ron::from_str::<ron::Value>(text).expect("plain RON");
    let longest = text.lines().map(str::len).max();
    assert!(longest < Some(170), "{longest:?}");
}

#[test]
fn two_writings_are_the_same_bytes() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let (one, two) = (place.path().join("1"), place.path().join("2"));
    for path in [&one, &two] {
        write_branch_file(path, &branch(7, "a", 5)).expect("a sound branch");
    }
    assert_eq!(fs::read(one).expect("there"), fs::read(two).expect("there"));
}

/// Outside: the `csv` reader and the standard library's parser.
#[test]
fn the_table_of_a_branch_reads_back_to_the_last_bit() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("a.csv");
    for seed in 0..50 {
        let written = branch_of_today(seed, "a", 6);
        write_branch_table(&path, &written).expect("a table");
        let mut reader = csv::Reader::from_path(&path).expect("a table");
        let header = reader.headers().expect("a header").clone();
        let rows: Vec<csv::StringRecord> = reader.records().map(|row| row.expect("a row")).collect();
        assert_eq!(rows.len(), written.points.len());
        for (k, (row, point)) in rows.iter().zip(&written.points).enumerate() {
            let cell = |name: &str| {
                let column = header.iter().position(|found| found == name).expect("the column");
                row[column].to_string()
            };
            let bits = |name: &str| cell(name).parse::<f64>().expect("a number").to_bits();
            assert_eq!(cell("point"), k.to_string());
            assert_eq!(bits("value"), point.value.to_bits());
            assert_eq!(bits("liouville_defect"), point.liouville_defect.to_bits());
            assert_eq!(cell("degree"), point.degree.to_string());
            assert_eq!(cell("choice"), point.choice.word());
            assert_eq!(cell("reached"), point.reached.word());
            let below = point.unresolved.map_or(String::new(), |u| format!("{:?}", u.below));
            assert_eq!(cell("unresolved_below"), below);
            assert_eq!(cell("stable"), if point.unstable_count == 0 { "true" } else { "false" });
            for (i, state) in written.states.iter().enumerate() {
                assert_eq!(bits(&format!("{}_max", state.name)), point.maxima[i].to_bits());
                assert_eq!(bits(&format!("{}_min", state.name)), point.minima[i].to_bits());
                assert_eq!(bits(&format!("{}_mean", state.name)), point.means[i].to_bits());
            }
            for (i, multiplier) in point.multipliers.iter().enumerate() {
                let name = format!("multiplier{}", i + 1);
                assert_eq!(bits(&format!("{name}_log_modulus")), multiplier.log_modulus.to_bits());
                assert_eq!(bits(&format!("{name}_angle")), multiplier.angle.to_bits());
            }
        }
    }
}

#[test]
fn thresholds_read_back() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("thresholds.csv");
    for seed in 0..100 {
        let rows = Threshold::rows(&[branch(seed, "a.doubling1", 3), branch(seed + 1000, "a", 3)]);
        write_threshold_table(&path, &rows).expect("a table");
        let read = parse_threshold_table(&path, &fs::read(&path).expect("there")).expect("a sound table");
        assert_eq!(read, rows, "seed {seed}");
        for (a, b) in read.iter().zip(&rows) {
            assert_eq!(a.value.to_bits(), b.value.to_bits());
        }
    }
}
