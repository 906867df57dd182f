//! Samples of a motion, measured or simulated, from a table.
//!
//! A table as in RFC 4180: one line of names, then numbers. The column `t` is the time, the others are found by the names of
//! the states, in any order; further columns are left alone and named. Lines that begin with `#` are remarks.

use std::path::Path;

/// Samples in ascending order of time.
#[derive(Clone, Debug, PartialEq)]
pub struct Samples {
    /// Times, M numbers.
    pub times: Vec<f64>,
    /// States in the order asked for, M n numbers, sample by sample.
    pub states: Vec<f64>,
    /// Columns of the table that were not asked for.
    pub ignored: Vec<String>,
}

/// What is wrong with a table of samples: where, what, and the way out.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct SamplesError {
    /// The table.
    pub file: String,
    /// Line, from 1; none where it is the file itself.
    pub line: Option<u64>,
    /// What is wrong.
    pub message: String,
    /// What to do about it.
    pub help: String,
}

impl std::fmt::Display for SamplesError {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self.line {
            Some(line) => write!(f, "{}:{line}: {}", self.file, self.message)?,
            None => write!(f, "{}: {}", self.file, self.message)?,
        }
        write!(f, "\n    help: {}", self.help)
    }
}

impl std::error::Error for SamplesError {}

/// Name of the column of times.
const TIME: &str = "t";
/// Fewest samples of a motion: fewer cannot tell a cycle from a straight line and back.
const FEWEST: usize = 8;

/// Reads a table of samples with a column for the time and for each of `states`.
///
/// # Errors
/// [`SamplesError`] with the line.
pub fn read_samples(path: &Path, states: &[&str]) -> Result<Samples, SamplesError> {
    let file = path.display().to_string();
    let text = std::fs::read_to_string(path).map_err(|error| SamplesError {
        file: file.clone(),
        line: None,
        message: format!("the samples cannot be read: {error}"),
        help: "the path in `start: Samples(file: ...)` is relative to the study file; the file must be text".into(),
    })?;
    parse_samples(&text, &file, states)
}

/// The same from the text of a table.
///
/// # Errors
/// [`SamplesError`] with the line.
pub fn parse_samples(text: &str, file: &str, states: &[&str]) -> Result<Samples, SamplesError> {
    Table { file }.parse(text, states)
}

struct Table<'a> {
    file: &'a str,
}

