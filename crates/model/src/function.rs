//! The functions of the formula language and those that only derivatives bring in.

/// A function of one argument.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Unary {
    /// Sine.
    Sin,
    /// Cosine.
    Cos,
    /// Tangent.
    Tan,
    /// Inverse sine.
    Asin,
    /// Inverse cosine.
    Acos,
    /// Inverse tangent.
    Atan,
    /// Hyperbolic sine.
    Sinh,
    /// Hyperbolic cosine.
    Cosh,
    /// Hyperbolic tangent.
    Tanh,
    /// Exponential.
    Exp,
    /// `exp(x) - 1`, accurate near 0.
    Expm1,
    /// Natural logarithm.
    Log,
    /// `log(1 + x)`, accurate near 0.
    Log1p,
    /// Logarithm to base 10.
    Log10,
    /// Square root.
    Sqrt,
    /// Cube root.
    Cbrt,
    /// Absolute value.
    Abs,
    /// Largest whole number not above the argument.
    Floor,
    /// -1, 0 or 1 by the sign: the slope of [`Unary::Abs`].
    Sign,
    /// Derivative of the given order (at most 8) of `x / (exp(x) - 1)`; order 0 is the quotient itself.
    Bernoulli(u8),
}

/// A function of two arguments.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Binary {
    /// Angle of the point (second, first): `atan2(y, x)`.
    Atan2,
    /// The smaller one.
    Min,
    /// The larger one.
    Max,
    /// 1 where the first is not above the second, else 0: the slope of min and max.
    NotAbove,
    /// `a^b * log(a)^k`; k = 0 is the power itself, higher k are its slopes in b.
    PowerLog(u8),
}

/// A function as it is called in a formula.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Callable {
    /// Takes one argument.
    One(Unary),
    /// Takes two arguments.
    Two(Binary),
}

/// Every name that a formula can call, in the order of the documentation.
pub const FUNCTIONS: [(&str, Callable); 22] = [
    ("sin", Callable::One(Unary::Sin)),
    ("cos", Callable::One(Unary::Cos)),
    ("tan", Callable::One(Unary::Tan)),
    ("asin", Callable::One(Unary::Asin)),
    ("acos", Callable::One(Unary::Acos)),
    ("atan", Callable::One(Unary::Atan)),
    ("atan2", Callable::Two(Binary::Atan2)),
    ("sinh", Callable::One(Unary::Sinh)),
    ("cosh", Callable::One(Unary::Cosh)),
    ("tanh", Callable::One(Unary::Tanh)),
    ("exp", Callable::One(Unary::Exp)),
    ("expm1", Callable::One(Unary::Expm1)),
    ("log", Callable::One(Unary::Log)),
    ("log1p", Callable::One(Unary::Log1p)),
    ("log10", Callable::One(Unary::Log10)),
    ("sqrt", Callable::One(Unary::Sqrt)),
    ("cbrt", Callable::One(Unary::Cbrt)),
    ("pow", Callable::Two(Binary::PowerLog(0))),
    ("abs", Callable::One(Unary::Abs)),
    ("min", Callable::Two(Binary::Min)),
    ("max", Callable::Two(Binary::Max)),
    ("floor", Callable::One(Unary::Floor)),
];

/// The function called `name`.
pub fn function_named(name: &str) -> Option<Callable> {
    FUNCTIONS.iter().find(|(known, _)| *known == name).map(|(_, function)| *function)
}

impl Callable {
    /// Number of arguments.
    pub fn arity(self) -> usize {
        match self {
            Self::One(_) => 1,
            Self::Two(_) => 2,
        }
    }

    /// Whether the function has corners or jumps, where no derivative exists.
    pub fn has_kinks(self) -> bool {
        matches!(self, Self::One(Unary::Abs | Unary::Floor) | Self::Two(Binary::Min | Binary::Max))
    }
}

impl Unary {
    /// The name in formulas; those that only derivatives bring in have a describing name.
    pub fn name(self) -> String {
        match self {
            Self::Sign => "sign".to_owned(),
            Self::Bernoulli(0) => "x_over_expm1".to_owned(),
            Self::Bernoulli(order) => format!("x_over_expm1_slope{order}"),
            named => written_name(Callable::One(named)),
        }
    }
}

impl Binary {
    /// The name in formulas; those that only derivatives bring in have a describing name.
    pub fn name(self) -> String {
        match self {
            Self::NotAbove => "not_above".to_owned(),
            Self::PowerLog(order) if order > 0 => format!("power_log{order}"),
            named => written_name(Callable::Two(named)),
        }
    }
}

fn written_name(function: Callable) -> String {
    let found = FUNCTIONS.iter().find(|(_, known)| *known == function);
    found.map_or_else(|| format!("{function:?}"), |(name, _)| (*name).to_owned())
}
