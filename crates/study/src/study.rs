//! A study that has been read and checked against its model.

use std::ops::Range;
use std::path::{Path, PathBuf};

use armilla_figure::{Figure, Measure};
use armilla_model::{Diagnostic, Model, Source, nearest_name};
use armilla_record::{Samples, read_samples};
use ron::extensions::Extensions;

use crate::error::StudyError;
use crate::file::{Start, StudyFile, Values};

/// Accepted accuracies: finer ones drown in the roundoff of 64-bit numbers, coarser ones do not find cycles.
const ACCURACY: (f64, f64) = (1e-13, 1e-2);
/// Intervals per turn an override may ask for: fewer alias the error estimate, more fill the memory.
const INTERVALS: (usize, usize) = (4, 20_000);
/// Degrees an override may ask for.
const DEGREES: (usize, usize) = (3, 8);

/// A study with its model.
#[derive(Clone, Debug)]
pub struct Study {
    /// What the file says, with defaults, figures and range order settled.
    pub file: StudyFile,
    /// Path of the study file.
    pub path: PathBuf,
    /// The model.
    pub model: Model,
    /// Values of all parameters for following: the model's and those of `set`.
    pub parameters: Vec<f64>,
    /// Values of all parameters while settling.
    pub start_parameters: Vec<f64>,
    /// Index of the followed parameter.
    pub free: usize,
    /// The asked range, ascending.
    pub range: (f64, f64),
    /// The samples to start from, where the study does.
    pub samples: Option<Samples>,
}

impl Study {
    /// Reads a study and the model it names.
    ///
    /// # Errors
    /// [`StudyError`] with the place of the first error.
    pub fn read(path: impl AsRef<Path>) -> Result<Self, StudyError> {
        let path = path.as_ref();
        let text = std::fs::read_to_string(path)
            .map_err(|source| StudyError::Unreadable { path: path.to_path_buf(), source })?;
        let shown = path.display().to_string();
        let file = parse(Source { file: &shown, text: &text })?;
        let model_path = path.parent().unwrap_or(Path::new("")).join(&file.model);
        if !model_path.is_file() {
            let place = Place { source: Source { file: &shown, text: &text } };
            let message = format!("there is no model file `{}`", model_path.display());
            return Err(place
                .error("model", &file.model, message)
                .with_help("the path is relative to the study file")
                .into());
        }
        let model = Model::read(&model_path)?;
        Self::check(file, path.to_path_buf(), model, Source { file: &shown, text: &text })
    }

    /// A study of a model that is at hand already, as one coded in Rust is: `text` is that of a study file, whose `model` is
    /// a name only; `path` is where such a file would lie, results go beside it.
    ///
    /// # Errors
    /// [`StudyError`] with the place of the first error.
    pub fn of_model(text: &str, path: impl AsRef<Path>, model: Model) -> Result<Self, StudyError> {
        let shown = path.as_ref().display().to_string();
        let source = Source { file: &shown, text };
        let file = parse(source)?;
        Self::check(file, path.as_ref().to_path_buf(), model, source)
    }

    fn check(mut file: StudyFile, path: PathBuf, model: Model, source: Source<'_>) -> Result<Self, StudyError> {
        let place = Place { source };
        place.numbers(&file)?;
        let free = place.parameter(&model, "follow", &file.follow.parameter)?;
        let mut parameters = model.values();
        place.set(&model, "set", &file.set, &mut parameters)?;
        let mut start_parameters = parameters.clone();
        if let Start::Settle { at, .. } = &file.start {
            place.set(&model, "at", at, &mut start_parameters)?;
            place.only_followed_differs(&model, free, (&parameters, &start_parameters), at)?;
        }
        if let Start::Equilibrium { near } = &file.start {
            place.states(&model, near)?;
        }
        let range = (file.follow.from.min(file.follow.to), file.follow.from.max(file.follow.to));
        place.start_in_range(&file, start_parameters[free], range)?;
        place.forcing(&model, &file, (&parameters, free), range)?;
        let samples = samples(&file, &path, &model)?;
        if file.figures.is_empty() {
            file.figures.push(Figure::diagram(Measure::Max(model.states()[0].name.clone())));
        }
        place.figures(&model, &file.figures)?;
        place.targets(&file, range)?;
        Ok(Self { file, path, model, parameters, start_parameters, free, range, samples })
    }

    /// Name of the results folder beside the study.
    pub fn results_folder(&self) -> PathBuf {
        let name = self.path.file_name().map(|name| name.to_string_lossy().into_owned()).unwrap_or_default();
        let stem = name.strip_suffix(".study.ron").or_else(|| name.strip_suffix(".ron")).unwrap_or(&name);
        self.path.with_file_name(format!("{stem}.results"))
    }

