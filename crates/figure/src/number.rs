//! Numbers as print wants them: a zero before the point, a true minus, thin spaces from five digits on.

use crate::text::raised;

/// `value` with `decimals` digits behind the point.
pub(crate) fn decimal(value: f64, decimals: usize) -> String {
    let plain = format!("{value:.decimals$}");
    let (sign, digits) = match plain.strip_prefix('-') {
        // Rounding may leave nothing but zeros of a small negative number.
        Some(digits) if digits.chars().any(|digit| ('1'..='9').contains(&digit)) => ("\u{2212}", digits),
        Some(digits) => ("", digits),
        None => ("", plain.as_str()),
    };
    match digits.split_once('.') {
        Some((whole, part)) => format!("{sign}{}.{}", grouped(whole, true), grouped(part, false)),
        None => format!("{sign}{}", grouped(digits, true)),
    }
}

/// Groups of three by thin spaces where there are five digits or more, counted from the point.
fn grouped(digits: &str, before_point: bool) -> String {
    let count = digits.len();
    if count < 5 {
        return digits.to_string();
    }
    let mut out = String::with_capacity(2 * count);
    for (i, digit) in digits.chars().enumerate() {
        let from_point = if before_point { count - i } else { i };
        if i > 0 && from_point % 3 == 0 {
            out.push('\u{2009}');
        }
        out.push(digit);
    }
    out
}

/// Ten to a power.
pub(crate) fn power_of_ten(exponent: i32) -> String {
    format!("10{}", raised(&exponent.to_string().replace('-', "\u{2212}")))
}

/// A number for running text: the shortest decimals that read back, a power of ten where those are long.
pub(crate) fn plain(value: f64) -> String {
    let size = value.abs();
    if value == 0.0 || (1e-4..1e6).contains(&size) {
        return value.to_string().replace('-', "\u{2212}");
    }
    let written = format!("{value:e}").replace('-', "\u{2212}");
    match written.split_once('e') {
        Some(("1", exponent)) => format!("10^{exponent}"),
        Some((digits, exponent)) => format!("{digits}×10^{exponent}"),
        None => written,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: the groups of RMP and ISO 31-0: 5000, 60 000, 0.01 (conventions of publishers).
    #[test]
    fn digits_are_grouped_as_publishers_ask() {
        assert_eq!(decimal(5000.0, 0), "5000");
        assert_eq!(decimal(60000.0, 0), "60\u{2009}000");
        assert_eq!(decimal(-0.01, 2), "\u{2212}0.01");
        assert_eq!(decimal(5.18781, 5), "5.187\u{2009}81");
        assert_eq!(decimal(-0.001, 2), "0.00");
        assert_eq!(plain(1e-9), "10^\u{2212}9");
        assert_eq!(plain(2.5), "2.5");
    }
}
