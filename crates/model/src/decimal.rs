//! Exact decimal numbers: a literal as it was written, before any rounding.
//!
//! A [`Decimal`] is sign, digits and a power of ten. Sums, products and terminating quotients of
//! short decimals stay exact, so that `2 * 0.1` is the decimal 0.2 and is rounded once, when it
//! becomes a machine number. An operation whose exact result is too long is refused (`None`) and
//! stays an operation of the graph.

use std::fmt;

/// Digits that an exact operation may handle: two such mantissas multiply within `i128`.
const EXACT_DIGITS: usize = 18;

/// Powers of ten tried before a quotient is taken as not terminating.
const QUOTIENT_DIGITS: u32 = 18;

/// Exponents beyond this are far outside binary64, so clamping them changes no rounded value.
const EXPONENT_LIMIT: i64 = 1_000_000;

/// A decimal number, exact: `digits * 10^exponent` with a sign.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub struct Decimal {
    negative: bool,
    /// No leading and no trailing zero; empty for the number zero.
    digits: String,
    exponent: i64,
}

impl Decimal {
    /// The whole number `value`.
    pub fn whole(value: i64) -> Self {
        Self::from_parts(i128::from(value), 0)
    }

    /// Reads `12`, `1.5`, `.5`, `2.5e-3`; `None` if the text is not such a number.
    pub fn parse(text: &str) -> Option<Self> {
        let (negative, unsigned) = match text.strip_prefix('-') {
            Some(rest) => (true, rest),
            None => (false, text),
        };
        let (mantissa, exponent) = match unsigned.find(['e', 'E']) {
            Some(at) => (&unsigned[..at], parse_exponent(&unsigned[at + 1..])?),
            None => (unsigned, 0),
        };
        let (whole, fraction) = mantissa.split_once('.').unwrap_or((mantissa, ""));
        let all_digits = whole.bytes().chain(fraction.bytes()).all(|b| b.is_ascii_digit());
        if !all_digits || (whole.is_empty() && fraction.is_empty()) {
            return None;
        }
        let exponent = exponent - fraction.len() as i64;
        Some(Self::normalised(negative, format!("{whole}{fraction}"), exponent))
    }

    fn normalised(negative: bool, mut digits: String, mut exponent: i64) -> Self {
        let kept = digits.trim_end_matches('0').len();
        exponent += (digits.len() - kept) as i64;
        digits.truncate(kept);
        let leading = digits.len() - digits.trim_start_matches('0').len();
        digits.drain(..leading);
        if digits.is_empty() {
            return Self { negative: false, digits, exponent: 0 };
        }
        Self { negative, digits, exponent: exponent.clamp(-EXPONENT_LIMIT, EXPONENT_LIMIT) }
    }

    fn from_parts(mantissa: i128, exponent: i64) -> Self {
        Self::normalised(mantissa < 0, mantissa.unsigned_abs().to_string(), exponent)
    }

    /// Mantissa and exponent, if the mantissa is short enough for exact arithmetic.
    pub(crate) fn parts(&self) -> Option<(i128, i64)> {
        if self.digits.is_empty() {
            return Some((0, 0));
        }
        if self.digits.len() > EXACT_DIGITS {
            return None;
        }
        let magnitude: i128 = self.digits.parse().ok()?;
        Some((if self.negative { -magnitude } else { magnitude }, self.exponent))
    }

    /// Whether this is the number zero.
    pub fn is_zero(&self) -> bool {
        self.digits.is_empty()
    }

    /// The number as an `i32`, if it is whole and fits.
    pub fn as_whole(&self) -> Option<i32> {
        let (mantissa, exponent) = self.parts()?;
        // 10^10 exceeds i32 already.
        let scale = 10_i128.pow(u32::try_from(exponent).ok().filter(|e| *e <= 10)?);
        i32::try_from(mantissa.checked_mul(scale)?).ok()
    }

    /// Rounded to the nearest binary64 number (infinite beyond its range).
    pub fn to_f64(&self) -> f64 {
        self.scientific().parse().expect("digits and an exponent are a valid float literal")
    }

    fn scientific(&self) -> String {
        let sign = if self.negative { "-" } else { "" };
        let digits = if self.digits.is_empty() { "0" } else { &self.digits };
        format!("{sign}{digits}e{}", self.exponent)
    }

    /// The number with the other sign.
    pub fn negated(&self) -> Self {
        Self { negative: !self.negative && !self.is_zero(), ..self.clone() }
    }

    /// Whether the number is below zero.
    pub fn is_negative(&self) -> bool {
        self.negative
    }

    /// Exact sum, if it is short.
    pub fn plus(&self, other: &Self) -> Option<Self> {
        let ((a, ea), (b, eb)) = (self.parts()?, other.parts()?);
        let low = if a == 0 {
            eb
        } else if b == 0 {
            ea
        } else {
            ea.min(eb)
        };
        let lift = |m: i128, e: i64| {
            let gap = u32::try_from(e - low).ok()?;
            if m == 0 { Some(0) } else { m.checked_mul(10_i128.checked_pow(gap)?) }
        };
        Self::short(lift(a, ea.max(low))?.checked_add(lift(b, eb.max(low))?)?, low)
    }

