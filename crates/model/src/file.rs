//! The shape of a model file, with the place of every name and value.

use std::fmt;
use std::marker::PhantomData;
use std::ops::Range;

use ron::Options;
use ron::extensions::Extensions;
use ron::value::RawValue;
use serde::Deserialize;
use serde::de::{Deserializer, Error as _, MapAccess, Visitor};

use crate::diagnostic::{Diagnostic, Source};

/// A model file as it is written.
#[derive(Deserialize)]
#[serde(rename = "model", deny_unknown_fields)]
pub(crate) struct ModelFile<'a> {
    #[serde(default)]
    pub title: String,
    #[serde(default)]
    pub note: String,
    #[serde(borrow)]
    pub states: States<'a>,
    #[serde(borrow, default)]
    pub parameters: Entries<'a, ParameterEntry<'a>>,
    #[serde(borrow, default)]
    pub expressions: Entries<'a, &'a RawValue>,
    #[serde(borrow)]
    pub rates: Entries<'a, &'a RawValue>,
    #[serde(borrow)]
    pub forcing: Option<ForcingEntry<'a>>,
}

#[derive(Deserialize)]
#[serde(rename = "state", deny_unknown_fields)]
pub(crate) struct StateEntry<'a> {
    #[serde(borrow)]
    pub begin: &'a RawValue,
    pub unit: Option<String>,
    pub label: Option<String>,
}

#[derive(Deserialize)]
#[serde(rename = "parameter", deny_unknown_fields)]
pub(crate) struct ParameterEntry<'a> {
    #[serde(borrow)]
    pub value: &'a RawValue,
    pub unit: Option<String>,
    pub label: Option<String>,
    #[serde(borrow)]
    pub uncertainty: Option<&'a RawValue>,
}

#[derive(Deserialize)]
#[serde(rename = "forcing", deny_unknown_fields)]
pub(crate) struct ForcingEntry<'a> {
    #[serde(borrow)]
    pub period: &'a RawValue,
}

/// A map in the order of the file; repeated keys are kept, so that their places can be shown.
pub(crate) struct Entries<'a, V>(pub Vec<(&'a RawValue, V)>);

impl<V> Default for Entries<'_, V> {
    fn default() -> Self {
        Self(Vec::new())
    }
}

impl<'de: 'a, 'a, V: Deserialize<'de>> Deserialize<'de> for Entries<'a, V> {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct EntriesVisitor<'a, V>(PhantomData<(&'a (), V)>);

        impl<'de: 'a, 'a, V: Deserialize<'de>> Visitor<'de> for EntriesVisitor<'a, V> {
            type Value = Entries<'a, V>;

            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a map { \"name\": … }")
            }

            fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<Self::Value, A::Error> {
                let mut entries = Vec::new();
                while let Some(entry) = map.next_entry()? {
                    entries.push(entry);
                }
                Ok(Entries(entries))
            }
        }

        deserializer.deserialize_map(EntriesVisitor(PhantomData))
    }
}

/// The states: as [`Entries`], but never empty.
pub(crate) struct States<'a>(pub Vec<(&'a RawValue, StateEntry<'a>)>);

impl<'de: 'a, 'a> Deserialize<'de> for States<'a> {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let Entries(entries) = Entries::deserialize(deserializer)?;
        if entries.is_empty() {
            return Err(D::Error::custom("a model needs at least one state"));
        }
        Ok(Self(entries))
    }
}

/// Reads the file's outer shape.
pub(crate) fn read_shape<'a>(source: Source<'a>) -> Result<ModelFile<'a>, Diagnostic> {
    Options::default()
        .with_default_extension(Extensions::IMPLICIT_SOME)
        .from_str(source.text)
        .map_err(|error| Diagnostic::from_ron(source, &error))
}

/// A text taken from the file: a name, or a formula.
#[derive(Clone, Debug)]
pub(crate) struct Located {
    pub text: String,
    /// Where it stands in the file, with its quotes.
    pub span: Range<usize>,
    /// Byte of the file where `text` begins; none if escapes make the two differ.
    inside: Option<usize>,
}

impl Located {
    /// Reads a quoted text, or a bare number as the text of that number.
    pub(crate) fn new(source: Source<'_>, raw: &RawValue, wanted: &str) -> Result<Self, Diagnostic> {
        let raw = raw.trim().get_ron();
        let start = (raw.as_ptr() as usize).saturating_sub(source.text.as_ptr() as usize);
        let span = start..start + raw.len();
        let wrong = || Diagnostic::new(source, span.clone(), format!("{wanted} is expected here"));
        let first = raw.chars().next().unwrap_or(' ');
        if first.is_ascii_digit() || matches!(first, '-' | '+' | '.') {
            return Ok(Self { text: raw.to_owned(), inside: Some(start), span });
        }
        let text: String = ron::from_str(raw).map_err(|_| wrong())?;
        let opening = match first {
            'r' => raw.find('"').map(|at| at + 1),
            '"' if !raw.contains('\\') => Some(1),
            '"' => None,
            _ => return Err(wrong()),
        };
        Ok(Self { text, inside: opening.map(|opening| start + opening), span })
    }

    /// Place in the file of a byte range of the text.
    pub(crate) fn place(&self, part: &Range<usize>) -> Range<usize> {
        match self.inside {
            Some(start) => start + part.start..start + part.end,
            None => self.span.clone(),
        }
    }

    /// Place in the file of the whole text, without its quotes where that is known.
    pub(crate) fn whole(&self) -> Range<usize> {
        self.place(&(0..self.text.len()))
    }
}
