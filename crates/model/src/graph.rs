//! The expression graph: hash-consed nodes over exact decimals, variables and functions.
//!
//! Equal subexpressions are one node; children always have smaller ids than their parents, so that a
//! sweep over ids is a sweep in order of evaluation. Building a node applies only rules that are exact
//! (`x + 0`, `1 * x`, decimals folded without rounding), so a graph still says what was written.

use std::collections::HashMap;

use indexmap::IndexSet;

use crate::decimal::Decimal;
use crate::function::{Binary, Unary};

/// A node of one [`Graph`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct NodeId(pub(crate) u32);

/// A literal of one [`Graph`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct NumberId(u32);

/// What a formula can depend on.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Variable {
    /// The time.
    Time,
    /// The state with this index.
    State(u32),
    /// The parameter with this index.
    Parameter(u32),
    /// Entry `index` of a further vector, such as a direction of differentiation.
    Extra {
        /// Which vector.
        vector: u8,
        /// Which entry of it.
        index: u32,
    },
}

/// One operation, literal or variable.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Node {
    /// A decimal literal, see [`Graph::number`].
    Number(NumberId),
    /// The circle's ratio.
    Pi,
    /// A variable.
    Variable(Variable),
    /// `-a`.
    Negate(NodeId),
    /// `a + b`.
    Add(NodeId, NodeId),
    /// `a - b`.
    Subtract(NodeId, NodeId),
    /// `a * b`.
    Multiply(NodeId, NodeId),
    /// `a / b`.
    Divide(NodeId, NodeId),
    /// `a` to a whole-number power other than 0 and 1.
    Power(NodeId, i32),
    /// A function of one argument.
    Unary(Unary, NodeId),
    /// A function of two arguments.
    Binary(Binary, NodeId, NodeId),
}

impl Node {
    /// The operands, first to last.
    pub fn children(self) -> impl Iterator<Item = NodeId> {
        let (first, second) = match self {
            Self::Number(_) | Self::Pi | Self::Variable(_) => (None, None),
            Self::Negate(a) | Self::Power(a, _) | Self::Unary(_, a) => (Some(a), None),
            Self::Add(a, b)
            | Self::Subtract(a, b)
            | Self::Multiply(a, b)
            | Self::Divide(a, b)
            | Self::Binary(_, a, b) => (Some(a), Some(b)),
        };
        first.into_iter().chain(second)
    }

    /// The same for both orders of a commutative operation.
    fn key(self) -> Self {
        match self {
            Self::Add(a, b) if b < a => Self::Add(b, a),
            Self::Multiply(a, b) if b < a => Self::Multiply(b, a),
            other => other,
        }
    }
}

/// A set of formulas with shared subexpressions.
#[derive(Clone, Debug, Default)]
pub struct Graph {
    nodes: Vec<Node>,
    index: HashMap<Node, NodeId>,
    numbers: IndexSet<Decimal>,
}

impl Graph {
    /// An empty graph.
    pub fn new() -> Self {
        Self::default()
    }

    /// Number of nodes.
    pub fn len(&self) -> usize {
        self.nodes.len()
    }

    /// Whether there is no node yet.
    pub fn is_empty(&self) -> bool {
        self.nodes.is_empty()
    }

    /// The node behind an id of this graph.
    pub fn node(&self, id: NodeId) -> Node {
        self.nodes[id.0 as usize]
    }

    /// The decimal behind a literal of this graph.
    pub fn number(&self, id: NumberId) -> &Decimal {
        &self.numbers[id.0 as usize]
    }

    /// The decimal that a node is, if it is a literal.
    pub fn as_number(&self, id: NodeId) -> Option<&Decimal> {
        match self.node(id) {
            Node::Number(number) => Some(self.number(number)),
            _ => None,
        }
    }

