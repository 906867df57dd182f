//! A 64-bit number against a reference of more digits than 64 bits hold.

/// Decimals kept: with 128-bit integers numbers up to 1e8 fit.
const DECIMALS: usize = 30;

/// `found - truth` without rounding, and one unit of the last digit of `truth`, a decimal number without exponent.
///
/// Digits that follow the point in `truth` are what is known of it: `9.78` is known to 0.01.
///
/// # Panics
/// Where `truth` is no such number, or either is larger than 1e8.
///
/// ```
/// use armilla_tests::difference;
///
/// let (error, unit) = difference(0.1, "0.10000000000000000000");
/// assert!((error / 5.55e-18 - 1.0).abs() < 1e-2 && unit == 1e-20);
/// ```
pub fn difference(found: f64, truth: &str) -> (f64, f64) {
    let decimals = truth.split_once('.').map_or(0, |(_, tail)| tail.len());
    // Rust prints the decimals of a float without rounding before the last one asked for.
    let error = fixed(&format!("{found:.DECIMALS$}")) - fixed(truth);
    (error as f64 * 10f64.powi(-(DECIMALS as i32)), 10f64.powi(-(decimals as i32)))
}

/// A decimal number in units of 10^-[`DECIMALS`].
fn fixed(text: &str) -> i128 {
    let (sign, digits) = text.strip_prefix('-').map_or((1, text), |rest| (-1, rest));
    let (whole, tail) = digits.split_once('.').unwrap_or((digits, ""));
    let padded = format!("{whole}{:0<DECIMALS$.DECIMALS$}", tail);
    sign * padded.parse::<i128>().unwrap_or_else(|fault| panic!("no decimal number: {text}: {fault}"))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// By hand.
    #[test]
    fn differences_keep_every_digit() {
        assert_eq!(difference(1.5, "1.25"), (0.25, 0.01));
        let (tiny, _) = difference(-1614.0, "-1614.000000000000000000000001");
        assert!((tiny / 1e-24 - 1.0).abs() < 1e-15, "{tiny:e}");
        assert_eq!(difference(3.0, "3"), (0.0, 1.0));
        let (error, _) = difference(std::f64::consts::PI, "3.141592653589793238462643383280");
        // Known: pi exceeds its 64-bit value by 1.2246e-16.
        assert!((error / -1.224_646_799_147_353e-16 - 1.0).abs() < 1e-12, "{error:e}");
    }
}