impl Table<'_> {
    fn error(&self, line: impl Into<Option<u64>>, message: String, help: impl Into<String>) -> SamplesError {
        SamplesError { file: self.file.into(), line: line.into(), message, help: help.into() }
    }

    fn parse(&self, text: &str, states: &[&str]) -> Result<Samples, SamplesError> {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let mut reader = csv::ReaderBuilder::new()
            .comment(Some(b'#'))
            .trim(csv::Trim::All)
            .flexible(true)
            .from_reader(text.as_bytes());
        let header = reader.headers().cloned().map_err(|fault| self.broken(&fault))?;
        let names: Vec<&str> = header.iter().collect();
        let line = header.position().map_or(1, csv::Position::line);
        let columns = self.columns(&names, states, line)?;
        let asked = |name: &str| name == TIME || states.contains(&name);
        let ignored = names.iter().filter(|name| !asked(name)).map(ToString::to_string).collect();
        let mut samples = Samples { times: Vec::new(), states: Vec::new(), ignored };
        for record in reader.records() {
            let record = record.map_err(|fault| self.broken(&fault))?;
            self.row(&record, (&names, &columns), &mut samples)?;
        }
        if samples.times.len() < FEWEST {
            let message = format!("{} samples are too few to tell a cycle", samples.times.len());
            return Err(self.error(None, message, format!("give {FEWEST} at least, some dozen a turn are better")));
        }
        Ok(samples)
    }

    fn broken(&self, fault: &csv::Error) -> SamplesError {
        let line = fault.position().map(csv::Position::line);
        self.error(line, format!("the table cannot be read: {fault}"), "write numbers separated by commas")
    }

    /// Places of the time and of each state among the columns.
    fn columns(&self, names: &[&str], states: &[&str], line: u64) -> Result<Vec<usize>, SamplesError> {
        let help = "the first line names the columns: `t` and the states of the model, separated by commas";
        if let [only] = names
            && only.contains([';', '\t', ' '])
        {
            return Err(self.error(line, format!("the columns of `{only}` are not separated by commas"), help));
        }
        if !names.is_empty() && names.iter().all(|name| name.parse::<f64>().is_ok()) {
            return Err(self.error(line, "the line that names the columns is missing".into(), help));
        }
        if let Some(twice) = names.iter().enumerate().find(|(at, name)| names[..*at].contains(name)) {
            return Err(self.error(line, format!("the column `{}` is there twice", twice.1), "keep one of them"));
        }
        let place = |name: &str| names.iter().position(|column| *column == name);
        let missing: Vec<String> =
            states.iter().filter(|name| place(name).is_none()).map(|name| format!("`{name}`")).collect();
        let there: Vec<String> = names.iter().map(|name| format!("`{name}`")).collect();
        let there = there.join(", ");
        if !missing.is_empty() {
            let (noun, names) =
                if missing.len() == 1 { ("state", &missing[0]) } else { ("states", &missing.join(", ")) };
            let help = format!(
                "samples must hold every state of the model, in columns named as the states; the columns are {there}"
            );
            return Err(self.error(line, format!("the samples lack the {noun} {names}"), help));
        }
        let Some(time) = place(TIME) else {
            let help = format!("name the column of times `t`; the columns are {there}");
            return Err(self.error(line, "the samples lack the time `t`".into(), help));
        };
        Ok(std::iter::once(time).chain(states.iter().filter_map(|name| place(name))).collect())
    }

    fn row(
        &self,
        record: &csv::StringRecord,
        (names, columns): (&[&str], &[usize]),
        samples: &mut Samples,
    ) -> Result<(), SamplesError> {
        let line = record.position().map(csv::Position::line);
        if record.len() != names.len() {
            let message = format!("{} cells under {} columns", record.len(), names.len());
            return Err(self.error(line, message, "give every line as many cells as there are columns"));
        }
        let number = |column: usize| {
            let cell = &record[column];
            let value = cell.parse::<f64>().ok().filter(|value| value.is_finite());
            value.ok_or_else(|| {
                let message = format!("`{cell}` in the column `{}` is not a finite number", names[column]);
                self.error(line, message, "leave out lines with missing or bad values")
            })
        };
        let time = number(columns[0])?;
        if let Some(before) = samples.times.last().filter(|before| !(time > **before)) {
            let message = format!("the time {time} does not lie after the one before it, {before}");
            return Err(self.error(line, message, "sort the lines by `t`, and give each time once"));
        }
        samples.times.push(time);
        for column in &columns[1..] {
            samples.states.push(number(*column)?);
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn table(header: &str, rows: usize) -> String {
        let row = |k: usize| format!("{k},{},{}\n", k * k, 2 * k);
        format!("{header}\n{}", (0..rows).map(row).collect::<String>())
    }

    #[test]
    fn columns_are_found_by_name() {
        let text = format!("\u{feff}# measured on a Tuesday\n{}", table("t, extra ,x", 9));
        let samples = parse_samples(&text, "a.csv", &["x"]).expect("samples");
        assert_eq!(samples.times, (0..9).map(f64::from).collect::<Vec<_>>());
        assert_eq!(samples.states[3], 6.0);
        assert_eq!(samples.ignored, ["extra"]);
        let samples = parse_samples(&table("t,y,x", 9), "a.csv", &["x", "y"]).expect("samples");
        assert_eq!(samples.states[4..6], [4.0, 4.0]);
        assert!(samples.ignored.is_empty());
    }

    #[test]
    fn every_fault_has_its_line_and_a_way_out() {
        let good = table("t,x,y", 9);
        for (text, wanted) in [
            (good.replace("t,x,y", "t,u,v"), "a.csv:1: the samples lack the states `x`, `y`"),
            (good.replace("t,x,y", "t,x,z"), "a.csv:1: the samples lack the state `y`"),
            (good.replace("t,x,y", "time,x,y"), "a.csv:1: the samples lack the time `t`"),
            (good.replace("t,x,y", "t,x,x"), "a.csv:1: the column `x` is there twice"),
            (good.replace("t,x,y\n", ""), "a.csv:1: the line that names the columns is missing"),
            (good.replace(',', ";"), "a.csv:1: the columns of `t;x;y` are not separated by commas"),
            (good.replace("3,9,6", "3,nan,6"), "a.csv:5: `nan` in the column `x` is not a finite number"),
            (good.replace("3,9,6", "3,,6"), "a.csv:5: `` in the column `x` is not a finite number"),
            (good.replace("3,9,6", "3,9"), "a.csv:5: 2 cells under 3 columns"),
            (good.replace("3,9,6", "2,9,6"), "a.csv:5: the time 2 does not lie after the one before it, 2"),
            (table("t,x,y", 7), "a.csv: 7 samples are too few to tell a cycle"),
            (String::new(), "a.csv:1: the samples lack the states `x`, `y`"),
        ] {
            let error = parse_samples(&text, "a.csv", &["x", "y"]).expect_err("a fault").to_string();
            assert!(error.starts_with(wanted) && error.contains("\n    help: "), "{wanted}: {error}");
        }
    }
}
