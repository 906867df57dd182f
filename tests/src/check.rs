//! Comparisons that say what was found, what was wanted, and by how much they differ.

use std::f64::consts::PI;

use armilla_record::Multiplier;

/// Checks `|found - wanted| <= tolerance * |wanted|`.
///
/// # Panics
/// Where it does not hold.
#[track_caller]
pub fn relative(what: &str, found: f64, wanted: f64, tolerance: f64) {
    let difference = (found - wanted).abs() / wanted.abs();
    report(what, (found, wanted), difference, tolerance, "relative");
}

/// Checks `|found - wanted| <= tolerance`.
///
/// # Panics
/// Where it does not hold.
#[track_caller]
pub fn absolute(what: &str, found: f64, wanted: f64, tolerance: f64) {
    report(what, (found, wanted), (found - wanted).abs(), tolerance, "absolute");
}

/// Checks a real multiplier given by its logarithm and sign: the modulus to `tolerance` relative, the angle exactly.
///
/// # Panics
/// Where it does not hold.
#[track_caller]
pub fn multiplier(what: &str, found: Multiplier, (log_modulus, negative): (f64, bool), tolerance: f64) {
    // d log|mu| = d|mu| / |mu|.
    absolute(what, found.log_modulus, log_modulus, tolerance);
    assert_eq!(found.angle, if negative { PI } else { 0.0 }, "{what}: angle");
}

#[track_caller]
fn report(what: &str, (found, wanted): (f64, f64), difference: f64, tolerance: f64, kind: &str) {
    eprintln!(
        "{what}: found {found:.17e}, wanted {wanted:.17e}, {kind} difference {difference:.1e} (allowed {tolerance:.0e})"
    );
    // Written so that NaN fails.
    assert!(
        difference <= tolerance,
        "{what}: found {found:.17e}, wanted {wanted:.17e}, {kind} difference {difference:.1e}"
    );
}
