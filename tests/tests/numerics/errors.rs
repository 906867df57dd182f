//! Reported errors against true ones, over all numbers of docs/errors.md.

use armilla_tests::{Row, rows};

/// Sources of the truths: beside each in the library, `errors/exact.rs` and `errors/independent.rs`.
#[test]
fn every_reported_error_covers_the_true_one_and_is_not_a_thousand_times_too_wide() {
    let rows = rows();
    assert!(rows.len() >= 60, "{} numbers", rows.len());
    let broken: Vec<&Row> = rows.iter().filter(|row| !row.holds()).collect();
    assert!(broken.is_empty(), "{} of {}: {broken:#?}", broken.len(), rows.len());
}
