//! A compiled program: a list of instructions over blocks of lanes, and its execution.
//!
//! Values that no point changes (constants, and what depends on shared parameters only) form the
//! *uniform* part, computed once per call. The rest runs for blocks of up to [`LANES`] points: each
//! instruction is one loop over the lanes, its operands slices of the caller's vectors, registers or
//! uniform numbers. Registers are reused, so that the whole file of a usual model stays in the
//! first-level cache (64 lanes of 8 bytes: 64 registers fill 32 KiB).

use crate::bernoulli::{bernoulli, bernoulli_lanes};
use crate::function::{Binary, Unary};
use crate::scalar::{binary_f64, unary_f64};

/// Points that one instruction treats at once: long enough to hide the cost of dispatch (about 3 ns an
/// instruction), short enough for the registers to stay in the first-level cache.
pub(crate) const LANES: usize = 64;

/// What an instruction computes.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub(crate) enum Operation {
    Copy,
    Negate,
    Reciprocal,
    Add,
    Subtract,
    Multiply,
    /// Whole-number power too high to be written as products.
    Power(i32),
    Unary(Unary),
    Binary(Binary),
}

impl Operation {
    /// The operation on machine numbers; `b` is ignored by those of one operand.
    pub(crate) fn apply(self, a: f64, b: f64) -> f64 {
        match self {
            Self::Copy => a,
            Self::Negate => -a,
            Self::Reciprocal => 1.0 / a,
            Self::Add => a + b,
            Self::Subtract => a - b,
            Self::Multiply => a * b,
            Self::Power(exponent) => a.powi(exponent),
            Self::Unary(function) => unary_f64(function, a),
            Self::Binary(function) => binary_f64(function, a, b),
        }
    }

    pub(crate) fn has_two_operands(self) -> bool {
        matches!(self, Self::Add | Self::Subtract | Self::Multiply | Self::Binary(_))
    }
}

/// A vector of the caller, entry `index` of it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub(crate) struct Slot {
    pub vector: u8,
    pub index: u32,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Operand {
    Register(u32),
    Input(Slot),
    Uniform(u32),
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Target {
    Register(u32),
    Output(Slot),
}

#[derive(Clone, Copy, Debug)]
pub(crate) struct Instruction {
    pub operation: Operation,
    pub to: Target,
    pub a: Operand,
    pub b: Operand,
}

/// An instruction of the uniform part: operands and result are uniform numbers.
#[derive(Clone, Copy, Debug)]
pub(crate) struct UniformInstruction {
    pub operation: Operation,
    pub to: u32,
    pub a: u32,
    pub b: u32,
}

/// A compiled program.
#[derive(Clone, Debug, Default)]
pub(crate) struct Program {
    /// First constants, then room for shared parameters and results of `uniform`.
    pub initial: Vec<f64>,
    /// Where the shared parameter (second) goes in the uniform numbers (first).
    pub shared: Vec<(u32, u32)>,
    pub uniform: Vec<UniformInstruction>,
    pub instructions: Vec<Instruction>,
    pub n_registers: usize,
}

/// Memory that programs run in.
#[derive(Clone, Debug, Default)]
pub(crate) struct Workspace {
    uniform: Vec<f64>,
    registers: Vec<f64>,
}

impl Workspace {
    /// Makes room for a program, so that running it does not allocate.
    pub(crate) fn reserve(&mut self, program: &Program) {
        let registers = program.n_registers * LANES;
        if self.registers.len() < registers {
            self.registers.resize(registers, 0.0);
        }
        let missing = program.initial.len().saturating_sub(self.uniform.capacity());
        self.uniform.reserve(missing);
    }
}

impl Program {
    /// Runs the program for `len` points. `inputs[v][i * len + k]` is entry i of vector v at point k,
    /// outputs likewise; `shared` are the parameters that all points have in common.
    pub(crate) fn run(
        &self,
        workspace: &mut Workspace,
        len: usize,
        shared: &[f64],
        inputs: &[&[f64]],
        outputs: &mut [&mut [f64]],
    ) {
        workspace.reserve(self);
        self.run_uniform(&mut workspace.uniform, shared);
        let mut start = 0;
        while start < len {
            let lanes = (len - start).min(LANES);
            let block = Block { start, lanes, len, inputs, uniform: &workspace.uniform };
            for instruction in &self.instructions {
                block.step(instruction, &mut workspace.registers, outputs);
            }
            start += lanes;
        }
    }

    fn run_uniform(&self, numbers: &mut Vec<f64>, shared: &[f64]) {
        numbers.clear();
        numbers.extend_from_slice(&self.initial);
        for &(to, parameter) in &self.shared {
            numbers[to as usize] = shared[parameter as usize];
        }
        for step in &self.uniform {
            let (a, b) = (numbers[step.a as usize], numbers[step.b as usize]);
            numbers[step.to as usize] = step.operation.apply(a, b);
        }
    }
}

/// Lanes of an operand.
#[derive(Clone, Copy)]
enum Lanes<'a> {
    Each(&'a [f64]),
    All(f64),
}

struct Block<'a> {
    start: usize,
    lanes: usize,
    len: usize,
    inputs: &'a [&'a [f64]],
    uniform: &'a [f64],
}

