//! A vector field compiled from formulas.
//!
//! Each kind of evaluation (rates, linearisation, higher derivatives) has a program of its own for
//! each choice of columns, made when it is first asked for and shared by all evaluators of the field.
//! A direction without a state part, or without a part in the columns, has a program in which that
//! part is absent rather than multiplied by zero.

use std::collections::HashMap;
use std::sync::{Arc, Mutex, PoisonError};

use nalgebra_sparse::pattern::SparsityPattern;

use num_dual::Dual2_64;

use crate::derivative::{directional, gradients, reverse_gradient};
use crate::evaluate::evaluate;
use crate::field::{Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, VectorField};
use crate::graph::{Graph, Node, NodeId, Variable};
use crate::lower::{Origin, lower};
use crate::program::{Program, Slot, Workspace};

/// Numbers of the input vectors of a program.
mod vector {
    pub(super) const TIME: u8 = 0;
    pub(super) const STATES: u8 = 1;
    pub(super) const PARAMETERS: u8 = 2;
    pub(super) const PSI: u8 = 3;
    /// State part of direction d at this plus 2 d, column part one above.
    pub(super) const DIRECTIONS: u8 = 4;
    /// All of them, with three directions.
    pub(super) const COUNT: usize = 10;
}

/// A vector field compiled from the formulas of a graph.
#[derive(Clone, Debug)]
pub struct CompiledField {
    shared: Arc<Shared>,
}

#[derive(Debug)]
struct Shared {
    /// The formulas as given.
    formulas: Graph,
    rates: Vec<NodeId>,
    n_parameters: usize,
    is_forced: bool,
    /// Period of the forcing, a formula of the parameters.
    forcing: Option<NodeId>,
    pattern: SparsityPattern,
    maker: Mutex<Maker>,
}

/// Grows derivatives in its own copy of the graph and keeps the programs.
#[derive(Debug)]
struct Maker {
    graph: Graph,
    /// Entries of the Jacobian in the order of the pattern.
    jacobian: Vec<NodeId>,
    programs: HashMap<(Vec<Column>, Kind, Sharing), Arc<Program>>,
}

/// Which parts of a direction are given.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
struct Parts {
    states: bool,
    columns: bool,
}

/// What a program computes.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
enum Kind {
    Rates,
    Linearise,
    Second([Parts; 2]),
    Third([Parts; 3]),
    SecondGradient(Parts),
}

/// Whether the points of a batch have their parameters in common.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
enum Sharing {
    Common,
    PerPoint,
}

impl CompiledField {
    /// Compiles the field whose rates are `rates`, one per state.
    pub fn new(graph: Graph, rates: Vec<NodeId>, n_parameters: usize) -> Self {
        Self::forced(graph, rates, n_parameters, None)
    }

    /// The same with the period of the forcing, a formula of the parameters.
    pub fn forced(graph: Graph, rates: Vec<NodeId>, n_parameters: usize, forcing: Option<NodeId>) -> Self {
        let mut grown = graph.clone();
        let is_state = |variable| matches!(variable, Variable::State(_));
        let mut offsets = vec![0];
        let mut columns = Vec::new();
        let mut jacobian = Vec::new();
        for gradient in gradients(&mut grown, &rates, is_state) {
            for (variable, slope) in gradient {
                if let Variable::State(state) = variable {
                    columns.push(state as usize);
                    jacobian.push(slope);
                }
            }
            offsets.push(columns.len());
        }
        let n = rates.len();
        let pattern = SparsityPattern::try_from_offsets_and_indices(n, n, offsets, columns)
            .expect("gradients are sorted by variable and name states only");
        let is_forced = graph.reachable(&rates).iter().any(|id| graph.node(*id) == Node::Variable(Variable::Time));
        let maker = Mutex::new(Maker { graph: grown, jacobian, programs: HashMap::new() });
        let shared = Shared { formulas: graph, rates, n_parameters, is_forced, forcing, pattern, maker };
        Self { shared: Arc::new(shared) }
    }

    /// The formulas, without derivatives.
    pub fn graph(&self) -> &Graph {
        &self.shared.formulas
    }