    fn insert(&mut self, node: Node) -> NodeId {
        let key = node.key();
        if let Some(&known) = self.index.get(&key) {
            return known;
        }
        let id = NodeId(u32::try_from(self.nodes.len()).expect("fewer than 2^32 nodes fit in memory"));
        self.nodes.push(node);
        self.index.insert(key, id);
        id
    }

    /// A literal.
    pub fn decimal(&mut self, value: Decimal) -> NodeId {
        let (index, _) = self.numbers.insert_full(value);
        let number = u32::try_from(index).expect("fewer than 2^32 literals fit in memory");
        self.insert(Node::Number(NumberId(number)))
    }

    /// A whole number.
    pub fn whole(&mut self, value: i64) -> NodeId {
        self.decimal(Decimal::whole(value))
    }

    /// The circle's ratio.
    pub fn pi(&mut self) -> NodeId {
        self.insert(Node::Pi)
    }

    /// A variable.
    pub fn variable(&mut self, variable: Variable) -> NodeId {
        self.insert(Node::Variable(variable))
    }

    fn is_whole(&self, id: NodeId, value: i32) -> bool {
        self.as_number(id).is_some_and(|number| number.as_whole() == Some(value))
    }

    /// Whether the node is the literal zero.
    pub fn is_zero(&self, id: NodeId) -> bool {
        self.as_number(id).is_some_and(Decimal::is_zero)
    }

    fn fold(&mut self, a: NodeId, b: NodeId, exact: fn(&Decimal, &Decimal) -> Option<Decimal>) -> Option<NodeId> {
        let folded = exact(self.as_number(a)?, self.as_number(b)?)?;
        Some(self.decimal(folded))
    }

    /// `-a`.
    pub fn negate(&mut self, a: NodeId) -> NodeId {
        if let Some(number) = self.as_number(a) {
            let negated = number.negated();
            return self.decimal(negated);
        }
        match self.node(a) {
            Node::Negate(inner) => inner,
            Node::Subtract(first, second) => self.subtract(second, first),
            _ => self.insert(Node::Negate(a)),
        }
    }

    /// `a + b`.
    pub fn add(&mut self, a: NodeId, b: NodeId) -> NodeId {
        if self.is_zero(a) {
            return b;
        }
        if self.is_zero(b) {
            return a;
        }
        if let Some(folded) = self.fold(a, b, Decimal::plus) {
            return folded;
        }
        match (self.node(a), self.node(b)) {
            (_, Node::Negate(inner)) => self.subtract(a, inner),
            (Node::Negate(inner), _) => self.subtract(b, inner),
            _ => self.insert(Node::Add(a, b)),
        }
    }

    /// `a - b`.
    pub fn subtract(&mut self, a: NodeId, b: NodeId) -> NodeId {
        if self.is_zero(b) {
            return a;
        }
        if self.is_zero(a) {
            return self.negate(b);
        }
        if let Some(folded) = self.fold(a, b, |x, y| x.plus(&y.negated())) {
            return folded;
        }
        match self.node(b) {
            Node::Negate(inner) => self.add(a, inner),
            _ => self.insert(Node::Subtract(a, b)),
        }
    }

    /// `a * b`.
    pub fn multiply(&mut self, a: NodeId, b: NodeId) -> NodeId {
        if self.is_zero(a) || self.is_zero(b) {
            return self.whole(0);
        }
        if let Some(folded) = self.fold(a, b, Decimal::times) {
            return folded;
        }
        for (factor, other) in [(a, b), (b, a)] {
            if self.is_whole(factor, 1) {
                return other;
            }
            if self.is_whole(factor, -1) {
                return self.negate(other);
            }
            if let Some(merged) = self.merge_literals(factor, other) {
                return merged;
            }
        }
        if a == b {
            return self.power(a, 2);
        }
        let product = match (self.node(a), self.node(b)) {
            (Node::Negate(inner), _) => self.multiply(inner, b),
            (_, Node::Negate(inner)) => self.multiply(a, inner),
            _ => return self.insert(Node::Multiply(a, b)),
        };
        self.negate(product)
    }

