//! Expansion of a formula into a sum of terms, exact, to see whether two formulas are proportional.
//!
//! A term is a rational factor times whole-number powers of *atoms*: variables, calls, and sums that
//! stand in a denominator. Whatever is too large to expand is refused, which only means that it is
//! not recognised.

use std::collections::BTreeMap;

use crate::decimal::Decimal;
use crate::graph::{Graph, Node, NodeId};

/// Terms of an expansion that is still looked at.
const MOST_TERMS: usize = 64;

/// Nesting of a formula that is still looked at; bounds the recursion.
const DEEPEST: usize = 64;

/// Powers of a sum that are multiplied out.
const HIGHEST_POWER: i32 = 4;

/// An exact quotient of whole numbers, reduced, with a positive denominator.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Rational {
    numerator: i128,
    denominator: i128,
}

impl Rational {
    pub(crate) const ONE: Self = Self { numerator: 1, denominator: 1 };

    fn new(numerator: i128, denominator: i128) -> Option<Self> {
        if denominator == 0 {
            return None;
        }
        let divisor = i128::try_from(gcd(numerator.unsigned_abs(), denominator.unsigned_abs())).ok()?;
        let sign = denominator.signum();
        Some(Self {
            numerator: (numerator / divisor).checked_mul(sign)?,
            denominator: (denominator / divisor).checked_mul(sign)?,
        })
    }

    fn from_decimal(decimal: &Decimal) -> Option<Self> {
        /// Powers of ten that leave room for products within `i128`.
        const LARGEST_EXPONENT: u32 = 18;
        let (mantissa, exponent) = decimal.parts()?;
        let scale_exponent = u32::try_from(exponent.unsigned_abs()).ok()?;
        if scale_exponent > LARGEST_EXPONENT {
            return None;
        }
        let scale = 10_i128.pow(scale_exponent);
        if exponent >= 0 { Self::new(mantissa.checked_mul(scale)?, 1) } else { Self::new(mantissa, scale) }
    }

    fn plus(self, other: Self) -> Option<Self> {
        let a = self.numerator.checked_mul(other.denominator)?;
        let b = other.numerator.checked_mul(self.denominator)?;
        Self::new(a.checked_add(b)?, self.denominator.checked_mul(other.denominator)?)
    }

    pub(crate) fn times(self, other: Self) -> Option<Self> {
        Self::new(self.numerator.checked_mul(other.numerator)?, self.denominator.checked_mul(other.denominator)?)
    }

    pub(crate) fn inverse(self) -> Option<Self> {
        Self::new(self.denominator, self.numerator)
    }

    pub(crate) fn negated(self) -> Option<Self> {
        Self::new(self.numerator.checked_neg()?, self.denominator)
    }

    /// The number as a node, if it fits.
    pub(crate) fn node(self, graph: &mut Graph) -> Option<NodeId> {
        let numerator = graph.whole(i64::try_from(self.numerator).ok()?);
        let denominator = graph.whole(i64::try_from(self.denominator).ok()?);
        Some(graph.divide(numerator, denominator))
    }
}

fn gcd(a: u128, b: u128) -> u128 {
    if b == 0 { a.max(1) } else { gcd(b, a % b) }
}

/// Powers of atoms; none of power 0.
#[derive(Clone, Debug, Default, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Monomial(pub BTreeMap<NodeId, i32>);

impl Monomial {
    fn atom(id: NodeId, power: i32) -> Self {
        Self(BTreeMap::from([(id, power)]))
    }

    pub(crate) fn times(&self, other: &Self) -> Option<Self> {
        let mut powers = self.0.clone();
        for (&atom, &power) in &other.0 {
            let sum = powers.entry(atom).or_insert(0);
            *sum = sum.checked_add(power)?;
        }
        powers.retain(|_, power| *power != 0);
        Some(Self(powers))
    }

    pub(crate) fn to_power(&self, exponent: i32) -> Option<Self> {
        let raised = self.0.iter().map(|(&atom, power)| Some((atom, power.checked_mul(exponent)?)));
        raised.collect::<Option<_>>().map(Self)
    }
}

/// A factor and a monomial.
pub(crate) type Term = (Rational, Monomial);

/// A sum of terms without zeros.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub(crate) struct Sum(BTreeMap<Monomial, Rational>);

impl Sum {
    pub(crate) fn one() -> Self {
        Self::of((Rational::ONE, Monomial::default()))
    }

    fn of(term: Term) -> Self {
        let mut sum = Self::default();
        if term.0.numerator != 0 {
            sum.0.insert(term.1, term.0);
        }
        sum
    }

    pub(crate) fn terms(&self) -> impl Iterator<Item = (Rational, &Monomial)> {
        self.0.iter().map(|(monomial, factor)| (*factor, monomial))
    }