    /// The rates in [`CompiledField::graph`], one per state.
    pub fn rates(&self) -> &[NodeId] {
        &self.shared.rates
    }

    /// Number of instructions that rates, Jacobian and no columns take per block of points.
    pub fn n_instructions(&self) -> usize {
        self.shared.program(&[], Kind::Linearise, Sharing::Common).instructions.len()
    }
}

impl VectorField for CompiledField {
    fn n_states(&self) -> usize {
        self.shared.rates.len()
    }

    fn n_parameters(&self) -> usize {
        self.shared.n_parameters
    }

    fn is_forced(&self) -> bool {
        self.shared.is_forced
    }

    fn forcing_period(&self, parameters: &[f64], along: usize) -> Option<[f64; 3]> {
        let period = self.shared.forcing.filter(|_| self.shared.is_forced)?;
        let value = |variable| match variable {
            Variable::Parameter(index) => {
                let slope = if index as usize == along { 1.0 } else { 0.0 };
                Dual2_64::new(parameters[index as usize], slope, 0.0)
            }
            _ => Dual2_64::from(f64::NAN),
        };
        let found = evaluate(&self.shared.formulas, &[period], value)[0];
        Some([found.re, found.v1, found.v2])
    }

    fn pattern(&self) -> &SparsityPattern {
        &self.shared.pattern
    }

    fn evaluator(&self, columns: &[Column]) -> Box<dyn Evaluator> {
        check_columns(columns, self.shared.n_parameters);
        let mut evaluator = CompiledEvaluator {
            field: Arc::clone(&self.shared),
            columns: columns.to_vec(),
            programs: Vec::new(),
            workspace: Workspace::default(),
        };
        for kind in [Kind::Rates, Kind::Linearise] {
            evaluator.program(kind, Sharing::Common);
        }
        Box::new(evaluator)
    }
}

/// Checks that the columns of an evaluator exist and differ.
///
/// # Panics
/// If they do not.
pub(crate) fn check_columns(columns: &[Column], n_parameters: usize) {
    for (at, column) in columns.iter().enumerate() {
        let exists = !matches!(column, Column::Parameter(index) if *index >= n_parameters);
        assert!(exists, "{column:?} is not one of the {n_parameters} parameters");
        assert!(!columns[..at].contains(column), "{column:?} is asked for twice");
    }
}

impl Shared {
    fn program(&self, columns: &[Column], kind: Kind, sharing: Sharing) -> Arc<Program> {
        // A panic while growing derivatives leaves a graph with unused nodes, which is still a graph.
        let mut maker = self.maker.lock().unwrap_or_else(PoisonError::into_inner);
        let key = (columns.to_vec(), kind, sharing);
        if let Some(known) = maker.programs.get(&key) {
            return Arc::clone(known);
        }
        let program = Arc::new(maker.make(&self.rates, columns, kind, sharing));
        maker.programs.insert(key, Arc::clone(&program));
        program
    }
}

impl Maker {
    fn make(&mut self, rates: &[NodeId], columns: &[Column], kind: Kind, sharing: Sharing) -> Program {
        let outputs = match kind {
            Kind::Rates => numbered(0, rates).collect(),
            Kind::Linearise => self.linearisation(rates, columns),
            Kind::Second(parts) => numbered(0, &self.derivative(rates, columns, &parts)).collect(),
            Kind::Third(parts) => numbered(0, &self.derivative(rates, columns, &parts)).collect(),
            Kind::SecondGradient(parts) => self.second_gradient(rates, columns, parts),
        };
        lower(&self.graph, &outputs, |variable| origin(variable, sharing))
    }

    fn linearisation(&mut self, rates: &[NodeId], columns: &[Column]) -> Vec<(Slot, NodeId)> {
        let wanted: Vec<Variable> = columns.iter().map(|column| variable_of(*column)).collect();
        let slopes = gradients(&mut self.graph, rates, |variable| wanted.contains(&variable));
        let zero = self.graph.whole(0);
        let by_column: Vec<NodeId> = wanted
            .iter()
            .flat_map(|variable| slopes.iter().map(|of_rate| of_rate.get(variable).copied().unwrap_or(zero)))
            .collect();
        numbered(0, rates).chain(numbered(1, &self.jacobian)).chain(numbered(2, &by_column)).collect()
    }

