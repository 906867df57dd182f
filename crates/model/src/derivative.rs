//! Derivatives of formulas, as further formulas of the same graph.
//!
//! Three sweeps share one table of local slopes: forward with sparse gradients ([`gradients`], for
//! Jacobians), forward along one direction ([`directional`], composed for higher orders), and
//! backward ([`reverse_gradient`], all slopes of one number). `abs`, `min`, `max` and `floor` are
//! differentiated as they are almost everywhere.

use std::collections::BTreeMap;

use crate::bernoulli::HIGHEST_ORDER;
use crate::function::{Binary, Unary};
use crate::graph::{Graph, Node, NodeId, Variable};

/// Slopes of a node in its operands: pairs (operand, slope), zero slopes left out.
fn local_slopes(graph: &mut Graph, id: NodeId) -> Vec<(NodeId, NodeId)> {
    let one = graph.whole(1);
    match graph.node(id) {
        Node::Number(_) | Node::Pi | Node::Variable(_) => Vec::new(),
        Node::Negate(a) => vec![(a, graph.whole(-1))],
        Node::Add(a, b) => vec![(a, one), (b, one)],
        Node::Subtract(a, b) => vec![(a, one), (b, graph.whole(-1))],
        Node::Multiply(a, b) => vec![(a, b), (b, a)],
        Node::Divide(a, b) => {
            let reciprocal = graph.divide(one, b);
            let scaled = graph.multiply(id, reciprocal);
            vec![(a, reciprocal), (b, graph.negate(scaled))]
        }
        Node::Power(a, exponent) => {
            let lower = match exponent.checked_sub(1) {
                Some(lower) => graph.power(a, lower),
                None => graph.divide(id, a),
            };
            let factor = graph.whole(i64::from(exponent));
            vec![(a, graph.multiply(factor, lower))]
        }
        Node::Unary(function, a) => unary_slope(graph, id, function, a).map_or_else(Vec::new, |slope| vec![(a, slope)]),
        Node::Binary(function, a, b) => binary_slopes(graph, function, a, b),
    }
}

/// Slope of `id = function(a)`; none where it is zero.
fn unary_slope(graph: &mut Graph, id: NodeId, function: Unary, a: NodeId) -> Option<NodeId> {
    let one = graph.whole(1);
    let slope = match function {
        Unary::Sin => graph.unary(Unary::Cos, a),
        Unary::Cos => {
            let sine = graph.unary(Unary::Sin, a);
            graph.negate(sine)
        }
        Unary::Tan => {
            let square = graph.power(id, 2);
            graph.add(one, square)
        }
        Unary::Tanh => {
            let square = graph.power(id, 2);
            graph.subtract(one, square)
        }
        Unary::Asin | Unary::Acos => {
            let square = graph.power(a, 2);
            let rest = graph.subtract(one, square);
            let root = graph.unary(Unary::Sqrt, rest);
            let slope = graph.divide(one, root);
            if function == Unary::Asin { slope } else { graph.negate(slope) }
        }
        Unary::Atan => {
            let square = graph.power(a, 2);
            let sum = graph.add(one, square);
            graph.divide(one, sum)
        }
        Unary::Sinh => graph.unary(Unary::Cosh, a),
        Unary::Cosh => graph.unary(Unary::Sinh, a),
        Unary::Exp => id,
        Unary::Expm1 => graph.unary(Unary::Exp, a),
        Unary::Log => graph.divide(one, a),
        Unary::Log1p => {
            let sum = graph.add(one, a);
            graph.divide(one, sum)
        }
        Unary::Log10 => {
            let ten = graph.whole(10);
            let scale = graph.unary(Unary::Log, ten);
            let product = graph.multiply(scale, a);
            graph.divide(one, product)
        }
        Unary::Sqrt => {
            let two = graph.whole(2);
            let double = graph.multiply(two, id);
            graph.divide(one, double)
        }
        Unary::Cbrt => {
            let square = graph.power(id, 2);
            let three = graph.whole(3);
            let triple = graph.multiply(three, square);
            graph.divide(one, triple)
        }
        Unary::Abs => graph.unary(Unary::Sign, a),
        Unary::Floor | Unary::Sign => return None,
        Unary::Bernoulli(order) if order < HIGHEST_ORDER => graph.unary(Unary::Bernoulli(order + 1), a),
        Unary::Bernoulli(order) => bernoulli_beyond(graph, order, a),
    };
    Some(slope)
}

/// Slope of the highest safe derivative of `x / (exp(x) - 1)` by the recurrence of that module: right
/// away from 0, losing digits near it.
fn bernoulli_beyond(graph: &mut Graph, order: u8, a: NodeId) -> NodeId {
    let next = i64::from(order) + 1;
    let mut sum = graph.unary(Unary::Bernoulli(0), a);
    let mut binomial = 1;
    for (j, lower) in (1..).zip(1..=order) {
        binomial = binomial * (next + 1 - j) / j;
        let factor = graph.whole(binomial);
        let term = graph.unary(Unary::Bernoulli(lower), a);
        let scaled = graph.multiply(factor, term);
        sum = graph.add(sum, scaled);
    }
    let minus = graph.negate(a);
    let denominator = graph.unary(Unary::Expm1, minus);
    graph.divide(sum, denominator)
}