    /// The study as it was understood, as the text of a study file.
    pub fn understood(&self) -> String {
        let pretty = ron::ser::PrettyConfig::new().extensions(Extensions::IMPLICIT_SOME).struct_names(false);
        let text = ron::ser::to_string_pretty(&self.file, pretty).expect("a study has no part that RON cannot write");
        format!(
            "// understood by armilla {} from {}\n// model fingerprint {}\n{text}\n",
            env!("CARGO_PKG_VERSION"),
            self.path.display(),
            self.model.fingerprint()
        )
    }
}

/// The samples a study starts from; none where it starts otherwise.
fn samples(file: &StudyFile, path: &Path, model: &Model) -> Result<Option<Samples>, StudyError> {
    let Start::Samples { file: table, .. } = &file.start else { return Ok(None) };
    let names: Vec<&str> = model.states().iter().map(|state| state.name.as_str()).collect();
    let path = path.parent().unwrap_or(Path::new("")).join(table);
    Ok(Some(read_samples(&path, &names)?))
}

/// Reads the text of a study file.
///
/// # Errors
/// A diagnostic with its place.
pub fn parse(source: Source<'_>) -> Result<StudyFile, Diagnostic> {
    let options = ron::Options::default().with_default_extension(Extensions::IMPLICIT_SOME);
    options.from_str(source.text).map_err(|error| Diagnostic::from_ron(source, &error))
}

/// Finds places in the text for errors that only show against the model.
struct Place<'a> {
    source: Source<'a>,
}

