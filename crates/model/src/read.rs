//! From the text of a model file to a [`Model`].
//!
//! Every check adds what it finds to one list; the first error in the order of the file is returned.
//! Order of work: names, values, formulas of the expressions in order of dependence, rates, forcing.

use std::collections::{HashMap, HashSet};
use std::ops::Range;
use std::sync::Arc;

use ron::value::RawValue;

use crate::compiled::CompiledField;
use crate::diagnostic::{Diagnostic, Source, nearest_name};
use crate::file::{Located, ModelFile, read_shape};
use crate::function::function_named;
use crate::graph::{Graph, Node, NodeId, Variable};
use crate::model::{Forcing, Formula, Kink, Model, Parameter, State, fingerprint};
use crate::resolve::{Meaning, Names, resolve};
use crate::syntax::{Part, Syntax, parse};

/// Help where a value may only be a constant.
const CONSTANT_ONLY: &str = "a value is a number or a constant formula of numbers, `pi` and functions";

/// Reads a model; the first error in the order of the file is returned.
pub(crate) fn read_model(source: Source<'_>) -> Result<Model, Diagnostic> {
    let file = read_shape(source)?;
    let mut reader =
        Reader { source, graph: Graph::new(), names: HashMap::new(), state_places: Vec::new(), errors: Vec::new() };
    let states = reader.states(&file);
    let parameters = reader.parameters(&file);
    let expressions = reader.formulas(&file.expressions.0);
    reader.expression_names(&expressions);
    let before_rates = reader.errors.len();
    let rates = reader.formulas(&file.rates.0);
    reader.check_rate_names(&states, &rates, before_rates);
    let named = reader.expression_nodes(&expressions, file.forcing.is_some());
    let rate_nodes = reader.rate_nodes(&states, &rates, file.forcing.is_some());
    let forcing = file.forcing.as_ref().and_then(|entry| reader.forcing(entry.period, &parameters));
    if let Some(forcing) = &forcing {
        reader.check_time_is_used(&rate_nodes, &forcing.1);
    }
    let kinks = reader.kinks(expressions.iter().chain(&rates));
    if let Some(first) = reader.errors.into_iter().min_by_key(Diagnostic::place) {
        return Err(first);
    }

    let graph = Arc::new(reader.graph);
    let period = forcing.as_ref().map(|(node, _)| *node);
    let compiled = Arc::new(CompiledField::forced((*graph).clone(), rate_nodes, parameters.len(), period));
    let text_of = |entry: &FormulaEntry| Formula { name: entry.name.text.clone(), text: entry.formula.text.clone() };
    let rate_index = by_name(&rates);
    let rate_text = |state: &State| rate_index.get(state.name.as_str()).map(|at| text_of(&rates[*at]));
    let place = forcing.as_ref().map(|(_, located)| located.whole());
    let model = Model {
        title: file.title,
        note: file.note,
        rates: states.iter().filter_map(rate_text).collect(),
        states,
        parameters,
        expressions: expressions.iter().map(text_of).collect(),
        forcing: forcing.map(|(node, located)| Forcing { text: located.text, graph: Arc::clone(&graph), node }),
        kinks,
        fingerprint: fingerprint(source.text),
        field: compiled.clone(),
        compiled: Some(compiled),
        named,
    };
    match (model.check_forcing(&model.values()), place) {
        (Err(fault), Some(place)) => Err(Diagnostic::new(source, place, fault.to_string()).with_help(fault.help())),
        _ => Ok(model),
    }
}

/// A formula of the file with the name that it defines.
struct FormulaEntry {
    name: Located,
    formula: Located,
    /// None if the formula does not follow the grammar (its error is noted).
    syntax: Option<Syntax>,
}

struct Reader<'a> {
    source: Source<'a>,
    graph: Graph,
    /// What each declared name stands for. An expression stands here once it is built.
    names: HashMap<String, Meaning>,
    /// Where each state is declared.
    state_places: Vec<Range<usize>>,
    errors: Vec<Diagnostic>,
}