    /// Derivative along as many directions as there are `parts`.
    fn derivative(&mut self, rates: &[NodeId], columns: &[Column], parts: &[Parts]) -> Vec<NodeId> {
        let mut result = rates.to_vec();
        for (at, parts) in (0..).zip(parts) {
            result = directional(&mut self.graph, &result, |variable| direction_entry(variable, at, *parts, columns));
        }
        result
    }

    fn second_gradient(&mut self, rates: &[NodeId], columns: &[Column], parts: Parts) -> Vec<(Slot, NodeId)> {
        let along = self.derivative(rates, columns, &[parts]);
        let mut sum = self.graph.whole(0);
        for (index, slope) in (0..).zip(along) {
            let weight = self.graph.variable(Variable::Extra { vector: vector::PSI, index });
            let term = self.graph.multiply(weight, slope);
            sum = self.graph.add(sum, term);
        }
        let states = (0..rates.len() as u32).map(Variable::State);
        let wanted: Vec<Variable> = states.chain(columns.iter().map(|column| variable_of(*column))).collect();
        let all = reverse_gradient(&mut self.graph, sum, &wanted);
        let (in_states, in_columns) = all.split_at(rates.len());
        numbered(0, in_states).chain(numbered(1, in_columns)).collect()
    }
}

fn numbered(vector: u8, nodes: &[NodeId]) -> impl Iterator<Item = (Slot, NodeId)> {
    (0..).zip(nodes).map(move |(index, node)| (Slot { vector, index }, *node))
}

fn variable_of(column: Column) -> Variable {
    match column {
        Column::Time => Variable::Time,
        Column::Parameter(index) => Variable::Parameter(index as u32),
    }
}

fn direction_entry(variable: Variable, at: u8, parts: Parts, columns: &[Column]) -> Option<Variable> {
    let vector = vector::DIRECTIONS + 2 * at;
    match variable {
        Variable::State(index) => parts.states.then_some(Variable::Extra { vector, index }),
        Variable::Extra { .. } => None,
        other if parts.columns => {
            let column = columns.iter().position(|column| variable_of(*column) == other)?;
            Some(Variable::Extra { vector: vector + 1, index: column as u32 })
        }
        _ => None,
    }
}

fn origin(variable: Variable, sharing: Sharing) -> Origin {
    let (vector, index) = match variable {
        Variable::Time => (vector::TIME, 0),
        Variable::State(index) => (vector::STATES, index),
        Variable::Parameter(index) if sharing == Sharing::Common => return Origin::Shared(index),
        Variable::Parameter(index) => (vector::PARAMETERS, index),
        Variable::Extra { vector, index } => (vector, index),
    };
    Origin::PerPoint(Slot { vector, index })
}

struct CompiledEvaluator {
    field: Arc<Shared>,
    columns: Vec<Column>,
    /// The programs used so far; few, so that a search in order is fastest.
    programs: Vec<((Kind, Sharing), Arc<Program>)>,
    workspace: Workspace,
}

/// What a program reads besides the batch.
#[derive(Clone, Copy, Default)]
struct Extra<'a> {
    psi: &'a [f64],
    directions: [Option<Direction<'a>>; 3],
}

impl CompiledEvaluator {
    fn program(&mut self, kind: Kind, sharing: Sharing) -> usize {
        let key = (kind, sharing);
        if let Some(at) = self.programs.iter().position(|(known, _)| *known == key) {
            return at;
        }
        let program = self.field.program(&self.columns, kind, sharing);
        self.workspace.reserve(&program);
        self.programs.push((key, program));
        self.programs.len() - 1
    }

