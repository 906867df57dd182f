//! Lowers formulas of the graph to a [`Program`].
//!
//! Constants become machine numbers here, rounded once; what depends on shared parameters only moves
//! to the uniform part. Quotients become products with a reciprocal that all quotients of the same
//! denominator share; whole-number powers become products. Only what the outputs need is kept.

use std::collections::HashMap;

use crate::function::{Binary, Unary};
use crate::graph::{Graph, Node, NodeId, Variable};
use crate::program::{Instruction, Operand, Operation, Program, Slot, Target, UniformInstruction};

/// Highest power that is written as products (at most 10 of them); beyond, the library's power.
const HIGHEST_PRODUCT: u32 = 64;

/// Where a variable's values come from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Origin {
    /// A vector of the caller that differs from point to point.
    PerPoint(Slot),
    /// A parameter that all points share.
    Shared(u32),
}

/// What a value of the program is computed from.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
enum Value {
    /// Bits of a machine number.
    Constant(u64),
    Shared(u32),
    Input(Slot),
    Operation(Operation, ValueId, ValueId),
}

type ValueId = u32;

/// Lowers `outputs` to a program that writes each into its slot.
pub(crate) fn lower(graph: &Graph, outputs: &[(Slot, NodeId)], origin: impl Fn(Variable) -> Origin) -> Program {
    let nodes: Vec<NodeId> = outputs.iter().map(|(_, node)| *node).collect();
    let mut values = Values::default();
    let mut lowered: HashMap<NodeId, ValueId> = HashMap::new();
    for id in graph.reachable(&nodes) {
        let value = values.lower_node(graph, id, &lowered, &origin);
        lowered.insert(id, value);
    }
    let outputs: Vec<(Slot, ValueId)> = outputs.iter().map(|(slot, node)| (*slot, lowered[node])).collect();
    Emitter::new(values, outputs).emit()
}

/// Hash-consed, constant-folded values.
#[derive(Default)]
struct Values {
    values: Vec<Value>,
    /// Whether all points have the value in common.
    is_uniform: Vec<bool>,
    index: HashMap<Value, ValueId>,
}

impl Values {
    fn insert(&mut self, value: Value) -> ValueId {
        if let Some(&known) = self.index.get(&value) {
            return known;
        }
        let is_uniform = match value {
            Value::Constant(_) | Value::Shared(_) => true,
            Value::Input(_) => false,
            Value::Operation(_, a, b) => self.is_uniform[a as usize] && self.is_uniform[b as usize],
        };
        let id = u32::try_from(self.values.len()).expect("fewer than 2^32 values fit in memory");
        self.values.push(value);
        self.is_uniform.push(is_uniform);
        self.index.insert(value, id);
        id
    }

    fn constant(&mut self, value: f64) -> ValueId {
        self.insert(Value::Constant(value.to_bits()))
    }

    fn as_constant(&self, id: ValueId) -> Option<f64> {
        match self.values[id as usize] {
            Value::Constant(bits) => Some(f64::from_bits(bits)),
            _ => None,
        }
    }

    /// An operation of one operand has it twice.
    fn operation(&mut self, operation: Operation, a: ValueId, b: ValueId) -> ValueId {
        if let (Some(x), Some(y)) = (self.as_constant(a), self.as_constant(b)) {
            return self.constant(operation.apply(x, y));
        }
        let commutes = matches!(operation, Operation::Add | Operation::Multiply);
        let (a, b) = if commutes && b < a { (b, a) } else { (a, b) };
        self.insert(Value::Operation(operation, a, b))
    }

    fn one_operand(&mut self, operation: Operation, a: ValueId) -> ValueId {
        self.operation(operation, a, a)
    }

    fn product(&mut self, a: ValueId, b: ValueId) -> ValueId {
        if self.as_constant(a) == Some(1.0) {
            return b;
        }
        if self.as_constant(b) == Some(1.0) {
            return a;
        }
        self.operation(Operation::Multiply, a, b)
    }

    fn quotient(&mut self, a: ValueId, b: ValueId) -> ValueId {
        if let (Some(x), Some(y)) = (self.as_constant(a), self.as_constant(b)) {
            return self.constant(x / y);
        }
        let reciprocal = self.one_operand(Operation::Reciprocal, b);
        self.product(a, reciprocal)
    }

