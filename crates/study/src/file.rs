//! The shape of a study file: fields, defaults, and nothing that needs the model.

use std::fmt;
use std::marker::PhantomData;

use armilla_figure::Figure;
use indexmap::IndexMap;
use serde::de::{self, Deserialize, Deserializer, MapAccess, Visitor};
use serde::{Deserialize as DeserializeDerive, Serialize};

/// Accuracy where the study asks for none.
pub const DEFAULT_ACCURACY: f64 = 1e-9;

/// A study as written, defaults filled in.
#[derive(Clone, Debug, PartialEq, DeserializeDerive, Serialize)]
#[serde(rename = "study", deny_unknown_fields)]
pub struct StudyFile {
    /// Title; empty where none is given.
    #[serde(default)]
    pub title: String,
    /// Model file, relative to the study file.
    pub model: String,
    /// Parameter values that differ from the model's.
    #[serde(default)]
    pub set: Values,
    /// Where to start.
    pub start: Start,
    /// What to follow.
    pub follow: Follow,
    /// The one numerical knob.
    #[serde(default = "default_accuracy")]
    pub accuracy: f64,
    /// How far switching goes on its own.
    #[serde(default)]
    pub pursue: Pursue,
    /// Parameter values at which a cycle is wanted.
    #[serde(default)]
    pub targets: Vec<f64>,
    /// Figures to draw; a diagram of the first state's maximum where none is asked.
    #[serde(default)]
    pub figures: Vec<Figure>,
    /// Expert override of the mesh.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub mesh: Option<MeshOverride>,
    /// Expert override of the stride.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub stride: Option<StrideOverride>,
}

fn default_accuracy() -> f64 {
    DEFAULT_ACCURACY
}

/// Where a study starts.
#[derive(Clone, Debug, PartialEq, DeserializeDerive, Serialize)]
#[serde(deny_unknown_fields)]
pub enum Start {
    /// Simulate until the motion settles on a cycle.
    Settle {
        /// Parameter values while settling.
        #[serde(default)]
        at: Values,
        /// Time simulated before anything is judged; chosen by the run where absent.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        transient: Option<f64>,
    },
    /// Begin at an equilibrium.
    Equilibrium {
        /// State values near it.
        near: Values,
    },
    /// Begin at a measured or simulated cycle.
    Samples {
        /// Table of the samples, relative to the study file.
        file: String,
        /// Period, estimated where absent.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        period: Option<f64>,
    },
}

/// The parameter to follow and its range.
#[derive(Clone, Debug, PartialEq, DeserializeDerive, Serialize)]
#[serde(rename = "follow", deny_unknown_fields)]
pub struct Follow {
    /// Its name.
    pub parameter: String,
    /// One end of the range.
    pub from: f64,
    /// The other end.
    pub to: f64,
}

/// How far switching goes on its own.
#[derive(Clone, Copy, Debug, PartialEq, DeserializeDerive, Serialize)]
#[serde(rename = "pursue", deny_unknown_fields, default)]
pub struct Pursue {
    /// Doublings in one line of descent.
    pub doublings: usize,
    /// Branches in all.
    pub branches: usize,
    /// Points in all.
    pub points: usize,
}

impl Default for Pursue {
    fn default() -> Self {
        Self { doublings: 4, branches: 40, points: 4000 }
    }
}

/// Mesh fixed by the user.
#[derive(Clone, Copy, Debug, PartialEq, DeserializeDerive, Serialize)]
#[serde(rename = "mesh", deny_unknown_fields)]
pub struct MeshOverride {
    /// Intervals per turn of the first cycle; chosen from the accuracy where absent.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub intervals: Option<usize>,
    /// Degree, 3 to 8; chosen by the program where absent.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub degree: Option<usize>,
}

/// Strides fixed by the user, in the metric of the branch (1 is the size of the cycle or of the range).
#[derive(Clone, Copy, Debug, PartialEq, DeserializeDerive, Serialize)]
#[serde(rename = "stride", deny_unknown_fields)]
pub struct StrideOverride {
    /// First stride.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub initial: Option<f64>,
    /// Shortest stride.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub shortest: Option<f64>,
    /// Longest stride.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub longest: Option<f64>,
}

/// Names with numbers, in the order of the file; a name given twice is an error.
#[derive(Clone, Debug, Default, PartialEq, Serialize)]
#[serde(transparent)]
pub struct Values(pub IndexMap<String, f64>);

impl<'de> Deserialize<'de> for Values {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Unique(PhantomData<()>);
        impl<'de> Visitor<'de> for Unique {
            type Value = Values;
            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a map from names to numbers, as in { \"lag\": 2.5 }")
            }
            fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<Values, A::Error> {
                let mut values = IndexMap::new();
                while let Some((name, value)) = map.next_entry::<String, f64>()? {
                    if values.contains_key(&name) {
                        return Err(de::Error::custom(format!("`{name}` is given twice here; keep one value")));
                    }
                    values.insert(name, value);
                }
                Ok(Values(values))
            }
        }
        deserializer.deserialize_map(Unique(PhantomData))
    }
}
