//! A number beside its reference and its own reported error.

/// Checks that `found` is `exact` to `tolerance`, relative to the larger of 1 and the exact value, and within the error
/// reported with it, the reference being good to `digits` of its last place.
///
/// # Panics
/// Where it is not.
pub fn within(what: &str, (found, error): (f64, Option<f64>), (exact, digits): (f64, f64), tolerance: f64) {
    let error = error.unwrap_or_else(|| panic!("{what}: no error reported"));
    let off = (found - exact).abs();
    let size = exact.abs().max(1.0);
    assert!(off <= tolerance * size + digits, "{what}: {found} for {exact}, off {off:e}");
    let own = error + digits + 2.0 * f64::EPSILON * exact.abs();
    assert!(off <= own, "{what}: {found} for {exact}, off {off:e}, error {error:e}");
}
