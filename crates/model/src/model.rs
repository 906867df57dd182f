//! A model: names, units and values around a vector field.

use std::path::Path;
use std::sync::Arc;

use sha2::{Digest, Sha256};

use crate::compiled::CompiledField;
use crate::diagnostic::{Diagnostic, Source};
use crate::evaluate::evaluate;
use crate::field::VectorField;
use crate::graph::{Graph, NodeId, Variable};
use crate::scalar::Scalar;

/// A state of a model.
#[derive(Clone, Debug, PartialEq)]
pub struct State {
    /// Name in formulas and files.
    pub name: String,
    /// Value from which simulations begin, in `unit`.
    pub begin: f64,
    /// Unit, empty if none is given.
    pub unit: String,
    /// What figures show; the name if nothing else is given.
    pub label: String,
}

/// A parameter of a model.
#[derive(Clone, Debug, PartialEq)]
pub struct Parameter {
    /// Name in formulas and files.
    pub name: String,
    /// Value in the model file, in `unit`.
    pub value: f64,
    /// Unit, empty if none is given.
    pub unit: String,
    /// What figures show; the name if nothing else is given.
    pub label: String,
    /// One standard deviation, absolute, in `unit`.
    pub uncertainty: Option<f64>,
}

/// A formula of the file with what it defines.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Formula {
    /// Name of the expression, or of the state whose rate it is.
    pub name: String,
    /// The formula as written.
    pub text: String,
}

/// The period of a forced model, a formula of the parameters.
#[derive(Clone, Debug)]
pub struct Forcing {
    /// The formula as written.
    pub text: String,
    pub(crate) graph: Arc<Graph>,
    pub(crate) node: NodeId,
}

impl Forcing {
    /// The period for these parameters, over any scalar (dual numbers give its slopes).
    ///
    /// # Panics
    /// If there are fewer parameters than the model has.
    pub fn period<S: Scalar>(&self, parameters: &[S]) -> S {
        let value = |variable| match variable {
            Variable::Parameter(index) => parameters[index as usize].clone(),
            _ => S::from_f64(f64::NAN),
        };
        evaluate(&self.graph, &[self.node], value).swap_remove(0)
    }
}

/// A use of a function that has corners or jumps.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Kink {
    /// The function.
    pub function: String,
    /// The expression or rate in whose formula it stands.
    pub formula: String,
    /// Line of the file, from 1.
    pub line: usize,
    /// Column of the file in characters, from 1.
    pub column: usize,
}

/// What stops a model from being read.
#[derive(Debug)]
pub enum ModelError {
    /// The file could not be read.
    Unreadable {
        /// Its path.
        path: String,
        /// Why.
        error: std::io::Error,
    },
    /// Something in the file is wrong.
    Invalid(Box<Diagnostic>),
}

impl std::fmt::Display for ModelError {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Unreadable { path, error } => write!(f, "cannot read the model file `{path}`: {error}"),
            Self::Invalid(diagnostic) => diagnostic.fmt(f),
        }
    }
}

impl std::error::Error for ModelError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Self::Unreadable { error, .. } => Some(error),
            Self::Invalid(_) => None,
        }
    }
}

impl From<Diagnostic> for ModelError {
    fn from(diagnostic: Diagnostic) -> Self {
        Self::Invalid(Box::new(diagnostic))
    }
}

/// What a Rust-coded model declares besides its rates.
#[derive(Clone, Debug)]
pub struct Declaration {
    /// Title.
    pub title: String,
    /// States in the order of the field.
    pub states: Vec<State>,
    /// Parameters in the order of the field.
    pub parameters: Vec<Parameter>,
}

/// A model: what its file says, and its compiled field.
#[derive(Clone)]
pub struct Model {
    pub(crate) title: String,
    pub(crate) note: String,
    pub(crate) states: Vec<State>,
    pub(crate) parameters: Vec<Parameter>,
    pub(crate) expressions: Vec<Formula>,
    pub(crate) rates: Vec<Formula>,
    pub(crate) forcing: Option<Forcing>,
    pub(crate) kinks: Vec<Kink>,
    pub(crate) fingerprint: String,
    pub(crate) field: Arc<dyn VectorField>,
    /// The formulas, if the model comes from a file.
    pub(crate) compiled: Option<Arc<CompiledField>>,
    /// Nodes of the named expressions, for printing.
    pub(crate) named: Vec<(String, NodeId)>,
}

