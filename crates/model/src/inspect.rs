//! What `check` shows of a model: its equations as understood, its sizes, and its start.

use std::collections::HashMap;
use std::fmt;

use crate::evaluate::evaluate;
use crate::field::Batch;
use crate::graph::{Node, NodeId, Variable};
use crate::model::Model;
use crate::print::Printer;

/// A named expression or a rate, as the program understood it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Equation {
    /// Name of the expression or of the state.
    pub name: String,
    /// Whether the text is the rate of the state of that name.
    pub is_rate: bool,
    /// The formula, printed from the graph.
    pub text: String,
}

impl fmt::Display for Equation {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let what = if self.is_rate { "rate of " } else { "" };
        write!(f, "{what}{} = {}", self.name, self.text)
    }
}

/// How large a model is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Sizes {
    /// Number of states.
    pub states: usize,
    /// Number of parameters.
    pub parameters: usize,
    /// Instructions for rates and Jacobian; none for a Rust-coded model.
    pub instructions: Option<usize>,
    /// Entries of the Jacobian that can differ from zero.
    pub nonzeros: usize,
}

/// A state with its value and rate at the start.
#[derive(Clone, Debug, PartialEq)]
pub struct StateAtStart {
    /// Name of the state.
    pub name: String,
    /// Value from which simulations begin.
    pub value: f64,
    /// Its rate there, at time 0.
    pub rate: f64,
}

/// A rate at the start that is not a finite number.
#[derive(Clone, Debug, PartialEq)]
pub struct NotFinite {
    /// Name of the state.
    pub state: String,
    /// What its rate is there.
    pub rate: f64,
    /// The expression or rate in which it arises, and its formula as written; none for a Rust-coded
    /// model.
    pub origin: Option<(String, String)>,
}

impl fmt::Display for NotFinite {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self { state, rate, .. } = self;
        write!(f, "the rate of `{state}` at the start is {rate}, not a finite number")?;
        match &self.origin {
            Some((name, formula)) if name == state => write!(f, "; its formula is `{formula}`"),
            Some((name, formula)) => write!(f, "; it comes from `{name}`, whose formula is `{formula}`"),
            None => Ok(()),
        }
    }
}

impl std::error::Error for NotFinite {}

impl Model {
    /// Expressions and rates as understood; empty for a Rust-coded model.
    ///
    /// `x_over_expm1(u)` stands for `u / (exp(u) - 1)`, evaluated safely.
    pub fn equations(&self) -> Vec<Equation> {
        let Some(compiled) = self.compiled() else { return Vec::new() };
        let graph = compiled.graph();
        let name = |variable| self.variable_name(variable);
        let is_leaf = |id: NodeId| matches!(graph.node(id), Node::Number(_) | Node::Pi | Node::Variable(_));
        let mut named = HashMap::new();
        for (expression, id) in &self.named {
            if !is_leaf(*id) {
                named.entry(*id).or_insert(expression.as_str());
            }
        }
        let printer = Printer { graph, name: &name, named };
        let expressions = self.named.iter().map(|(name, id)| (name, false, *id));
        let rates = self.states.iter().zip(compiled.rates()).map(|(state, id)| (&state.name, true, *id));
        expressions
            .chain(rates)
            .map(|(name, is_rate, id)| Equation { name: name.clone(), is_rate, text: printer.print(id) })
            .collect()
    }

    fn variable_name(&self, variable: Variable) -> String {
        match variable {
            Variable::Time => "t".to_owned(),
            Variable::State(index) => self.states[index as usize].name.clone(),
            Variable::Parameter(index) => self.parameters[index as usize].name.clone(),
            Variable::Extra { vector, index } => format!("extra{vector}_{index}"),
        }
    }

    /// Sizes of the model.
    pub fn sizes(&self) -> Sizes {
        Sizes {
            states: self.states.len(),
            parameters: self.parameters.len(),
            instructions: self.compiled().map(|compiled| compiled.n_instructions()),
            nonzeros: self.field.pattern().nnz(),
        }
    }

    /// The states at the start with their rates, for given parameters.
    ///
    /// # Panics
    /// If the number of parameters is not that of the model.
    pub fn at_start(&self, parameters: &[f64]) -> Vec<StateAtStart> {
        let begin = self.begin();
        let mut rates = vec![0.0; begin.len()];
        let at = Batch { len: 1, time: &[0.0], states: &begin, parameters };
        self.field.evaluator(&[]).rates(at, &mut rates);
        let states = self.states.iter().zip(rates);
        states.map(|(state, rate)| StateAtStart { name: state.name.clone(), value: state.begin, rate }).collect()
    }

    /// The first rate at the start that is not finite, with where it arises.
    ///
    /// # Errors
    /// If there is such a rate.
    ///
    /// # Panics
    /// If the number of parameters is not that of the model.
    pub fn check_start(&self, parameters: &[f64]) -> Result<(), NotFinite> {
        let states = self.at_start(parameters);
        let Some(index) = states.iter().position(|state| !state.rate.is_finite()) else {
            return Ok(());
        };
        let StateAtStart { name, rate, .. } = states[index].clone();
        let origin = self.not_finite_origin(index, parameters);
        Err(NotFinite { state: name, rate, origin })
    }

    /// The first expression that the rate uses and that is not finite, else the rate itself.
    fn not_finite_origin(&self, state: usize, parameters: &[f64]) -> Option<(String, String)> {
        let compiled = self.compiled()?;
        let used = compiled.graph().reachable(&[compiled.rates()[state]]);
        let begin = self.begin();
        let value = |variable| match variable {
            Variable::Time => 0.0,
            Variable::State(index) => begin[index as usize],
            Variable::Parameter(index) => parameters[index as usize],
            Variable::Extra { .. } => f64::NAN,
        };
        let nodes: Vec<NodeId> = self.named.iter().map(|(_, id)| *id).collect();
        let values = evaluate(compiled.graph(), &nodes, value);
        // Ids grow with dependence: the smallest is the one in which it arises.
        let mut bad: Vec<(NodeId, &str)> = self
            .named
            .iter()
            .zip(values)
            .filter(|((_, id), value)| !value.is_finite() && used.binary_search(id).is_ok())
            .map(|((name, id), _)| (*id, name.as_str()))
            .collect();
        bad.sort_unstable();
        let formula = match bad.first() {
            Some((_, name)) => self.expressions.iter().find(|formula| formula.name == *name),
            None => self.rates.get(state),
        };
        formula.map(|formula| (formula.name.clone(), formula.text.clone()))
    }
}
