//! From the syntax of a formula to the graph: names, functions and constants are checked here.

use std::collections::HashMap;

use crate::diagnostic::nearest_name;
use crate::function::{Binary, Callable, FUNCTIONS, function_named};
use crate::graph::{Graph, NodeId, Variable};
use crate::ratio::safe_quotient;
use crate::scalar::{binary_f64, unary_f64};
use crate::syntax::{Operator, Part, PartId, Syntax, SyntaxError};

/// A formula, or a name for one, in the graph.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Meaning {
    pub node: NodeId,
    /// Its value, if no variable enters.
    pub constant: Option<f64>,
}

/// What the names of a formula stand for.
pub(crate) struct Names<'a> {
    /// Names that may be used, with what they stand for.
    pub known: &'a HashMap<String, Meaning>,
    /// Whether `t` is the time.
    pub has_time: bool,
    /// Why a name that exists elsewhere in the file may not be used here.
    pub refused: Option<&'a str>,
}

/// Builds the formula in the graph.
pub(crate) fn resolve(graph: &mut Graph, syntax: &Syntax, names: &Names<'_>) -> Result<Meaning, SyntaxError> {
    let mut nodes: Vec<NodeId> = Vec::with_capacity(syntax.parts.len());
    // The value of every part that no variable enters, to catch numbers that are not finite.
    let mut constants: Vec<Option<f64>> = Vec::with_capacity(syntax.parts.len());
    for id in 0..syntax.parts.len() {
        let node = build_part(graph, syntax, id, &nodes, names)?;
        let constant = constant_of(syntax, id, names, &constants);
        check_finite(syntax, id, constant, &constants)?;
        nodes.push(node);
        constants.push(constant);
    }
    let node = *nodes.last().expect("a parsed formula has a part");
    Ok(Meaning { node, constant: constants.last().copied().flatten() })
}

fn build_part(
    graph: &mut Graph,
    syntax: &Syntax,
    id: PartId,
    nodes: &[NodeId],
    names: &Names<'_>,
) -> Result<NodeId, SyntaxError> {
    let (part, span) = &syntax.parts[id];
    let fail = |message: String, help: Option<String>| SyntaxError { span: span.clone(), message, help };
    match part {
        Part::Number(number) => Ok(graph.decimal(number.clone())),
        Part::Name(name) => name_node(graph, name, names).map_err(|(message, help)| fail(message, help)),
        Part::Negate(a) => Ok(graph.negate(nodes[*a])),
        Part::Operation(operator, a, b) => {
            let (a, b) = (nodes[*a], nodes[*b]);
            Ok(match operator {
                Operator::Add => graph.add(a, b),
                Operator::Subtract => graph.subtract(a, b),
                Operator::Multiply => {
                    let product = graph.multiply(a, b);
                    safe_quotient(graph, product)
                }
                Operator::Divide => {
                    let quotient = graph.divide(a, b);
                    safe_quotient(graph, quotient)
                }
                Operator::Power => graph.binary(Binary::PowerLog(0), a, b),
            })
        }
        Part::Call(name, name_span, arguments) => {
            let function = callable(name, arguments.len(), names).map_err(|(message, help)| SyntaxError {
                span: name_span.clone(),
                message,
                help,
            })?;
            let arguments: Vec<NodeId> = arguments.iter().map(|a| nodes[*a]).collect();
            Ok(match function {
                Callable::One(function) => graph.unary(function, arguments[0]),
                Callable::Two(function) => graph.binary(function, arguments[0], arguments[1]),
            })
        }
    }
}

type Trouble = (String, Option<String>);