    /// Exact product, if it is short.
    pub fn times(&self, other: &Self) -> Option<Self> {
        let ((a, ea), (b, eb)) = (self.parts()?, other.parts()?);
        Self::short(a.checked_mul(b)?, ea + eb)
    }

    /// Exact quotient, if it terminates and is short.
    pub fn over(&self, other: &Self) -> Option<Self> {
        let ((a, ea), (b, eb)) = (self.parts()?, other.parts()?);
        if b == 0 {
            return None;
        }
        (0..=QUOTIENT_DIGITS).find_map(|shift| {
            let lifted = a.checked_mul(10_i128.pow(shift))?;
            if lifted % b != 0 {
                return None;
            }
            Self::short(lifted / b, ea - eb - i64::from(shift))
        })
    }

    fn short(mantissa: i128, exponent: i64) -> Option<Self> {
        let result = Self::from_parts(mantissa, exponent);
        (result.digits.len() <= EXACT_DIGITS).then_some(result)
    }
}

fn parse_exponent(text: &str) -> Option<i64> {
    let digits = text.strip_prefix(['+', '-']).unwrap_or(text);
    if digits.is_empty() || !digits.bytes().all(|b| b.is_ascii_digit()) {
        return None;
    }
    let magnitude = digits.parse::<i64>().unwrap_or(EXPONENT_LIMIT).min(EXPONENT_LIMIT);
    Some(if text.starts_with('-') { -magnitude } else { magnitude })
}

impl fmt::Display for Decimal {
    /// Plain notation where it is short, otherwise digits with an exponent.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        /// Zeros that plain notation may add before it is harder to read than an exponent.
        const PLAIN_ZEROS: i64 = 4;
        if self.is_zero() {
            return f.write_str("0");
        }
        let sign = if self.negative { "-" } else { "" };
        let length = self.digits.len() as i64;
        let point = length + self.exponent;
        if self.exponent >= 0 && self.exponent <= PLAIN_ZEROS {
            let zeros = "0".repeat(self.exponent as usize);
            write!(f, "{sign}{}{zeros}", self.digits)
        } else if self.exponent < 0 && point > 0 {
            let (whole, fraction) = self.digits.split_at(point as usize);
            write!(f, "{sign}{whole}.{fraction}")
        } else if self.exponent < 0 && point > -PLAIN_ZEROS {
            write!(f, "{sign}0.{}{}", "0".repeat(-point as usize), self.digits)
        } else {
            let (whole, fraction) = self.digits.split_at(1);
            let dot = if fraction.is_empty() { "" } else { "." };
            write!(f, "{sign}{whole}{dot}{fraction}e{}", point - 1)
        }
    }
}

#[cfg(test)]
mod tests {
    use super::Decimal;

    fn decimal(text: &str) -> Decimal {
        Decimal::parse(text).expect("a valid literal")
    }

    #[test]
    fn text_round_trips() {
        for (text, shown) in [
            ("0", "0"),
            ("0.00", "0"),
            ("10", "10"),
            ("1.50", "1.5"),
            (".5", "0.5"),
            ("1e-3", "0.001"),
            ("6.02e23", "6.02e23"),
            ("1e-9", "1e-9"),
            ("-2.5e1", "-25"),
        ] {
            assert_eq!(decimal(text).to_string(), shown);
            assert_eq!(decimal(text).to_f64(), text.parse::<f64>().expect("a float"));
        }
        assert_eq!(decimal("1e400").to_f64(), f64::INFINITY);
        for bad in ["", ".", "1e", "e5", "1.2.3", "--1", "1_0"] {
            assert!(Decimal::parse(bad).is_none(), "{bad}");
        }
    }

    #[test]
    fn arithmetic_is_exact() {
        // 0.1 + 0.2 in binary64 is not 0.3; in decimals it is.
        assert_eq!(decimal("0.1").plus(&decimal("0.2")), Some(decimal("0.3")));
        assert_eq!(decimal("0.1").times(&decimal("3")), Some(decimal("0.3")));
        assert_eq!(decimal("1").over(&decimal("8")), Some(decimal("0.125")));
        assert_eq!(decimal("1").over(&decimal("3")), None);
        assert_eq!(decimal("5").plus(&decimal("-5")), Some(Decimal::whole(0)));
        assert_eq!(decimal("1e300").plus(&decimal("1")), None);
        assert_eq!(decimal("0").plus(&decimal("1e-7")), Some(decimal("1e-7")));
        assert_eq!(decimal("20").as_whole(), Some(20));
        assert_eq!(decimal("2.5").as_whole(), None);
    }
}