impl Reader<'_> {
    fn complain(&mut self, span: Range<usize>, message: String, help: Option<String>) {
        self.errors.push(Diagnostic::new(self.source, span, message).with_help_if(help));
    }

    fn located(&mut self, raw: &RawValue, wanted: &str) -> Option<Located> {
        match Located::new(self.source, raw, wanted) {
            Ok(located) => Some(located),
            Err(error) => {
                self.errors.push(error);
                None
            }
        }
    }

    fn states(&mut self, file: &ModelFile<'_>) -> Vec<State> {
        let mut states = Vec::new();
        for (key, entry) in &file.states.0 {
            let Some(name) = self.located(key, "a name in quotes") else { continue };
            self.declare(&name, Variable::State(states.len() as u32));
            self.state_places.push(name.whole());
            let begin = self.constant(entry.begin).unwrap_or(0.0);
            states.push(State {
                begin,
                unit: entry.unit.clone().unwrap_or_default(),
                label: entry.label.clone().unwrap_or_else(|| name.text.clone()),
                name: name.text,
            });
        }
        states
    }

    fn parameters(&mut self, file: &ModelFile<'_>) -> Vec<Parameter> {
        let mut parameters = Vec::new();
        for (key, entry) in &file.parameters.0 {
            let Some(name) = self.located(key, "a name in quotes") else { continue };
            self.declare(&name, Variable::Parameter(parameters.len() as u32));
            let value = self.constant(entry.value).unwrap_or(0.0);
            parameters.push(Parameter {
                value,
                unit: entry.unit.clone().unwrap_or_default(),
                label: entry.label.clone().unwrap_or_else(|| name.text.clone()),
                uncertainty: entry.uncertainty.and_then(|raw| self.uncertainty(raw)),
                name: name.text,
            });
        }
        parameters
    }

    fn uncertainty(&mut self, raw: &RawValue) -> Option<f64> {
        let value = self.constant(raw)?;
        if value < 0.0 {
            let located = self.located(raw, "a number")?;
            self.complain(
                located.whole(),
                "an uncertainty is never negative".to_owned(),
                Some("give one standard deviation, in the unit of the parameter".to_owned()),
            );
        }
        Some(value)
    }

    /// Value of a number or of a constant formula.
    fn constant(&mut self, raw: &RawValue) -> Option<f64> {
        let located = self.located(raw, "a number or a constant formula in quotes")?;
        let syntax = self.syntax(&located)?;
        let names = HashMap::new();
        let scope = Names { known: &names, has_time: false, refused: Some(CONSTANT_ONLY) };
        match resolve(&mut self.graph, &syntax, &scope) {
            Ok(meaning) => meaning.constant,
            Err(error) => {
                self.complain(located.place(&error.span), error.message, error.help);
                None
            }
        }
    }

    fn syntax(&mut self, formula: &Located) -> Option<Syntax> {
        match parse(&formula.text) {
            Ok(syntax) => Some(syntax),
            Err(error) => {
                self.complain(formula.place(&error.span), error.message, error.help);
                None
            }
        }
    }

    fn declare(&mut self, name: &Located, variable: Variable) {
        if self.check_name(name) {
            let node = self.graph.variable(variable);
            self.names.insert(name.text.clone(), Meaning { node, constant: None });
        }
    }

    /// Whether the name may be declared; notes the error if not.
    fn check_name(&mut self, name: &Located) -> bool {
        let text = &name.text;
        let reserved = match text.as_str() {
            "pi" => Some("the number pi"),
            "t" => Some("the time"),
            other => function_named(other).map(|_| "a function"),
        };
        let letter = |c: char| c.is_alphabetic() || c == '_';
        let well_formed = text.starts_with(letter) && text.chars().all(|c| letter(c) || c.is_ascii_digit());
        let (message, help) = if let Some(meaning) = reserved {
            (format!("the name `{text}` is reserved for {meaning}"), "choose another name")
        } else if !well_formed {
            (
                format!("`{text}` cannot be a name"),
                "names are letters, digits and `_`, not starting with a digit; use `label` for what figures show",
            )
        } else if self.names.contains_key(text) {
            (format!("the name `{text}` is declared twice"), "keep one of them, or rename it")
        } else {
            return true;
        };
        self.complain(name.whole(), message, Some(help.to_owned()));
        false
    }

    fn formulas(&mut self, entries: &[(&RawValue, &RawValue)]) -> Vec<FormulaEntry> {
        let mut formulas = Vec::new();
        for (key, raw) in entries {
            let name = self.located(key, "a name in quotes");
            let formula = self.located(raw, "a formula in quotes");
            if let (Some(name), Some(formula)) = (name, formula) {
                let syntax = self.syntax(&formula);
                formulas.push(FormulaEntry { name, formula, syntax });
            }
        }
        formulas
    }

    /// Checks the names of the expressions and reserves them; they get their nodes later.
    fn expression_names(&mut self, expressions: &[FormulaEntry]) {
        for (index, entry) in (0..).zip(expressions) {
            if self.check_name(&entry.name) {
                // A variable of its own: an expression that fails must not make those that use it fail.
                let placeholder = self.graph.variable(Variable::Extra { vector: u8::MAX, index });
                self.names.insert(entry.name.text.clone(), Meaning { node: placeholder, constant: None });
            }
        }
    }

    /// Builds the expressions in order of dependence.
    fn expression_nodes(&mut self, expressions: &[FormulaEntry], has_time: bool) -> Vec<(String, NodeId)> {
        let mut named = Vec::new();
        for index in self.dependence_order(expressions) {
            let entry = &expressions[index];
            if let Some(meaning) = self.resolve(entry, has_time) {
                self.names.insert(entry.name.text.clone(), meaning);
                named.push((entry.name.text.clone(), meaning.node));
            }
        }
        let index = by_name(expressions);
        named.sort_by_key(|(name, _)| index.get(name.as_str()));
        named
    }

    /// Depth-first order in which every expression follows those it uses; a cycle is noted as an error
    /// and yields an order without the part that closes it.
    fn dependence_order(&mut self, expressions: &[FormulaEntry]) -> Vec<usize> {
        let index = by_name(expressions);
        let uses: Vec<Vec<(usize, Range<usize>)>> =
            expressions.iter().map(|entry| used_expressions(entry, &index)).collect();
        let mut order = Vec::new();
        let mut done = vec![false; expressions.len()];
        for start in 0..expressions.len() {
            // The path from `start`, with the next use to look at in each.
            let mut path: Vec<(usize, usize)> = if done[start] { Vec::new() } else { vec![(start, 0)] };
            while let Some((at, next)) = path.pop() {
                let Some((used, span)) = uses[at].get(next) else {
                    done[at] = true;
                    order.push(at);
                    continue;
                };
                path.push((at, next + 1));
                if let Some(first) = path.iter().position(|(on_path, _)| on_path == used) {
                    let cycle: Vec<usize> = path[first..].iter().map(|(on_path, _)| *on_path).collect();
                    self.complain_cycle(expressions, &cycle, expressions[at].formula.place(span));
                } else if !done[*used] {
                    path.push((*used, 0));
                }
            }
        }
        order
    }

    fn complain_cycle(&mut self, expressions: &[FormulaEntry], cycle: &[usize], span: Range<usize>) {
        let name = |at: usize| format!("`{}`", expressions[at].name.text);
        let mut chain: Vec<String> = cycle.iter().map(|at| name(*at)).collect();
        chain.push(name(cycle[0]));
        let message = format!("the expression {} is defined by itself", name(cycle[0]));
        self.complain(span, message, Some(format!("the circle is {}", chain.join(" uses "))));
    }

    fn resolve(&mut self, entry: &FormulaEntry, has_time: bool) -> Option<Meaning> {
        let scope = Names { known: &self.names, has_time, refused: None };
        match resolve(&mut self.graph, entry.syntax.as_ref()?, &scope) {
            Ok(meaning) => Some(meaning),
            Err(error) => {
                self.complain(entry.formula.place(&error.span), error.message, error.help);
                None
            }
        }
    }

    fn rate_nodes(&mut self, states: &[State], rates: &[FormulaEntry], has_time: bool) -> Vec<NodeId> {
        let index = by_name(rates);
        let mut nodes = Vec::new();
        for state in states {
            let rate = index.get(state.name.as_str()).map(|at| &rates[*at]);
            nodes.extend(rate.and_then(|rate| self.resolve(rate, has_time)).map(|meaning| meaning.node));
        }
        nodes
    }

    fn check_rate_names(&mut self, states: &[State], rates: &[FormulaEntry], known_errors: usize) {
        let state_names = || states.iter().map(|state| state.name.as_str());
        let known: HashSet<&str> = state_names().collect();
        let index = by_name(rates);
        for (at, rate) in rates.iter().enumerate() {
            let name = &rate.name.text;
            if !known.contains(name.as_str()) {
                let help = match nearest_name(name, state_names()) {
                    Some(near) => format!("did you mean `{near}`?"),
                    None => "declare it under `states`, or move the formula to `expressions`".to_owned(),
                };
                self.complain(rate.name.whole(), format!("`{name}` has a rate but is not a state"), Some(help));
            } else if index[name.as_str()] < at {
                self.complain(
                    rate.name.whole(),
                    format!("the rate of `{name}` is given twice"),
                    Some("keep one of them".to_owned()),
                );
            }
        }
        // A misspelt or unreadable rate is the cause where there is one.
        if self.errors.len() > known_errors {
            return;
        }
        for (at, state) in states.iter().enumerate() {
            if !index.contains_key(state.name.as_str()) {
                let span = self.state_places[at].clone();
                let name = &state.name;
                let help = format!("add `\"{name}\": \"…\"` under `rates`");
                self.complain(span, format!("the state `{name}` has no rate"), Some(help));
            }
        }
    }

    fn forcing(&mut self, raw: &RawValue, parameters: &[Parameter]) -> Option<(NodeId, Located)> {
        let formula = self.located(raw, "a formula in quotes or a number")?;
        let syntax = self.syntax(&formula)?;
        let entry = FormulaEntry { name: formula.clone(), formula, syntax: Some(syntax) };
        let node = self.resolve(&entry, true)?.node;
        let located = entry.formula;
        let is_parameter = |id: &NodeId| match self.graph.node(*id) {
            Node::Variable(variable) => matches!(variable, Variable::Parameter(_)),
            _ => true,
        };
        if !self.graph.reachable(&[node]).iter().all(is_parameter) {
            self.complain(
                located.whole(),
                "the period of the forcing depends on a state or on the time".to_owned(),
                Some("it may depend on parameters only".to_owned()),
            );
            return None;
        }
        let value = |variable| match variable {
            Variable::Parameter(index) => parameters[index as usize].value,
            _ => f64::NAN,
        };
        let period = crate::evaluate::evaluate(&self.graph, &[node], value)[0];
        if self.errors.is_empty() && !(period.is_finite() && period > 0.0) {
            self.complain(
                located.whole(),
                format!("the period of the forcing is {period} with the values of this file"),
                Some("it must be positive and finite".to_owned()),
            );
        }
        Some((node, located))
    }

    fn check_time_is_used(&mut self, rates: &[NodeId], period: &Located) {
        let is_time = |id: &NodeId| self.graph.node(*id) == Node::Variable(Variable::Time);
        if self.errors.is_empty() && !self.graph.reachable(rates).iter().any(is_time) {
            self.complain(
                period.whole(),
                "the model has `forcing`, but no rate uses the time `t`".to_owned(),
                Some("remove `forcing`, or use `t` in a rate".to_owned()),
            );
        }
    }

    fn kinks<'b>(&self, entries: impl Iterator<Item = &'b FormulaEntry>) -> Vec<Kink> {
        let mut kinks = Vec::new();
        for entry in entries {
            for (part, _) in entry.syntax.iter().flat_map(|syntax| &syntax.parts) {
                let Part::Call(function, span, _) = part else { continue };
                if function_named(function).is_some_and(|known| known.has_kinks()) {
                    let place = Diagnostic::new(self.source, entry.formula.place(span), "");
                    kinks.push(Kink {
                        function: function.clone(),
                        formula: entry.name.text.clone(),
                        line: place.line,
                        column: place.column,
                    });
                }
            }
        }
        kinks.sort_by_key(|kink| (kink.line, kink.column));
        kinks
    }
}

/// Index of the first entry of each name.
fn by_name(entries: &[FormulaEntry]) -> HashMap<&str, usize> {
    entries.iter().enumerate().rev().map(|(at, entry)| (entry.name.text.as_str(), at)).collect()
}

fn used_expressions(entry: &FormulaEntry, index: &HashMap<&str, usize>) -> Vec<(usize, Range<usize>)> {
    let parts = entry.syntax.iter().flat_map(|syntax| &syntax.parts);
    parts
        .filter_map(|(part, span)| match part {
            Part::Name(name) => index.get(name.as_str()).map(|used| (*used, span.clone())),
            _ => None,
        })
        .collect()
}