impl Block<'_> {
    fn step(&self, instruction: &Instruction, registers: &mut [f64], outputs: &mut [&mut [f64]]) {
        match instruction.to {
            Target::Register(register) => {
                // The allocator never writes into a register that the instruction reads.
                let at = register as usize * LANES;
                let (below, rest) = registers.split_at_mut(at);
                let (out, above) = rest.split_at_mut(LANES);
                let a = self.operand(instruction.a, below, above);
                let b = self.operand(instruction.b, below, above);
                compute(instruction.operation, &mut out[..self.lanes], a, b);
            }
            Target::Output(slot) => {
                let at = slot.index as usize * self.len + self.start;
                let out = &mut outputs[usize::from(slot.vector)][at..at + self.lanes];
                let a = self.operand(instruction.a, registers, &[]);
                let b = self.operand(instruction.b, registers, &[]);
                compute(instruction.operation, out, a, b);
            }
        }
    }

    #[inline]
    fn operand<'a>(&'a self, operand: Operand, below: &'a [f64], above: &'a [f64]) -> Lanes<'a> {
        match operand {
            Operand::Register(register) => {
                let at = register as usize * LANES;
                if at < below.len() {
                    Lanes::Each(&below[at..at + self.lanes])
                } else {
                    // One register lies between the two parts.
                    let at = at - below.len() - LANES;
                    Lanes::Each(&above[at..at + self.lanes])
                }
            }
            Operand::Input(slot) => {
                let at = slot.index as usize * self.len + self.start;
                Lanes::Each(&self.inputs[usize::from(slot.vector)][at..at + self.lanes])
            }
            Operand::Uniform(number) => Lanes::All(self.uniform[number as usize]),
        }
    }
}

fn compute(operation: Operation, out: &mut [f64], a: Lanes<'_>, b: Lanes<'_>) {
    match operation {
        Operation::Copy => map(out, a, |x| x),
        Operation::Negate => map(out, a, |x| -x),
        Operation::Reciprocal => map(out, a, |x| 1.0 / x),
        Operation::Add => zip(out, a, b, |x, y| x + y),
        Operation::Subtract => zip(out, a, b, |x, y| x - y),
        Operation::Multiply => zip(out, a, b, |x, y| x * y),
        Operation::Unary(Unary::Sqrt) => map(out, a, f64::sqrt),
        Operation::Unary(Unary::Exp) => map(out, a, f64::exp),
        Operation::Unary(Unary::Bernoulli(order)) => match a {
            Lanes::Each(a) => bernoulli_lanes(order, out, a),
            Lanes::All(a) => out.fill(bernoulli(order, a)),
        },
        Operation::Unary(function) => map(out, a, |x| unary_f64(function, x)),
        Operation::Power(exponent) => map(out, a, |x| x.powi(exponent)),
        Operation::Binary(function) => zip(out, a, b, |x, y| binary_f64(function, x, y)),
    }
}

#[inline]
fn map(out: &mut [f64], a: Lanes<'_>, function: impl Fn(f64) -> f64) {
    match a {
        Lanes::Each(a) => {
            for (out, &x) in out.iter_mut().zip(a) {
                *out = function(x);
            }
        }
        Lanes::All(x) => out.fill(function(x)),
    }
}

#[inline]
fn zip(out: &mut [f64], a: Lanes<'_>, b: Lanes<'_>, function: impl Fn(f64, f64) -> f64) {
    match (a, b) {
        (Lanes::Each(a), Lanes::Each(b)) => {
            for ((out, &x), &y) in out.iter_mut().zip(a).zip(b) {
                *out = function(x, y);
            }
        }
        (Lanes::Each(a), Lanes::All(y)) => {
            for (out, &x) in out.iter_mut().zip(a) {
                *out = function(x, y);
            }
        }
        (Lanes::All(x), Lanes::Each(b)) => {
            for (out, &y) in out.iter_mut().zip(b) {
                *out = function(x, y);
            }
        }
        (Lanes::All(x), Lanes::All(y)) => out.fill(function(x, y)),
    }
}
