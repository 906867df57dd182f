//! The scalars over which a formula graph can be evaluated.
//!
//! One blanket implementation covers `f64` and every dual number of the `num-dual` crate. A scalar of
//! another kind (extended precision, intervals) implements [`Scalar`] itself.

use std::ops::{Add, Div, Mul, Neg, Sub};

use num_dual::{DualNum, DualStruct};

use crate::bernoulli::bernoulli;
use crate::function::{Binary, Unary};

/// A number that the formula graph can be evaluated over.
pub trait Scalar:
    Clone + Add<Output = Self> + Sub<Output = Self> + Mul<Output = Self> + Div<Output = Self> + Neg<Output = Self>
{
    /// The machine number `value`, exactly.
    fn from_f64(value: f64) -> Self;
    /// The decimal number in `text` (sign, digits, point, exponent), as well as the scalar can hold it.
    fn from_decimal(text: &str) -> Self;
    /// The ratio of a circle's circumference to its diameter.
    fn pi() -> Self;
    /// The machine number nearest to the value: decides between branches of a formula.
    fn leading(&self) -> f64;
    /// Whole-number power, of any base.
    fn power(self, exponent: i32) -> Self;
    /// A function of one argument.
    fn unary(self, function: Unary) -> Self;
    /// A function of two arguments.
    fn binary(self, function: Binary, second: Self) -> Self;
}

impl<D: DualNum<Primitive = f64>> Scalar for D {
    fn from_f64(value: f64) -> Self {
        D::from(value)
    }

    fn from_decimal(text: &str) -> Self {
        // The graph only holds decimals that parse; a foreign caller's bad text becomes not-a-number.
        D::from(text.parse().unwrap_or(f64::NAN))
    }

    fn pi() -> Self {
        D::from(std::f64::consts::PI)
    }

    fn leading(&self) -> f64 {
        DualStruct::re(self)
    }

    fn power(self, exponent: i32) -> Self {
        let mut result = D::from(1.0);
        let mut square = self;
        let mut left = exponent.unsigned_abs();
        while left > 0 {
            if left & 1 == 1 {
                result *= square.clone();
            }
            left >>= 1;
            if left > 0 {
                square = square.clone() * square;
            }
        }
        if exponent < 0 { result.recip() } else { result }
    }

    fn unary(self, function: Unary) -> Self {
        match function {
            Unary::Sin => self.sin(),
            Unary::Cos => self.cos(),
            Unary::Tan => self.tan(),
            Unary::Asin => self.asin(),
            Unary::Acos => self.acos(),
            Unary::Atan => self.atan(),
            Unary::Sinh => self.sinh(),
            Unary::Cosh => self.cosh(),
            Unary::Tanh => tanh(self),
            Unary::Exp => self.exp(),
            Unary::Expm1 => self.exp_m1(),
            Unary::Log => self.ln(),
            Unary::Log1p => self.ln_1p(),
            Unary::Log10 => self.log10(),
            Unary::Sqrt => self.sqrt(),
            Unary::Cbrt => self.cbrt(),
            Unary::Abs => {
                if self.leading() < 0.0 {
                    -self
                } else {
                    self
                }
            }
            Unary::Floor => D::from(self.leading().floor()),
            Unary::Sign => D::from(sign(self.leading())),
            Unary::Bernoulli(order) => bernoulli(order, self),
        }
    }

    fn binary(self, function: Binary, second: Self) -> Self {
        match function {
            Binary::Atan2 => self.atan2(second),
            Binary::Min => {
                if not_above(&self, &second) {
                    self
                } else {
                    second
                }
            }
            Binary::Max => {
                if not_above(&second, &self) {
                    self
                } else {
                    second
                }
            }
            Binary::NotAbove => D::from(f64::from(u8::from(not_above(&self, &second)))),
            Binary::PowerLog(order) => power_log(self, second, order),
        }
    }
}

/// -1, 0 or 1; not-a-number stays so.
pub(crate) fn sign(value: f64) -> f64 {
    if value == 0.0 { 0.0 } else { value.signum() }
}

fn not_above<D: DualNum<Primitive = f64>>(a: &D, b: &D) -> bool {
    a.leading() <= b.leading()
}

/// Quotient of sinh and cosh in a form that does not overflow, with all derivatives.
fn tanh<D: DualNum<Primitive = f64>>(x: D) -> D {
    let positive = x.leading() >= 0.0;
    let e = (if positive { x * -2.0 } else { x * 2.0 }).exp_m1();
    let magnitude = -e.clone() / (e + 2.0);
    if positive { magnitude } else { -magnitude }
}

/// `a^b log(a)^order`, with its limit 0 at a = 0 for positive b.
fn power_log<D: DualNum<Primitive = f64>>(a: D, b: D, order: u8) -> D {
    let (base, exponent) = (a.leading(), b.leading());
    if base > 0.0 {
        let logarithm = a.ln();
        (logarithm.clone() * b).exp() * Scalar::power(logarithm, i32::from(order))
    } else if order == 0 {
        // No derivative in the exponent exists here; that in the base does for whole exponents.
        a.powf(exponent)
    } else {
        D::from(power_log_f64(base, exponent, order))
    }
}

/// `a^b log(a)^order` for machine numbers.
pub(crate) fn power_log_f64(a: f64, b: f64, order: u8) -> f64 {
    if order == 0 {
        a.powf(b)
    } else if a == 0.0 && b > 0.0 {
        0.0
    } else {
        a.powf(b) * a.ln().powi(i32::from(order))
    }
}

/// The same functions on machine numbers, for the compiled programs.
pub(crate) fn unary_f64(function: Unary, x: f64) -> f64 {
    match function {
        Unary::Tanh => x.tanh(),
        other => x.unary(other),
    }
}

/// The same functions on machine numbers, for the compiled programs.
pub(crate) fn binary_f64(function: Binary, x: f64, y: f64) -> f64 {
    match function {
        Binary::PowerLog(order) => power_log_f64(x, y, order),
        other => x.binary(other, y),
    }
}
