//! Numbers with their errors read out of the sentence of an end.

/// Value and error of `... = 1.25 ± 3e-9 ...`.
///
/// # Panics
/// Where there are none.
pub fn value_with_error(words: &str) -> (f64, f64) {
    let (before, after) = words.split_once(" ± ").unwrap_or_else(|| panic!("no error in {words:?}"));
    let value = before.rsplit(' ').next().expect("a word");
    let error = after.split([' ', ',', ';']).next().expect("a word");
    let number = |text: &str| text.parse::<f64>().unwrap_or_else(|_| panic!("no number in {words:?}"));
    (number(value), number(error))
}

/// Ratios of the reported to the true error: every one at least 1, the median at most `largest`.
#[track_caller]
pub fn check_ratios(what: &str, mut ratios: Vec<f64>, largest: f64) {
    ratios.sort_by(f64::total_cmp);
    let median = ratios[ratios.len() / 2];
    eprintln!(
        "{what}: {} cases, ratios {:.1e} to {:.1e}, median {median:.1e}",
        ratios.len(),
        ratios[0],
        ratios[ratios.len() - 1]
    );
    assert!(ratios[0] >= 1.0, "{what}: an error does not cover the truth: {ratios:?}");
    assert!(median <= largest, "{what}: errors are far too large: {ratios:?}");
}