    fn add(&mut self, (factor, monomial): Term) -> Option<()> {
        let sum = match self.0.get(&monomial) {
            Some(before) => before.plus(factor)?,
            None => factor,
        };
        if sum.numerator == 0 {
            self.0.remove(&monomial);
        } else {
            self.0.insert(monomial, sum);
        }
        (self.0.len() <= MOST_TERMS).then_some(())
    }

    fn plus(mut self, other: &Self) -> Option<Self> {
        for (factor, monomial) in other.terms() {
            self.add((factor, monomial.clone()))?;
        }
        Some(self)
    }

    pub(crate) fn times(&self, other: &Self) -> Option<Self> {
        let mut product = Self::default();
        for (factor, monomial) in self.terms() {
            for (other_factor, other_monomial) in other.terms() {
                product.add((factor.times(other_factor)?, monomial.times(other_monomial)?))?;
            }
        }
        Some(product)
    }

    fn negated(&self) -> Option<Self> {
        let minus = Self::of((Rational::ONE.negated()?, Monomial::default()));
        self.times(&minus)
    }

    /// Atoms that divide every term.
    pub(crate) fn common_atoms(&self) -> Vec<NodeId> {
        let divides = |atom: &NodeId, monomial: &Monomial| monomial.0.get(atom).is_some_and(|power| *power > 0);
        let first = self.0.keys().next().map_or_else(Vec::new, |first| first.0.keys().copied().collect());
        first.into_iter().filter(|atom| self.0.keys().all(|monomial| divides(atom, monomial))).collect()
    }

    /// The only term, if there is exactly one.
    pub(crate) fn single(&self) -> Option<Term> {
        let mut terms = self.terms();
        let (factor, monomial) = terms.next()?;
        terms.next().is_none().then(|| (factor, monomial.clone()))
    }

    pub(crate) fn to_power(&self, exponent: i32) -> Option<Self> {
        if let Some((factor, monomial)) = self.single() {
            let base = if exponent < 0 { factor.inverse()? } else { factor };
            let mut raised = Rational::ONE;
            for _ in 0..exponent.unsigned_abs().min(MOST_TERMS as u32) {
                raised = raised.times(base)?;
            }
            let small = exponent.unsigned_abs() <= MOST_TERMS as u32 || base == Rational::ONE;
            return small.then_some(Self::of((raised, monomial.to_power(exponent)?)));
        }
        if !(0..=HIGHEST_POWER).contains(&exponent) {
            return None;
        }
        let mut product = Self::one();
        for _ in 0..exponent {
            product = product.times(self)?;
        }
        Some(product)
    }

    /// The term c with `self = c * other`, if the two are proportional.
    pub(crate) fn ratio_to(&self, other: &Self) -> Option<Term> {
        if self.0.len() != other.0.len() {
            return None;
        }
        let (other_factor, other_monomial) = other.terms().next()?;
        let inverse_factor = other_factor.inverse()?;
        let inverse_monomial = other_monomial.to_power(-1)?;
        // The first term of `other` may belong to any term of this sum.
        self.terms().find_map(|(factor, monomial)| {
            let ratio = (factor.times(inverse_factor)?, monomial.times(&inverse_monomial)?);
            let scaled = other.times(&Self::of(ratio.clone()))?;
            (scaled == *self).then_some(ratio)
        })
    }
}

/// The formula multiplied out.
pub(crate) fn expand(graph: &Graph, id: NodeId) -> Option<Sum> {
    expand_at(graph, id, 0)
}

fn expand_at(graph: &Graph, id: NodeId, depth: usize) -> Option<Sum> {
    if depth > DEEPEST {
        return None;
    }
    let inner = |child| expand_at(graph, child, depth + 1);
    let atom = |child, power| Sum::of((Rational::ONE, Monomial::atom(child, power)));
    match graph.node(id) {
        Node::Number(number) => Some(Sum::of((Rational::from_decimal(graph.number(number))?, Monomial::default()))),
        Node::Negate(a) => inner(a)?.negated(),
        Node::Add(a, b) => inner(a)?.plus(&inner(b)?),
        Node::Subtract(a, b) => inner(a)?.plus(&inner(b)?.negated()?),
        Node::Multiply(a, b) => inner(a)?.times(&inner(b)?),
        Node::Divide(a, b) => {
            let reciprocal = inner(b)?.to_power(-1).unwrap_or_else(|| atom(b, -1));
            inner(a)?.times(&reciprocal)
        }
        Node::Power(a, exponent) => Some(inner(a)?.to_power(exponent).unwrap_or_else(|| atom(a, exponent))),
        Node::Pi | Node::Variable(_) | Node::Unary(..) | Node::Binary(..) => Some(atom(id, 1)),
    }
}
