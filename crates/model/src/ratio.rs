//! Recognises `u / (exp(u) - 1)` in any scaling and replaces it by the safe function.
//!
//! A product or quotient is taken apart into factors. A denominator that is `q (exp(w) - 1)` for some
//! product q, and a numerator (one factor, or all of them multiplied out) that is `c w` for some
//! product c, become `c / q` times the function of w. Both tests are exact: the formulas are expanded
//! with rational factors, so `(0.1*V + 5.5) / (1 - exp(-(V + 55)/10))` is seen as well as
//! `(V - V0) / (exp((V - V0)/k) - 1)`.

use crate::function::Unary;
use crate::graph::{Graph, Node, NodeId};
use crate::polynomial::{Monomial, Rational, Sum, Term, expand};

/// Factors of a product that are still looked at.
const MOST_FACTORS: usize = 32;

/// Factors of a product with their powers.
type Factors = Vec<(NodeId, i32)>;

/// A denominator `factor * (exp(argument) - 1)`.
struct ExponentialMinusOne {
    argument: NodeId,
    factor: Term,
}

/// The node itself, or an equal one in which the quotient is safe.
pub(crate) fn safe_quotient(graph: &mut Graph, node: NodeId) -> NodeId {
    let mut current = node;
    // Each round removes one denominator, so there are at most as many rounds as factors.
    for _ in 0..MOST_FACTORS {
        match replace_once(graph, current) {
            Some(replaced) => current = replaced,
            None => break,
        }
    }
    current
}

fn replace_once(graph: &mut Graph, node: NodeId) -> Option<NodeId> {
    let (negative, factors) = factors_of(graph, node)?;
    for (at, &(denominator, power)) in factors.iter().enumerate() {
        if power >= 0 {
            continue;
        }
        let Some(found) = exponential_minus_one(graph, denominator) else { continue };
        let mut rest = factors.clone();
        rest[at].1 += 1;
        let Some((ratio, rest)) = take_numerator(graph, rest, found.argument) else { continue };
        return rebuild(graph, negative, &rest, ratio, &found);
    }
    None
}

/// Sign and factors, with powers, of a product.
fn factors_of(graph: &Graph, node: NodeId) -> Option<(bool, Factors)> {
    let mut negative = false;
    let mut factors: Factors = Vec::new();
    let mut open: Factors = vec![(node, 1)];
    while let Some((id, power)) = open.pop() {
        match graph.node(id) {
            Node::Negate(a) => {
                negative ^= power % 2 != 0;
                open.push((a, power));
            }
            Node::Multiply(a, b) => open.extend([(b, power), (a, power)]),
            Node::Divide(a, b) => open.extend([(b, -power), (a, power)]),
            Node::Power(a, exponent) => open.push((a, power.checked_mul(exponent)?)),
            _ => match factors.iter_mut().find(|(known, _)| *known == id) {
                Some((_, known_power)) => *known_power = known_power.checked_add(power)?,
                None => factors.push((id, power)),
            },
        }
        if factors.len() + open.len() > MOST_FACTORS {
            return None;
        }
    }
    Some((negative, factors))
}

fn exponential_minus_one(graph: &mut Graph, id: NodeId) -> Option<ExponentialMinusOne> {
    match graph.node(id) {
        Node::Unary(Unary::Expm1, argument) => {
            Some(ExponentialMinusOne { argument, factor: (Rational::ONE, Monomial::default()) })
        }
        Node::Add(..) | Node::Subtract(..) => difference_of_exponential(graph, id),
        _ => None,
    }
}

/// A sum of two terms `q exp(w) - q`.
fn difference_of_exponential(graph: &mut Graph, id: NodeId) -> Option<ExponentialMinusOne> {
    let sum = expand(graph, id)?;
    let mut terms = sum.terms();
    let (first, second) = (terms.next()?, terms.next()?);
    if terms.next().is_some() {
        return None;
    }
    [(first, second), (second, first)].into_iter().find_map(|((factor, monomial), (rest_factor, rest))| {
        let (&exponential, &power) = monomial
            .0
            .iter()
            .find(|(atom, _)| matches!(graph.node(**atom), Node::Unary(Unary::Exp, _)) && !rest.0.contains_key(atom))?;
        let mut without = monomial.clone();
        without.0.remove(&exponential);
        if without != *rest || factor.negated()? != rest_factor {
            return None;
        }
        let Node::Unary(_, inner) = graph.node(exponential) else { return None };
        let scale = graph.whole(i64::from(power));
        let argument = graph.multiply(scale, inner);
        Some(ExponentialMinusOne { argument, factor: (factor, without) })
    })
}