    fn run(&mut self, kind: Kind, at: Batch<'_>, extra: Extra<'_>, outputs: &mut [&mut [f64]]) {
        let sharing = self.check(at, extra);
        let program = self.program(kind, sharing);
        let mut inputs: [&[f64]; vector::COUNT] = [&[]; vector::COUNT];
        inputs[usize::from(vector::TIME)] = at.time;
        inputs[usize::from(vector::STATES)] = at.states;
        inputs[usize::from(vector::PARAMETERS)] = at.parameters;
        inputs[usize::from(vector::PSI)] = extra.psi;
        for (d, direction) in extra.directions.iter().enumerate() {
            if let Some(direction) = direction {
                let first = usize::from(vector::DIRECTIONS) + 2 * d;
                inputs[first] = direction.states;
                inputs[first + 1] = direction.columns;
            }
        }
        let program = &self.programs[program].1;
        program.run(&mut self.workspace, at.len, at.parameters, &inputs, outputs);
    }

    /// Checks every length of the input; says how the parameters are given.
    fn check(&self, at: Batch<'_>, extra: Extra<'_>) -> Sharing {
        let (n, n_parameters, len) = (self.field.rates.len(), self.field.n_parameters, at.len);
        assert_eq!(at.states.len(), n * len, "states are n x len with n = {n}, len = {len}");
        assert!(
            at.time.len() == len || (at.time.is_empty() && !self.field.is_forced),
            "times are len = {len} numbers where the model uses the time, not {}",
            at.time.len()
        );
        for direction in extra.directions.iter().flatten() {
            check_part(direction.states.len(), n * len, "states of a direction");
            check_part(direction.columns.len(), self.columns.len() * len, "columns of a direction");
        }
        if at.parameters.len() == n_parameters {
            return Sharing::Common;
        }
        assert_eq!(
            at.parameters.len(),
            n_parameters * len,
            "parameters are {n_parameters}, or {n_parameters} x len with len = {len}"
        );
        Sharing::PerPoint
    }
}

fn check_part(given: usize, wanted: usize, what: &str) {
    assert!(given == 0 || given == wanted, "{what} are {wanted} numbers or none, not {given}");
}

fn check_output(given: &[f64], wanted: usize, what: &str) {
    assert_eq!(given.len(), wanted, "{what} take {wanted} numbers");
}

fn parts(direction: Direction<'_>) -> Parts {
    Parts { states: !direction.states.is_empty(), columns: !direction.columns.is_empty() }
}

impl Evaluator for CompiledEvaluator {
    fn rates(&mut self, at: Batch<'_>, rates: &mut [f64]) {
        check_output(rates, self.field.rates.len() * at.len, "rates");
        self.run(Kind::Rates, at, Extra::default(), &mut [rates]);
    }

    fn linearise(&mut self, at: Batch<'_>, out: Linearisation<'_>) {
        let n = self.field.rates.len();
        check_output(out.rates, n * at.len, "rates");
        check_output(out.jacobian, self.field.pattern.nnz() * at.len, "Jacobian values");
        check_output(out.columns, self.columns.len() * n * at.len, "columns");
        let outputs = &mut [out.rates, out.jacobian, out.columns];
        self.run(Kind::Linearise, at, Extra::default(), outputs);
    }

    fn second(&mut self, at: Batch<'_>, u: Direction<'_>, v: Direction<'_>, out: &mut [f64]) {
        check_output(out, self.field.rates.len() * at.len, "second derivatives");
        let extra = Extra { psi: &[], directions: [Some(u), Some(v), None] };
        self.run(Kind::Second([parts(u), parts(v)]), at, extra, &mut [out]);
    }

    fn third(&mut self, at: Batch<'_>, directions: [Direction<'_>; 3], out: &mut [f64]) -> Result<(), NotProvided> {
        check_output(out, self.field.rates.len() * at.len, "third derivatives");
        let extra = Extra { psi: &[], directions: directions.map(Some) };
        self.run(Kind::Third(directions.map(parts)), at, extra, &mut [out]);
        Ok(())
    }

    fn second_gradient(&mut self, at: Batch<'_>, psi: &[f64], v: Direction<'_>, out: Gradient<'_>) {
        let n = self.field.rates.len();
        check_output(psi, n * at.len, "psi");
        check_output(out.states, n * at.len, "derivatives in the states");
        check_output(out.columns, self.columns.len() * at.len, "derivatives in the columns");
        let extra = Extra { psi, directions: [Some(v), None, None] };
        self.run(Kind::SecondGradient(parts(v)), at, extra, &mut [out.states, out.columns]);
    }
}
