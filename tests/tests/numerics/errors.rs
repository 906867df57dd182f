//! Reported errors against true ones, over all numbers of docs/errors.md.

use armilla_tests::{Row, WIDEST, rows};

/// Sources of the truths: beside each in the library, `errors/exact.rs` and `errors/independent.rs`.
#[test]
fn every_reported_error_covers_the_true_one_and_is_not_a_thousand_times_too_wide() {
    let rows = rows();
    assert!(rows.len() >= 60, "{} numbers", rows.len());
    let outside: Vec<&Row> = rows.iter().filter(|row| !row.is_inside()).collect();
    assert!(outside.is_empty(), "{} of {}: {outside:#?}", outside.len(), rows.len());
    let wide: Vec<&Row> = rows.iter().filter(|row| row.ratio() > WIDEST).collect();
    assert!(wide.is_empty(), "{} of {}: {wide:#?}", wide.len(), rows.len());
}
