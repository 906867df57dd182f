//! Writes RON text that stays readable with long lists of numbers in it.
//!
//! Numbers take their shortest decimal form that reads back to the same 64 bits. Short lists stay on
//! their line, longer ones are wrapped. One pen writes a file of many lines or a single line (for a
//! journal).

use std::io::{self, Write};

/// Numbers on one line of a list. With up to 24 characters a number that is at most 150 characters,
/// what an editor shows without wrapping.
const PER_LINE: usize = 6;

/// Whether line breaks are written.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Layout {
    /// One field a line, indented.
    Lines,
    /// No line break at all.
    OneLine,
}

/// Where text goes, and how deep it is nested.
pub(crate) struct Pen<'a> {
    out: &'a mut dyn Write,
    layout: Layout,
    depth: usize,
}

impl<'a> Pen<'a> {
    pub(crate) fn new(out: &'a mut dyn Write, layout: Layout) -> Self {
        Self { out, layout, depth: 0 }
    }

    /// Text as it is.
    pub(crate) fn raw(&mut self, text: &str) -> io::Result<()> {
        self.out.write_all(text.as_bytes())
    }

    /// Opens a bracket; what follows is one step deeper.
    pub(crate) fn open(&mut self, bracket: &str) -> io::Result<()> {
        self.depth += 1;
        self.raw(bracket)
    }

    /// Ends the last line of a bracket and closes it.
    pub(crate) fn close(&mut self, bracket: &str) -> io::Result<()> {
        self.depth -= 1;
        self.line()?;
        self.raw(bracket)
    }

    /// Begins a line.
    pub(crate) fn line(&mut self) -> io::Result<()> {
        const INDENT: &str = "                                ";
        match self.layout {
            Layout::OneLine => self.raw(" "),
            Layout::Lines => {
                self.raw("\n")?;
                self.raw(&INDENT[..(4 * self.depth).min(INDENT.len())])
            }
        }
    }

    /// Begins a line with the name of a field.
    pub(crate) fn field(&mut self, name: &str) -> io::Result<()> {
        self.line()?;
        self.name(name)
    }

    /// The name of a field, on the line begun.
    pub(crate) fn name(&mut self, name: &str) -> io::Result<()> {
        write!(self.out, "{name}: ")
    }

    /// A number; `Debug` is the shortest form that reads back to the same bits.
    pub(crate) fn float(&mut self, value: f64) -> io::Result<()> {
        write!(self.out, "{value:?}")
    }

    /// A number that may be missing.
    pub(crate) fn optional(&mut self, value: Option<f64>) -> io::Result<()> {
        match value {
            Some(value) => write!(self.out, "Some({value:?})"),
            None => self.raw("None"),
        }
    }

    /// A count or an index.
    pub(crate) fn count(&mut self, value: usize) -> io::Result<()> {
        write!(self.out, "{value}")
    }

    /// The name of a variant; RON marks names with a hyphen as raw.
    pub(crate) fn variant(&mut self, word: &str) -> io::Result<()> {
        if word.contains('-') {
            self.raw("r#")?;
        }
        self.raw(word)
    }

    /// A text in quotes, never with a line break inside.
    pub(crate) fn text(&mut self, text: &str) -> io::Result<()> {
        self.raw("\"")?;
        for c in text.chars() {
            match c {
                '"' => self.raw("\\\"")?,
                '\\' => self.raw("\\\\")?,
                '\n' => self.raw("\\n")?,
                '\r' => self.raw("\\r")?,
                '\t' => self.raw("\\t")?,
                c if c.is_control() => write!(self.out, "\\u{{{:x}}}", u32::from(c))?,
                c => write!(self.out, "{c}")?,
            }
        }
        self.raw("\"")
    }

    /// Numbers, on this line if they are few. `group` belong together: no line begins inside a group
    /// that fits on one.
    pub(crate) fn floats(&mut self, values: &[f64], group: usize) -> io::Result<()> {
        if values.len() <= PER_LINE {
            self.raw("[")?;
            self.row(values)?;
            return self.raw("]");
        }
        let per_line = if (1..=PER_LINE).contains(&group) { PER_LINE / group * group } else { PER_LINE };
        self.open("[")?;
        for row in values.chunks(per_line) {
            self.line()?;
            self.row(row)?;
            self.raw(",")?;
        }
        self.close("]")
    }

    fn row(&mut self, values: &[f64]) -> io::Result<()> {
        for (k, value) in values.iter().enumerate() {
            let comma = if k == 0 { "" } else { ", " };
            write!(self.out, "{comma}{value:?}")?;
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn written(act: impl FnOnce(&mut Pen<'_>) -> io::Result<()>, layout: Layout) -> String {
        let mut out = Vec::new();
        act(&mut Pen::new(&mut out, layout)).expect("memory takes everything");
        String::from_utf8(out).expect("text")
    }

    /// Outside: the RON reader.
    #[test]
    fn hard_texts_and_numbers_read_back() {
        let text = "\"quoted\" \\ back\nline\r\ttab \u{0}\u{7f}\u{85} τ 温 /* no */ // comment";
        for layout in [Layout::Lines, Layout::OneLine] {
            let line = written(|pen| pen.text(text), layout);
            assert!(!line.contains('\n'));
            assert_eq!(ron::from_str::<String>(&line).expect("a text"), text);
        }
        let hard = [-0.0, 5e-324, f64::MAX, f64::MIN_POSITIVE, 0.1, 1e16, 1e22, 123456789.0, 1e-7, f64::NEG_INFINITY];
        let list = written(|pen| pen.floats(&hard, 3), Layout::Lines);
        let back: Vec<f64> = ron::from_str(&list).expect("a list");
        assert!(hard.iter().zip(&back).all(|(a, b)| a.to_bits() == b.to_bits()), "{list}");
    }

    #[test]
    fn groups_stay_on_one_line() {
        let values: Vec<f64> = (0..8).map(f64::from).collect();
        let list = written(|pen| pen.floats(&values, 4), Layout::Lines);
        assert_eq!(list, "[\n    0.0, 1.0, 2.0, 3.0,\n    4.0, 5.0, 6.0, 7.0,\n]");
        let line = written(|pen| pen.floats(&values, 4), Layout::OneLine);
        assert_eq!(line, "[ 0.0, 1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, ]");
    }
}