impl Place<'_> {
    /// The span of `token` after the first `key` field, else of the key, else of the whole text's start.
    fn span(&self, key: &str, token: &str) -> Range<usize> {
        let text = self.source.text;
        let field = text.match_indices(key).find(|(at, _)| text[at + key.len()..].trim_start().starts_with(':'));
        let Some((start, _)) = field else { return 0..1 };
        match text[start + key.len()..].find(token) {
            Some(offset) if !token.is_empty() => {
                let at = start + key.len() + offset;
                at..at + token.len()
            }
            _ => start..start + key.len(),
        }
    }

    fn error(&self, key: &str, token: &str, message: impl Into<String>) -> Diagnostic {
        Diagnostic::new(self.source, self.span(key, token), message)
    }

    fn parameter(&self, model: &Model, key: &str, name: &str) -> Result<usize, Diagnostic> {
        model.parameter_index(name).ok_or_else(|| {
            let names: Vec<&str> = model.parameters().iter().map(|parameter| parameter.name.as_str()).collect();
            let help = match nearest_name(name, names.iter().copied()) {
                Some(near) => format!("did you mean `{near}`?"),
                None => format!("the model's parameters are {}", names.join(", ")),
            };
            self.error(key, name, format!("the model has no parameter `{name}`")).with_help(help)
        })
    }

    fn set(&self, model: &Model, key: &str, values: &Values, parameters: &mut [f64]) -> Result<(), Diagnostic> {
        for (name, value) in &values.0 {
            let index = self.parameter(model, key, name)?;
            if !value.is_finite() {
                return Err(self.error(key, name, format!("the value of `{name}` is not finite")));
            }
            parameters[index] = *value;
        }
        Ok(())
    }

    /// Checks names and values of `near`.
    fn states(&self, model: &Model, near: &Values) -> Result<(), Diagnostic> {
        let names: Vec<&str> = model.states().iter().map(|state| state.name.as_str()).collect();
        for (name, value) in &near.0 {
            if !names.contains(&name.as_str()) {
                let help = match nearest_name(name, names.iter().copied()) {
                    Some(near) => format!("did you mean `{near}`?"),
                    None => format!("the model's states are {}", names.join(", ")),
                };
                return Err(self.error("near", name, format!("the model has no state `{name}`")).with_help(help));
            }
            if !value.is_finite() {
                return Err(self.error("near", name, format!("the value of `{name}` is not finite")));
            }
        }
        Ok(())
    }

    fn only_followed_differs(
        &self,
        model: &Model,
        free: usize,
        (follow, start): (&[f64], &[f64]),
        at: &Values,
    ) -> Result<(), Diagnostic> {
        for (index, parameter) in model.parameters().iter().enumerate() {
            if index != free && follow[index] != start[index] {
                let name = &parameter.name;
                let message =
                    format!("`{name}` is {} while settling but {} while following", start[index], follow[index]);
                let help = format!(
                    "put `{name}` into `set`; `at` is for the followed parameter `{}`",
                    model.parameters()[free].name
                );
                debug_assert!(at.0.contains_key(name));
                return Err(self.error("at", name, message).with_help(help));
            }
        }
        Ok(())
    }

    fn numbers(&self, file: &StudyFile) -> Result<(), Diagnostic> {
        let follow = &file.follow;
        if !((follow.to - follow.from).is_finite() && follow.from != follow.to) {
            return Err(self.error("follow", "", "the range must have two different finite ends `from` and `to`"));
        }
        if !(file.accuracy >= ACCURACY.0 && file.accuracy <= ACCURACY.1) {
            let message =
                format!("the accuracy {:e} must lie between {:e} and {:e}", file.accuracy, ACCURACY.0, ACCURACY.1);
            return Err(self.error("accuracy", "", message));
        }
        if let Start::Settle { transient: Some(transient), .. } = file.start
            && !(transient.is_finite() && transient >= 0.0)
        {
            return Err(self.error("transient", "", "the transient must be a finite time, 0 or more"));
        }
        if let Start::Samples { period: Some(period), .. } = file.start
            && !(period.is_finite() && period > 0.0)
        {
            let help = "leave it out to have it estimated from the samples";
            return Err(self.error("period", "", "the period must be a finite time above 0").with_help(help));
        }
        if file.pursue.branches == 0 || file.pursue.points == 0 {
            return Err(self.error("pursue", "", "`branches` and `points` must be at least 1"));
        }
        if let Some(degree) = file.mesh.and_then(|mesh| mesh.degree)
            && !(DEGREES.0..=DEGREES.1).contains(&degree)
        {
            let message = format!("the degree {degree} must lie between {} and {}", DEGREES.0, DEGREES.1);
            return Err(self.error("degree", "", message));
        }
        if let Some(intervals) = file.mesh.and_then(|mesh| mesh.intervals)
            && !(INTERVALS.0..=INTERVALS.1).contains(&intervals)
        {
            let message = format!("a mesh has {} to {} intervals per turn, not {intervals}", INTERVALS.0, INTERVALS.1);
            return Err(self.error("intervals", "", message));
        }
        self.strides(file)
    }

    fn strides(&self, file: &StudyFile) -> Result<(), Diagnostic> {
        let Some(stride) = file.stride else { return Ok(()) };
        let mut settings = armilla_follow::Settings::new((0.0, 1.0));
        crate::settings::override_strides(&mut settings, stride);
        settings.validate().map_err(|fault| self.error("stride", fault.field, fault.to_string()))
    }

    fn start_in_range(&self, file: &StudyFile, value: f64, (low, high): (f64, f64)) -> Result<(), Diagnostic> {
        if value >= low && value <= high {
            return Ok(());
        }
        let name = &file.follow.parameter;
        let message = format!("the start has `{name}` = {value}, outside the asked range from {low} to {high}");
        let help = match &file.start {
            Start::Settle { .. } => {
                format!("widen `follow`, or start inside it: start: Settle(at: {{ \"{name}\": ... }})")
            }
            _ => format!("widen `follow`, or give the value of the start: set: {{ \"{name}\": ... }}"),
        };
        Err(self.error("follow", "from", message).with_help(help))
    }

    /// The rates must repeat with the period of the forcing wherever the study goes.
    fn forcing(
        &self,
        model: &Model,
        file: &StudyFile,
        (parameters, free): (&[f64], usize),
        (low, high): (f64, f64),
    ) -> Result<(), Diagnostic> {
        /// Shares of the range looked at: both ends, and places between that no whole numbers relate.
        const SHARES: [f64; 5] = [0.0, 1.0, 0.618_033_988_749_894_8, 0.236_067_977_499_789_7, 0.854_101_966_249_684_5];
        if model.forcing().is_none() {
            return Ok(());
        }
        if let Start::Equilibrium { .. } = file.start {
            let help = "start on its motion: start: Settle(at: { ... })";
            return Err(self.error("start", "Equilibrium", "a forced model has no states of rest").with_help(help));
        }
        for share in SHARES {
            let mut parameters = parameters.to_vec();
            parameters[free] = low + share * (high - low);
            if let Err(fault) = model.check_forcing(&parameters) {
                let message = format!("at `{}` = {}: {fault}", file.follow.parameter, parameters[free]);
                return Err(self.error("follow", &file.follow.parameter, message).with_help(fault.help()));
            }
        }
        Ok(())
    }

    fn targets(&self, file: &StudyFile, (low, high): (f64, f64)) -> Result<(), Diagnostic> {
        match file.targets.iter().find(|target| !(**target >= low && **target <= high)) {
            Some(target) => {
                let message = format!("the target {target} lies outside the asked range from {low} to {high}");
                Err(self.error("targets", "", message))
            }
            None => Ok(()),
        }
    }

    fn figures(&self, model: &Model, figures: &[Figure]) -> Result<(), Diagnostic> {
        if let Some(fault) = figures.iter().find_map(|figure| figure.check().err()) {
            return Err(self.error("figures", "", fault.to_string()));
        }
        let states: Vec<&str> = model.states().iter().map(|state| state.name.as_str()).collect();
        let asked = figures.iter().flat_map(|figure| match figure {
            Figure::Diagram(diagram) => diagram.measure.state().into_iter().collect::<Vec<_>>(),
            Figure::Portrait(portrait) => portrait.axes.iter().map(String::as_str).collect(),
        });
        for name in asked {
            if !states.contains(&name) {
                let help = match nearest_name(name, states.iter().copied()) {
                    Some(near) => format!("did you mean `{near}`?"),
                    None => format!("the model's states are {}", states.join(", ")),
                };
                return Err(self.error("figures", name, format!("the model has no state `{name}`")).with_help(help));
            }
        }
        Ok(())
    }
}
