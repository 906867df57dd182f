//! Formulas of a graph as text, with parentheses only where they are needed.

use std::collections::HashMap;

use crate::function::Binary;
use crate::graph::{Graph, Node, NodeId, Variable};

/// How tightly the outermost operation of a text binds.
const SUM: u8 = 1;
const PRODUCT: u8 = 2;
const SIGNED: u8 = 3;
const ATOM: u8 = 4;

/// Names for printing a graph.
pub(crate) struct Printer<'a> {
    pub graph: &'a Graph,
    pub name: &'a dyn Fn(Variable) -> String,
    /// Nodes that are printed by name.
    pub named: HashMap<NodeId, &'a str>,
}

enum Piece {
    Text(String),
    /// A node, with the binding that its surroundings need.
    Node(NodeId, u8),
}

impl Printer<'_> {
    /// The formula of `root`, itself not replaced by a name.
    pub(crate) fn print(&self, root: NodeId) -> String {
        let mut text = String::new();
        // Pieces still to be written, the next one last.
        let mut open = self.pieces(root, SUM);
        open.reverse();
        while let Some(piece) = open.pop() {
            match piece {
                Piece::Text(part) => text.push_str(&part),
                Piece::Node(id, binding) => match self.named.get(&id) {
                    Some(name) => text.push_str(name),
                    None => open.extend(self.pieces(id, binding).into_iter().rev()),
                },
            }
        }
        text
    }

    fn pieces(&self, id: NodeId, needed: u8) -> Vec<Piece> {
        let text = |part: &str| Piece::Text(part.to_owned());
        let (own, mut pieces) = match self.graph.node(id) {
            Node::Number(number) => {
                let number = self.graph.number(number);
                (if number.is_negative() { SUM } else { ATOM }, vec![Piece::Text(number.to_string())])
            }
            Node::Pi => (ATOM, vec![text("pi")]),
            Node::Variable(variable) => (ATOM, vec![Piece::Text((self.name)(variable))]),
            Node::Negate(a) => (SUM, vec![text("-"), Piece::Node(a, PRODUCT)]),
            Node::Add(a, b) => (SUM, vec![Piece::Node(a, SUM), text(" + "), Piece::Node(b, PRODUCT)]),
            Node::Subtract(a, b) => (SUM, vec![Piece::Node(a, SUM), text(" - "), Piece::Node(b, PRODUCT)]),
            Node::Multiply(a, b) => (PRODUCT, vec![Piece::Node(a, PRODUCT), text(" * "), Piece::Node(b, SIGNED)]),
            Node::Divide(a, b) => (PRODUCT, vec![Piece::Node(a, PRODUCT), text(" / "), Piece::Node(b, SIGNED)]),
            Node::Power(a, exponent) => (SIGNED, vec![Piece::Node(a, ATOM), Piece::Text(format!("^{exponent}"))]),
            Node::Binary(Binary::PowerLog(0), a, b) => {
                (SIGNED, vec![Piece::Node(a, ATOM), text("^"), Piece::Node(b, ATOM)])
            }
            Node::Unary(function, a) => (ATOM, call(function.name(), &[a])),
            Node::Binary(function, a, b) => (ATOM, call(function.name(), &[a, b])),
        };
        if own < needed {
            pieces.insert(0, text("("));
            pieces.push(text(")"));
        }
        pieces
    }
}

fn call(name: String, arguments: &[NodeId]) -> Vec<Piece> {
    let mut pieces = vec![Piece::Text(format!("{name}("))];
    for (at, argument) in arguments.iter().enumerate() {
        if at > 0 {
            pieces.push(Piece::Text(", ".to_owned()));
        }
        pieces.push(Piece::Node(*argument, SUM));
    }
    pieces.push(Piece::Text(")".to_owned()));
    pieces
}