    fn power(&mut self, base: ValueId, exponent: i32) -> ValueId {
        let magnitude = exponent.unsigned_abs();
        if magnitude > HIGHEST_PRODUCT {
            return self.one_operand(Operation::Power(exponent), base);
        }
        let power = self.product_power(base, magnitude);
        if exponent < 0 { self.one_operand(Operation::Reciprocal, power) } else { power }
    }

    /// x^(2k) = (x^k)^2, x^(2k+1) = x^(2k) x: powers of one base share their parts.
    fn product_power(&mut self, base: ValueId, exponent: u32) -> ValueId {
        match exponent {
            0 => self.constant(1.0),
            1 => base,
            even if even % 2 == 0 => {
                let root = self.product_power(base, even / 2);
                self.operation(Operation::Multiply, root, root)
            }
            odd => {
                let lower = self.product_power(base, odd - 1);
                self.operation(Operation::Multiply, lower, base)
            }
        }
    }

    /// `a^b` with a constant b that has a cheaper form.
    fn general_power(&mut self, a: ValueId, b: ValueId) -> ValueId {
        match self.as_constant(b) {
            Some(0.5) => self.one_operand(Operation::Unary(Unary::Sqrt), a),
            Some(-0.5) => {
                let root = self.one_operand(Operation::Unary(Unary::Sqrt), a);
                self.one_operand(Operation::Reciprocal, root)
            }
            Some(whole) if whole.fract() == 0.0 && whole.abs() <= f64::from(HIGHEST_PRODUCT) => {
                self.power(a, whole as i32)
            }
            _ => self.operation(Operation::Binary(Binary::PowerLog(0)), a, b),
        }
    }

    fn lower_node(
        &mut self,
        graph: &Graph,
        id: NodeId,
        lowered: &HashMap<NodeId, ValueId>,
        origin: &impl Fn(Variable) -> Origin,
    ) -> ValueId {
        let of = |child: NodeId| lowered[&child];
        match graph.node(id) {
            Node::Number(number) => self.constant(graph.number(number).to_f64()),
            Node::Pi => self.constant(std::f64::consts::PI),
            Node::Variable(variable) => match origin(variable) {
                Origin::PerPoint(slot) => self.insert(Value::Input(slot)),
                Origin::Shared(parameter) => self.insert(Value::Shared(parameter)),
            },
            Node::Negate(a) => self.one_operand(Operation::Negate, of(a)),
            Node::Add(a, b) => self.operation(Operation::Add, of(a), of(b)),
            Node::Subtract(a, b) => self.operation(Operation::Subtract, of(a), of(b)),
            Node::Multiply(a, b) => self.product(of(a), of(b)),
            Node::Divide(a, b) => self.quotient(of(a), of(b)),
            Node::Power(a, exponent) => self.power(of(a), exponent),
            Node::Unary(function, a) => self.one_operand(Operation::Unary(function), of(a)),
            Node::Binary(Binary::PowerLog(0), a, b) => self.general_power(of(a), of(b)),
            Node::Binary(function, a, b) => self.operation(Operation::Binary(function), of(a), of(b)),
        }
    }
}

/// Orders the needed values, assigns registers and writes the program.
struct Emitter {
    values: Values,
    outputs: Vec<(Slot, ValueId)>,
    /// How often each value is still to be read, by operations and by outputs.
    reads: Vec<u32>,
    /// Where each value stands once it is emitted.
    place: Vec<Option<Operand>>,
    free: Vec<u32>,
    program: Program,
}

impl Emitter {
    fn new(values: Values, outputs: Vec<(Slot, ValueId)>) -> Self {
        let count = values.values.len();
        Self {
            values,
            outputs,
            reads: vec![0; count],
            place: vec![None; count],
            free: Vec::new(),
            program: Program::default(),
        }
    }

    fn emit(mut self) -> Program {
        self.count_reads();
        for at in 0..self.outputs.len() {
            let (slot, value) = self.outputs[at];
            self.emit_operands(value);
            self.emit_output(slot, value);
        }
        self.program
    }

    /// Operands of a value, each once.
    fn operands(&self, value: ValueId) -> impl Iterator<Item = ValueId> + use<> {
        let (a, b) = match self.values.values[value as usize] {
            Value::Operation(_, a, b) => (Some(a), (a != b).then_some(b)),
            _ => (None, None),
        };
        a.into_iter().chain(b)
    }