fn binary_slopes(graph: &mut Graph, function: Binary, a: NodeId, b: NodeId) -> Vec<(NodeId, NodeId)> {
    let one = graph.whole(1);
    match function {
        Binary::Atan2 => {
            let (squared_a, squared_b) = (graph.power(a, 2), graph.power(b, 2));
            let radius = graph.add(squared_a, squared_b);
            let in_a = graph.divide(b, radius);
            let in_b = graph.divide(a, radius);
            vec![(a, in_a), (b, graph.negate(in_b))]
        }
        Binary::Min => {
            let takes_a = graph.binary(Binary::NotAbove, a, b);
            vec![(a, takes_a), (b, graph.subtract(one, takes_a))]
        }
        Binary::Max => {
            let takes_a = graph.binary(Binary::NotAbove, b, a);
            vec![(a, takes_a), (b, graph.subtract(one, takes_a))]
        }
        Binary::NotAbove => Vec::new(),
        Binary::PowerLog(order) => power_log_slopes(graph, order, a, b),
    }
}

/// Slopes of `P_k = a^b log(a)^k`: in a, `b P_k(a, b-1) + k P_(k-1)(a, b-1)`; in b, `P_(k+1)`.
fn power_log_slopes(graph: &mut Graph, order: u8, a: NodeId, b: NodeId) -> Vec<(NodeId, NodeId)> {
    let one = graph.whole(1);
    let lower = graph.subtract(b, one);
    let same = graph.binary(Binary::PowerLog(order), a, lower);
    let mut in_a = graph.multiply(b, same);
    if order > 0 {
        let previous = graph.binary(Binary::PowerLog(order - 1), a, lower);
        let factor = graph.whole(i64::from(order));
        let term = graph.multiply(factor, previous);
        in_a = graph.add(in_a, term);
    }
    let next = graph.binary(Binary::PowerLog(order.saturating_add(1)), a, b);
    vec![(a, in_a), (b, next)]
}

/// A gradient without its structural zeros.
pub type SparseGradient = BTreeMap<Variable, NodeId>;

/// Gradients of `outputs` in the variables for which `wanted` holds.
pub fn gradients(graph: &mut Graph, outputs: &[NodeId], wanted: impl Fn(Variable) -> bool) -> Vec<SparseGradient> {
    let order = graph.reachable(outputs);
    let mut known: Vec<SparseGradient> = vec![SparseGradient::new(); graph.len()];
    for id in order {
        let mut gradient = SparseGradient::new();
        if let Node::Variable(variable) = graph.node(id)
            && wanted(variable)
        {
            gradient.insert(variable, graph.whole(1));
        }
        if graph.node(id).children().any(|child| !known[child.0 as usize].is_empty()) {
            for (child, slope) in local_slopes(graph, id) {
                for (&variable, &inner) in &known[child.0 as usize] {
                    let term = graph.multiply(slope, inner);
                    accumulate(graph, &mut gradient, variable, term);
                }
            }
        }
        gradient.retain(|_, slope| !graph.is_zero(*slope));
        known[id.0 as usize] = gradient;
    }
    outputs.iter().map(|id| known[id.0 as usize].clone()).collect()
}

fn accumulate(graph: &mut Graph, gradient: &mut SparseGradient, variable: Variable, term: NodeId) {
    let sum = match gradient.get(&variable) {
        Some(&sum) => graph.add(sum, term),
        None => term,
    };
    gradient.insert(variable, sum);
}

/// Derivatives of `outputs` along the direction whose entries `direction` names; a variable without
/// an entry is held.
pub fn directional(
    graph: &mut Graph,
    outputs: &[NodeId],
    direction: impl Fn(Variable) -> Option<Variable>,
) -> Vec<NodeId> {
    let order = graph.reachable(outputs);
    let mut along: Vec<Option<NodeId>> = vec![None; graph.len()];
    for id in order {
        let mut sum: Option<NodeId> = None;
        if let Node::Variable(variable) = graph.node(id) {
            sum = direction(variable).map(|entry| graph.variable(entry));
        }
        if graph.node(id).children().any(|child| along[child.0 as usize].is_some()) {
            for (child, slope) in local_slopes(graph, id) {
                if let Some(inner) = along[child.0 as usize] {
                    let term = graph.multiply(slope, inner);
                    sum = Some(sum.map_or(term, |sum| graph.add(sum, term)));
                }
            }
        }
        along[id.0 as usize] = sum.filter(|sum| !graph.is_zero(*sum));
    }
    let zero = graph.whole(0);
    outputs.iter().map(|id| along[id.0 as usize].unwrap_or(zero)).collect()
}

/// The gradient of one number in `variables`, by one sweep backward.
pub fn reverse_gradient(graph: &mut Graph, output: NodeId, variables: &[Variable]) -> Vec<NodeId> {
    let order = graph.reachable(&[output]);
    let mut weight: Vec<Option<NodeId>> = vec![None; graph.len()];
    weight[output.0 as usize] = Some(graph.whole(1));
    for &id in order.iter().rev() {
        let Some(above) = weight[id.0 as usize] else { continue };
        for (child, slope) in local_slopes(graph, id) {
            let term = graph.multiply(above, slope);
            if graph.is_zero(term) {
                continue;
            }
            let slot = &mut weight[child.0 as usize];
            *slot = Some(slot.map_or(term, |sum| graph.add(sum, term)));
        }
    }
    let zero = graph.whole(0);
    variables
        .iter()
        .map(|&variable| {
            let id = graph.variable(variable);
            weight.get(id.0 as usize).copied().flatten().unwrap_or(zero)
        })
        .collect()
}