/// The ratio of a numerator to `argument` and the factors that remain.
///
/// Tried are each factor and all of them multiplied out; of those that fit, the one that leaves the
/// fewest zeros of the argument, so that of `(a + b) x / (exp((a + b) x) - 1)` all goes, not `a + b`.
fn take_numerator(graph: &Graph, factors: Factors, argument: NodeId) -> Option<(Term, Factors)> {
    let argument = expand(graph, argument)?;
    let mut best: Option<(usize, Term, Factors)> = None;
    let mut offer = |ratio: Term, rest: Factors| {
        let left = zeros_left(&argument, &ratio);
        if left < zeros(&argument) && best.as_ref().is_none_or(|(known, ..)| left < *known) {
            best = Some((left, ratio, rest));
        }
    };
    for (at, &(numerator, power)) in factors.iter().enumerate() {
        let ratio = (power > 0).then(|| expand(graph, numerator)?.ratio_to(&argument)).flatten();
        if let Some(ratio) = ratio {
            let mut rest = factors.clone();
            rest[at].1 -= 1;
            offer(ratio, rest);
        }
    }
    if let Some(ratio) = numerator_product(graph, &factors).and_then(|sum| sum.ratio_to(&argument)) {
        offer(ratio, factors.iter().copied().filter(|(_, power)| *power < 0).collect());
    }
    best.map(|(_, ratio, rest)| (ratio, rest))
}

fn numerator_product(graph: &Graph, factors: &[(NodeId, i32)]) -> Option<Sum> {
    let mut product = Sum::one();
    for &(factor, power) in factors.iter().filter(|(_, power)| *power > 0) {
        product = product.times(&expand(graph, factor)?.to_power(power)?)?;
    }
    Some(product)
}

/// Factors of the argument that can vanish: atoms common to all terms, and the sum that is left.
fn zeros(argument: &Sum) -> usize {
    argument.common_atoms().len() + usize::from(argument.single().is_none())
}

/// Those of them by which the ratio divides, so that the quotient is still 0/0 there.
fn zeros_left(argument: &Sum, ratio: &Term) -> usize {
    let divided = |atom: &NodeId| ratio.1.0.get(atom).is_some_and(|power| *power < 0);
    argument.common_atoms().iter().filter(|atom| divided(atom)).count()
}

/// `± ratio / factor * rest * w/(exp(w) - 1)`.
fn rebuild(
    graph: &mut Graph,
    negative: bool,
    rest: &[(NodeId, i32)],
    ratio: Term,
    found: &ExponentialMinusOne,
) -> Option<NodeId> {
    let factor = ratio.0.times(found.factor.0.inverse()?)?;
    let monomial = ratio.1.times(&found.factor.1.to_power(-1)?)?;
    let factor = if negative { factor.negated()? } else { factor };
    let mut product = factor.node(graph)?;
    let mut denominator = graph.whole(1);
    let powers = rest.iter().copied().chain(monomial.0.iter().map(|(atom, power)| (*atom, *power)));
    for (atom, power) in powers {
        let raised = graph.power(atom, power.checked_abs()?);
        if power > 0 {
            product = graph.multiply(product, raised);
        } else if power < 0 {
            denominator = graph.multiply(denominator, raised);
        }
    }
    let safe = graph.unary(Unary::Bernoulli(0), found.argument);
    let numerator = graph.multiply(product, safe);
    Some(graph.divide(numerator, denominator))
}

#[cfg(test)]
mod tests {
    use std::collections::HashMap;

    use crate::evaluate::evaluate;
    use crate::function::Unary;
    use crate::graph::{Graph, Node, Variable};
    use crate::resolve::{Meaning, Names, resolve};
    use crate::syntax::parse;