    fn count_reads(&mut self) {
        let mut needed = vec![false; self.values.values.len()];
        for (_, value) in &self.outputs {
            needed[*value as usize] = true;
            self.reads[*value as usize] += 1;
        }
        for value in (0..needed.len() as ValueId).rev() {
            if needed[value as usize] {
                for operand in self.operands(value) {
                    needed[operand as usize] = true;
                    self.reads[operand as usize] += 1;
                }
            }
        }
    }

    /// Emits everything that `value` needs, depth first so that few registers live at once.
    fn emit_operands(&mut self, value: ValueId) {
        let mut path = vec![(value, false)];
        while let Some((at, operands_done)) = path.pop() {
            if self.place[at as usize].is_some() {
                continue;
            }
            if !operands_done {
                path.push((at, true));
                path.extend(self.operands(at).map(|operand| (operand, false)));
            } else if at != value || self.reads[at as usize] > 1 || !self.is_lane_operation(at) {
                self.emit_value(at);
            }
        }
    }

    /// Whether the value is computed for each point.
    fn is_lane_operation(&self, value: ValueId) -> bool {
        matches!(self.values.values[value as usize], Value::Operation(..)) && !self.values.is_uniform[value as usize]
    }

    fn emit_value(&mut self, value: ValueId) {
        let place = match self.values.values[value as usize] {
            Value::Input(slot) => Operand::Input(slot),
            Value::Constant(bits) => Operand::Uniform(self.uniform(f64::from_bits(bits))),
            Value::Shared(parameter) => {
                let to = self.uniform(0.0);
                self.program.shared.push((to, parameter));
                Operand::Uniform(to)
            }
            Value::Operation(operation, a, b) if self.values.is_uniform[value as usize] => {
                let (a, b) = (self.uniform_place(a), self.uniform_place(b));
                let to = self.uniform(0.0);
                self.program.uniform.push(UniformInstruction { operation, to, a, b });
                Operand::Uniform(to)
            }
            Value::Operation(operation, a, b) => {
                // The target is taken before the operands are released: it is never one of them.
                let register = self.take_register();
                self.push(operation, Target::Register(register), a, b);
                Operand::Register(register)
            }
        };
        self.place[value as usize] = Some(place);
    }

    /// Writes an output: directly by its operation if nothing else reads the value, else by a copy.
    fn emit_output(&mut self, slot: Slot, value: ValueId) {
        let target = Target::Output(slot);
        match (self.place[value as usize], self.values.values[value as usize]) {
            (None, Value::Operation(operation, a, b)) => self.push(operation, target, a, b),
            _ => self.push(Operation::Copy, target, value, value),
        }
    }

    fn push(&mut self, operation: Operation, to: Target, a: ValueId, b: ValueId) {
        let (place_a, place_b) = (self.placed(a), self.placed(b));
        // Operations of one operand ignore the second; a uniform number is the cheapest to fetch.
        let b_operand = if operation.has_two_operands() { place_b } else { place_a };
        self.program.instructions.push(Instruction { operation, to, a: place_a, b: b_operand });
        self.release(a);
        if b != a {
            self.release(b);
        }
    }

    fn placed(&self, value: ValueId) -> Operand {
        self.place[value as usize].expect("operands are emitted before their operation")
    }

    fn release(&mut self, value: ValueId) {
        let reads = &mut self.reads[value as usize];
        *reads -= 1;
        if *reads == 0
            && let Some(Operand::Register(register)) = self.place[value as usize]
        {
            self.free.push(register);
        }
    }

    fn take_register(&mut self) -> u32 {
        self.free.pop().unwrap_or_else(|| {
            self.program.n_registers += 1;
            u32::try_from(self.program.n_registers - 1).expect("fewer registers than values")
        })
    }

    fn uniform(&mut self, initial: f64) -> u32 {
        self.program.initial.push(initial);
        u32::try_from(self.program.initial.len() - 1).expect("fewer uniform numbers than values")
    }

    fn uniform_place(&self, value: ValueId) -> u32 {
        match self.placed(value) {
            Operand::Uniform(number) => number,
            other => unreachable!("operands of a uniform value are uniform, not {other:?}"),
        }
    }
}
