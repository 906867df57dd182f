//! Evaluates formulas of a graph over any scalar.

use crate::graph::{Graph, Node, NodeId, Variable};
use crate::scalar::Scalar;

/// Values of `outputs` with the variables given by `value`.
///
/// Allocates; meant for constants, checks and scalars of high precision. The hot loops use compiled
/// fields.
pub fn evaluate<S: Scalar>(graph: &Graph, outputs: &[NodeId], value: impl Fn(Variable) -> S) -> Vec<S> {
    let order = graph.reachable(outputs);
    let mut values: Vec<Option<S>> = vec![None; graph.len()];
    for id in order {
        let of = |child: NodeId| values[child.0 as usize].clone().expect("children come before their parents");
        let result = match graph.node(id) {
            Node::Number(number) => S::from_decimal(&graph.number(number).to_string()),
            Node::Pi => S::pi(),
            Node::Variable(variable) => value(variable),
            Node::Negate(a) => -of(a),
            Node::Add(a, b) => of(a) + of(b),
            Node::Subtract(a, b) => of(a) - of(b),
            Node::Multiply(a, b) => of(a) * of(b),
            Node::Divide(a, b) => of(a) / of(b),
            Node::Power(a, exponent) => of(a).power(exponent),
            Node::Unary(function, a) => of(a).unary(function),
            Node::Binary(function, a, b) => of(a).binary(function, of(b)),
        };
        values[id.0 as usize] = Some(result);
    }
    outputs.iter().map(|id| values[id.0 as usize].clone().expect("outputs are reachable from themselves")).collect()
}