    /// Value at `x` of a formula of x, a = 0.7 and k = 10, and whether the safe function is in it.
    fn understood(text: &str, x: f64) -> (f64, bool) {
        let mut graph = Graph::new();
        let mut known = HashMap::new();
        for (index, name) in (0..).zip(["x", "a", "k"]) {
            let node = graph.variable(Variable::Parameter(index));
            known.insert(name.to_owned(), Meaning { node, constant: None });
        }
        let names = Names { known: &known, has_time: false, refused: None };
        let syntax = parse(text).expect("a valid formula");
        let node = resolve(&mut graph, &syntax, &names).expect("a valid formula").node;
        let is_safe =
            graph.reachable(&[node]).iter().any(|id| matches!(graph.node(*id), Node::Unary(Unary::Bernoulli(_), _)));
        let value = |variable| match variable {
            Variable::Parameter(0) => x,
            Variable::Parameter(1) => 0.7,
            _ => 10.0,
        };
        (evaluate(&graph, &[node], value)[0], is_safe)
    }

    /// Formulas with their limits where the quotient is 0/0, by hand: c u/(e^u - 1) -> c.
    #[test]
    fn scalings_are_recognised() {
        for (text, zero, limit) in [
            ("x/(exp(x)-1)", 0.0, 1.0),
            ("x/expm1(x)", 0.0, 1.0),
            ("x/(1-exp(-x))", 0.0, 1.0),
            ("-x/(1-exp(x))", 0.0, 1.0),
            ("x*(1/(exp(x)-1))", 0.0, 1.0),
            ("1/(exp(x)-1)*x", 0.0, 1.0),
            ("x*(exp(x)-1)^-1", 0.0, 1.0),
            ("0.01*(10-x)/(exp((10-x)/10)-1)", 10.0, 0.1),
            ("0.1*(25-x)/(exp((25-x)/10)-1)", 25.0, 1.0),
            ("0.1*(x+40)/(1-exp(-(x+40)/10))", -40.0, 1.0),
            ("(0.1*x+5.5)/(1-exp(-(x+55)/10))", -55.0, 1.0),
            ("(x-a)/(exp((x-a)/k)-1)", 0.7, 10.0),
            ("k*(x-a)/(a*exp((x-a)/k)-a)", 0.7, 100.0 / 0.7),
            ("2*x/(3*exp(2*x)-3)", 0.0, 1.0 / 3.0),
            ("x/(exp(x/3)-1)", 0.0, 3.0),
            ("a*(x+1)*(x-2)/(exp(2-x)-1)", 2.0, -2.1),
            ("(x-a)*(x+a)/((exp(x-a)-1)*k)", 0.7, 0.14),
            ("x^2/(exp(x)-1)^2", 0.0, 1.0),
            ("x/(1/exp(x)-1)", 0.0, -1.0),
            ("(a+k)*x/(exp((a+k)*x)-1)", 0.0, 1.0),
        ] {
            let (value, is_safe) = understood(text, zero);
            assert!(is_safe, "{text}");
            assert!((value - limit).abs() <= 8.0 * f64::EPSILON * limit.abs(), "{text}: {value}");
        }
    }

    #[test]
    fn values_elsewhere_do_not_change() {
        for x in [-31.3, -4.0, 0.3, 2.5, 11.0, 60.0] {
            let (value, _) = understood("0.01*(10-x)/(exp((10-x)/10)-1)", x);
            let direct = 0.01 * (10.0 - x) / ((10.0 - x) / 10.0).exp_m1();
            assert!((value - direct).abs() <= 1e-15 * direct.abs().max(1e-3), "{x}: {value} {direct}");
        }
    }

    #[test]
    fn other_quotients_stay() {
        for text in [
            "a/(exp(x)-1)",
            "x/(exp(x)-2)",
            "x/(exp(x)+1)",
            "(x-1)/(exp(x)-1)",
            "x/(exp(a)-1)",
            "3/(exp(2)-1)",
            "x/(exp(x)-a)",
            "exp(x)/(exp(x)-1)",
        ] {
            assert!(!understood(text, 0.5).1, "{text}");
        }
    }
}