    /// `2 * (3 * x)` as `6 * x`.
    fn merge_literals(&mut self, factor: NodeId, other: NodeId) -> Option<NodeId> {
        self.as_number(factor)?;
        let Node::Multiply(first, second) = self.node(other) else { return None };
        for (literal, rest) in [(first, second), (second, first)] {
            if let Some(folded) = self.fold(factor, literal, Decimal::times) {
                return Some(self.multiply(folded, rest));
            }
        }
        None
    }

    /// `a / b`.
    pub fn divide(&mut self, a: NodeId, b: NodeId) -> NodeId {
        if self.is_whole(b, 1) {
            return a;
        }
        if self.is_whole(b, -1) {
            return self.negate(a);
        }
        if self.is_zero(a) && !self.is_zero(b) {
            return a;
        }
        if let Some(folded) = self.fold(a, b, Decimal::over) {
            return folded;
        }
        if let Node::Negate(inner) = self.node(a) {
            let quotient = self.divide(inner, b);
            return self.negate(quotient);
        }
        if let Node::Negate(inner) = self.node(b) {
            let quotient = self.divide(a, inner);
            return self.negate(quotient);
        }
        self.insert(Node::Divide(a, b))
    }

    /// `a` to a whole-number power.
    pub fn power(&mut self, a: NodeId, exponent: i32) -> NodeId {
        match exponent {
            0 => return self.whole(1),
            1 => return a,
            -1 => {
                let one = self.whole(1);
                return self.divide(one, a);
            }
            _ => {}
        }
        if let Some(folded) = self.fold_power(a, exponent) {
            return folded;
        }
        match self.node(a) {
            Node::Negate(inner) => {
                let power = self.power(inner, exponent);
                if exponent % 2 == 0 { power } else { self.negate(power) }
            }
            Node::Power(base, inner) => match inner.checked_mul(exponent) {
                Some(product) => self.power(base, product),
                None => self.insert(Node::Power(a, exponent)),
            },
            _ => self.insert(Node::Power(a, exponent)),
        }
    }

    fn fold_power(&mut self, a: NodeId, exponent: i32) -> Option<NodeId> {
        let base = self.as_number(a)?.clone();
        if exponent < 0 {
            return None;
        }
        // A short result has few factors unless the base is a power of ten; 0 and 1 stay themselves.
        const MOST_FACTORS: i32 = 64;
        let mut result = Decimal::whole(1);
        for _ in 0..exponent.min(MOST_FACTORS + 1) {
            result = result.times(&base)?;
        }
        (exponent <= MOST_FACTORS).then(|| self.decimal(result))
    }

    /// A function of one argument.
    pub fn unary(&mut self, function: Unary, a: NodeId) -> NodeId {
        self.insert(Node::Unary(function, a))
    }

    /// A function of two arguments. Powers with a whole-number literal become [`Node::Power`].
    pub fn binary(&mut self, function: Binary, a: NodeId, b: NodeId) -> NodeId {
        if function == Binary::PowerLog(0)
            && let Some(exponent) = self.as_number(b).and_then(Decimal::as_whole)
        {
            return self.power(a, exponent);
        }
        self.insert(Node::Binary(function, a, b))
    }

    /// All nodes that `outputs` depend on, themselves included, in order of evaluation.
    pub fn reachable(&self, outputs: &[NodeId]) -> Vec<NodeId> {
        let mut needed = vec![false; self.nodes.len()];
        for output in outputs {
            needed[output.0 as usize] = true;
        }
        for at in (0..self.nodes.len()).rev() {
            if needed[at] {
                for child in self.nodes[at].children() {
                    needed[child.0 as usize] = true;
                }
            }
        }
        (0..).zip(needed).filter(|(_, is)| *is).map(|(at, _)| NodeId(at)).collect()
    }
}