impl Model {
    /// Reads a model file.
    ///
    /// # Errors
    /// If the file cannot be read or something in it is wrong.
    pub fn read(path: impl AsRef<Path>) -> Result<Self, ModelError> {
        let path = path.as_ref();
        let unreadable = |error| ModelError::Unreadable { path: path.display().to_string(), error };
        let bytes = std::fs::read(path).map_err(unreadable)?;
        let text = String::from_utf8(bytes)
            .map_err(|error| unreadable(std::io::Error::new(std::io::ErrorKind::InvalidData, error.utf8_error())))?;
        Self::parse(&text, &path.display().to_string())
    }

    /// Reads a model from the text of a file; `file` is the name that errors show.
    ///
    /// # Errors
    /// If something in the text is wrong: the first error in the order of the file.
    pub fn parse(text: &str, file: &str) -> Result<Self, ModelError> {
        crate::read::read_model(Source { file, text }).map_err(ModelError::from)
    }

    /// A model around a field that is coded in Rust.
    ///
    /// # Panics
    /// If the numbers of states or parameters differ from those of the field.
    pub fn coded(declaration: Declaration, field: Arc<dyn VectorField>) -> Self {
        let Declaration { title, states, parameters } = declaration;
        assert_eq!(states.len(), field.n_states(), "declared states and states of the field");
        assert_eq!(parameters.len(), field.n_parameters(), "declared parameters and those of the field");
        let fingerprint = fingerprint(&format!("{title}\n{states:?}\n{parameters:?}"));
        Self {
            title,
            note: String::new(),
            states,
            parameters,
            expressions: Vec::new(),
            rates: Vec::new(),
            forcing: None,
            kinks: Vec::new(),
            fingerprint,
            field,
            compiled: None,
            named: Vec::new(),
        }
    }

    /// Title; empty if the file has none.
    pub fn title(&self) -> &str {
        &self.title
    }

    /// Note; empty if the file has none.
    pub fn note(&self) -> &str {
        &self.note
    }

    /// States in the order of the file.
    pub fn states(&self) -> &[State] {
        &self.states
    }

    /// Parameters in the order of the file.
    pub fn parameters(&self) -> &[Parameter] {
        &self.parameters
    }

    /// Named expressions in the order of the file.
    pub fn expressions(&self) -> &[Formula] {
        &self.expressions
    }

    /// Rates as written, in the order of the states; empty for a Rust-coded model.
    pub fn rates(&self) -> &[Formula] {
        &self.rates
    }

    /// The forcing of a model whose rates use the time.
    pub fn forcing(&self) -> Option<&Forcing> {
        self.forcing.as_ref()
    }

    /// Uses of `abs`, `min`, `max` and `floor`, in the order of the file.
    pub fn kinks(&self) -> &[Kink] {
        &self.kinks
    }

    /// SHA-256 of the text of the file, in hexadecimal.
    pub fn fingerprint(&self) -> &str {
        &self.fingerprint
    }

    /// The vector field.
    pub fn field(&self) -> Arc<dyn VectorField> {
        Arc::clone(&self.field)
    }

    /// The formulas behind the field; none for a Rust-coded model.
    pub fn compiled(&self) -> Option<&CompiledField> {
        self.compiled.as_deref()
    }

    /// Index of the state called `name`.
    pub fn state_index(&self, name: &str) -> Option<usize> {
        self.states.iter().position(|state| state.name == name)
    }

    /// Index of the parameter called `name`.
    pub fn parameter_index(&self, name: &str) -> Option<usize> {
        self.parameters.iter().position(|parameter| parameter.name == name)
    }

    /// Values of the states from which simulations begin.
    pub fn begin(&self) -> Vec<f64> {
        self.states.iter().map(|state| state.begin).collect()
    }

    /// Values of the parameters in the file.
    pub fn values(&self) -> Vec<f64> {
        self.parameters.iter().map(|parameter| parameter.value).collect()
    }
}

impl std::fmt::Debug for Model {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Model")
            .field("title", &self.title)
            .field("states", &self.states)
            .field("parameters", &self.parameters)
            .finish_non_exhaustive()
    }
}

/// SHA-256 of a text, in hexadecimal.
pub(crate) fn fingerprint(text: &str) -> String {
    Sha256::digest(text.as_bytes()).iter().map(|byte| format!("{byte:02x}")).collect()
}