fn name_node(graph: &mut Graph, name: &str, names: &Names<'_>) -> Result<NodeId, Trouble> {
    if let Some(meaning) = names.known.get(name) {
        return Ok(meaning.node);
    }
    if name == "pi" {
        return Ok(graph.pi());
    }
    if name == "t" {
        if names.has_time {
            return Ok(graph.variable(Variable::Time));
        }
        if names.refused.is_none() {
            return Err((
                "the time `t` is used, but the model has no `forcing`".to_owned(),
                Some("add `forcing: (period: …)` to the file, or use another name".to_owned()),
            ));
        }
    }
    if let Some(refused) = names.refused {
        return Err((format!("`{name}` cannot be used here"), Some(refused.to_owned())));
    }
    if let Some(function) = function_named(name) {
        let arguments = if function.arity() == 1 { "x" } else { "x, y" };
        return Err((
            format!("`{name}` is a function and needs its arguments"),
            Some(format!("write `{name}({arguments})`")),
        ));
    }
    let near = nearest_name(name, known_names(names));
    Err((
        format!("`{name}` is not declared"),
        Some(near.map_or_else(
            || "declare it under `parameters` or `expressions`".to_owned(),
            |near| format!("did you mean `{near}`?"),
        )),
    ))
}

fn known_names<'a>(names: &'a Names<'_>) -> Vec<&'a str> {
    let mut all: Vec<&str> = names.known.keys().map(String::as_str).collect();
    // The map has no order of its own; the suggestion must not depend on chance.
    all.sort_unstable();
    all.push("pi");
    if names.has_time {
        all.push("t");
    }
    all
}

fn callable(name: &str, given: usize, names: &Names<'_>) -> Result<Callable, Trouble> {
    let Some(function) = function_named(name) else {
        return Err(not_a_function(name, names));
    };
    if function.arity() == given {
        return Ok(function);
    }
    let wanted = if function.arity() == 1 { "one argument" } else { "two arguments" };
    Err((format!("`{name}` takes {wanted}, not {given}"), None))
}

fn not_a_function(name: &str, names: &Names<'_>) -> Trouble {
    let message = format!("`{name}` is not a function");
    if names.known.contains_key(name) || name == "pi" {
        return (message, Some(format!("write a product with `*`, as in `{name} * (…)`")));
    }
    if name == "ln" {
        return (message, Some("the natural logarithm is `log`".to_owned()));
    }
    let all = FUNCTIONS.iter().map(|(known, _)| *known);
    let help = match nearest_name(name, all.clone()) {
        Some(near) => format!("did you mean `{near}`?"),
        None => format!("the functions are {}", all.collect::<Vec<_>>().join(", ")),
    };
    (message, Some(help))
}

/// Value of a part that no variable enters.
fn constant_of(syntax: &Syntax, id: PartId, names: &Names<'_>, constants: &[Option<f64>]) -> Option<f64> {
    match &syntax.parts[id].0 {
        Part::Number(number) => Some(number.to_f64()),
        Part::Name(name) if name == "pi" => Some(std::f64::consts::PI),
        Part::Name(name) => names.known.get(name)?.constant,
        Part::Negate(a) => constants[*a].map(|a| -a),
        Part::Operation(operator, a, b) => {
            let (a, b) = (constants[*a]?, constants[*b]?);
            Some(match operator {
                Operator::Add => a + b,
                Operator::Subtract => a - b,
                Operator::Multiply => a * b,
                Operator::Divide => a / b,
                Operator::Power => a.powf(b),
            })
        }
        Part::Call(name, _, arguments) => {
            let first = constants[*arguments.first()?]?;
            match function_named(name)? {
                Callable::One(function) => Some(unary_f64(function, first)),
                Callable::Two(function) => Some(binary_f64(function, first, constants[*arguments.get(1)?]?)),
            }
        }
    }
}

fn check_finite(
    syntax: &Syntax,
    id: PartId,
    constant: Option<f64>,
    constants: &[Option<f64>],
) -> Result<(), SyntaxError> {
    let (part, span) = &syntax.parts[id];
    if let Part::Operation(Operator::Divide, _, b) = part
        && constants[*b] == Some(0.0)
    {
        return Err(SyntaxError { span: span.clone(), message: "this divides by zero".to_owned(), help: None });
    }
    match constant {
        Some(value) if !value.is_finite() => Err(SyntaxError {
            span: span.clone(),
            message: format!("this constant is not a finite number (it gives {value})"),
            help: None,
        }),
        _ => Ok(()),
    }
}
