//! What a study file may ask of a figure.

use serde::{Deserialize, Serialize};

/// One figure of a study.
///
/// In a study file: `Diagram(measure: Max("level"), width: Double)` or
/// `Portrait(axes: ["level", "flow"])`. Everything but `measure` and `axes` has a default.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(from = "Written", into = "Written")]
pub enum Figure {
    /// A measure of the cycle against the followed parameter.
    Diagram(Diagram),
    /// Orbits in the plane of two states.
    Portrait(Portrait),
}

/// A measure of the cycle against the followed parameter.
#[derive(Clone, Debug, PartialEq)]
pub struct Diagram {
    /// What is drawn upwards.
    pub measure: Measure,
    /// Width of the whole figure.
    pub width: Width,
    /// Range of the parameter shown, ascending; the extent of the branches where none is given.
    pub x: Option<(f64, f64)>,
    /// Range of the measure shown, ascending; the extent of the curves where none is given.
    pub y: Option<(f64, f64)>,
    /// Logarithmic scale of the measure (always so for [`Measure::LargestMultiplier`]).
    pub logarithmic: bool,
    /// Whether events and branches carry their names where there is room. Default: they do.
    pub names: bool,
}

/// Orbits in the plane of two states.
#[derive(Clone, Debug, PartialEq)]
pub struct Portrait {
    /// Names of the states drawn to the right and upwards.
    pub axes: [String; 2],
    /// Full names of the events whose orbits are drawn, as `a/doubling1`; where empty, the first
    /// seven events that keep an orbit.
    pub orbits: Vec<String>,
    /// Width of the whole figure.
    pub width: Width,
    /// Range of the first state shown, ascending.
    pub x: Option<(f64, f64)>,
    /// Range of the second state shown, ascending.
    pub y: Option<(f64, f64)>,
}

/// A number that stands for a cycle.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub enum Measure {
    /// Largest value of a state over the cycle.
    Max(String),
    /// Smallest value of a state over the cycle.
    Min(String),
    /// Mean of a state over the period.
    Mean(String),
    /// Largest and smallest value of a state, two curves for each branch.
    Extremes(String),
    /// Largest minus smallest value of a state.
    PeakToPeak(String),
    /// Root mean square of a state about its mean.
    Spread(String),
    /// The period, over all turns of the cycle.
    Period,
    /// Modulus of the largest multiplier besides the trivial one; always on a logarithmic scale.
    LargestMultiplier,
}

impl Measure {
    /// The state that is measured, where it is one.
    pub fn state(&self) -> Option<&str> {
        match self {
            Self::Max(state)
            | Self::Min(state)
            | Self::Mean(state)
            | Self::Extremes(state)
            | Self::PeakToPeak(state)
            | Self::Spread(state) => Some(state),
            Self::Period | Self::LargestMultiplier => None,
        }
    }
}

/// Width of a whole figure as it is printed.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub enum Width {
    /// One column: 86 mm, legend below the frame.
    #[default]
    Single,
    /// Two columns: 178 mm, legend beside the frame.
    Double,
    /// Any width in mm between 60 and 400.
    Millimetres(f64),
}

/// Narrower than this an axis with 8 pt numbers has no room left; wider than A3 no page takes it.
pub(crate) const WIDTHS_MM: (f64, f64) = (60.0, 400.0);

impl Width {
    /// The width in mm.
    pub fn millimetres(self) -> f64 {
        match self {
            Self::Single => 86.0,
            Self::Double => 178.0,
            Self::Millimetres(width) => width,
        }
    }
}

impl Figure {
    /// A diagram with every default.
    pub fn diagram(measure: Measure) -> Self {
        Self::Diagram(Diagram::new(measure))
    }

    /// A portrait with every default.
    pub fn portrait(right: &str, up: &str) -> Self {
        Self::Portrait(Portrait::new(right, up))
    }
}

impl Diagram {
    /// A diagram with every default.
    pub fn new(measure: Measure) -> Self {
        Self { measure, width: Width::default(), x: None, y: None, logarithmic: false, names: true }
    }
}

impl Portrait {
    /// A portrait with every default.
    pub fn new(right: &str, up: &str) -> Self {
        Self { axes: [right.into(), up.into()], orbits: Vec::new(), width: Width::default(), x: None, y: None }
    }
}

/// The form in files: fields stand directly in the parentheses behind the name of the figure.
#[derive(Clone, Serialize, Deserialize)]
#[serde(rename = "Figure", deny_unknown_fields)]
enum Written {
    Diagram {
        measure: Measure,
        #[serde(default)]
        width: Width,
        #[serde(default, with = "bare", skip_serializing_if = "Option::is_none")]
        x: Option<(f64, f64)>,
        #[serde(default, with = "bare", skip_serializing_if = "Option::is_none")]
        y: Option<(f64, f64)>,
        #[serde(default)]
        logarithmic: bool,
        #[serde(default = "yes")]
        names: bool,
    },
    Portrait {
        #[serde(with = "pair")]
        axes: [String; 2],
        #[serde(default)]
        orbits: Vec<String>,
        #[serde(default)]
        width: Width,
        #[serde(default, with = "bare", skip_serializing_if = "Option::is_none")]
        x: Option<(f64, f64)>,
        #[serde(default, with = "bare", skip_serializing_if = "Option::is_none")]
        y: Option<(f64, f64)>,
    },
}

fn yes() -> bool {
    true
}

impl From<Written> for Figure {
    fn from(written: Written) -> Self {
        match written {
            Written::Diagram { measure, width, x, y, logarithmic, names } => {
                Self::Diagram(Diagram { measure, width, x, y, logarithmic, names })
            }
            Written::Portrait { axes, orbits, width, x, y } => Self::Portrait(Portrait { axes, orbits, width, x, y }),
        }
    }
}

impl From<Figure> for Written {
    fn from(figure: Figure) -> Self {
        match figure {
            Figure::Diagram(Diagram { measure, width, x, y, logarithmic, names }) => {
                Self::Diagram { measure, width, x, y, logarithmic, names }
            }
            Figure::Portrait(Portrait { axes, orbits, width, x, y }) => Self::Portrait { axes, orbits, width, x, y },
        }
    }
}

/// Writes and reads two names as a list; serde takes an array for a tuple, in parentheses.
mod pair {
    use serde::de::Error;
    use serde::{Deserialize, Deserializer, Serialize, Serializer};

    pub(super) fn serialize<S: Serializer>(axes: &[String; 2], to: S) -> Result<S::Ok, S::Error> {
        axes.as_slice().serialize(to)
    }

    pub(super) fn deserialize<'de, D: Deserializer<'de>>(from: D) -> Result<[String; 2], D::Error> {
        <[String; 2]>::try_from(Vec::<String>::deserialize(from)?)
            .map_err(|names| D::Error::custom(format!("`axes` takes the names of two states, found {}", names.len())))
    }
}

/// Writes and reads an optional range without `Some`, whatever the reader's options are.
mod bare {
    use serde::{Deserialize, Deserializer, Serialize, Serializer};

    pub(super) fn serialize<S: Serializer>(range: &Option<(f64, f64)>, to: S) -> Result<S::Ok, S::Error> {
        match range {
            Some(range) => range.serialize(to),
            None => to.serialize_none(),
        }
    }

    pub(super) fn deserialize<'de, D: Deserializer<'de>>(from: D) -> Result<Option<(f64, f64)>, D::Error> {
        <(f64, f64)>::deserialize(from).map(Some)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The lines of the interface's example, and each optional field.
    #[test]
    fn study_files_read_and_read_back() {
        let text = r#"[
            Diagram(measure: Max("level")), Diagram(measure: Extremes("level")),
            Diagram(measure: Period, width: Double, x: (0.5, 2), y: (1e-3, 4), logarithmic: true, names: false),
            Portrait(axes: ["level", "flow"], width: Millimetres(120)),
            Portrait(axes: ["level", "flow"], orbits: ["a/target1"], x: (0, 1)),
        ]"#;
        let figures: Vec<Figure> = ron::from_str(text).expect("the interface's own lines");
        assert_eq!(figures[0], Figure::diagram(Measure::Max("level".into())));
        assert_eq!(figures[1], Figure::diagram(Measure::Extremes("level".into())));
        let Figure::Diagram(period) = &figures[2] else { panic!("{:?}", figures[2]) };
        assert_eq!((period.x, period.y), (Some((0.5, 2.0)), Some((1e-3, 4.0))));
        assert!(period.logarithmic && !period.names && period.width.millimetres() == 178.0);
        let again: Vec<Figure> = ron::from_str(&ron::to_string(&figures).expect("writes")).expect("reads back");
        assert_eq!(again, figures);
    }

    #[test]
    fn unknown_fields_and_measures_are_refused() {
        for wrong in [
            r#"Diagram(measure: Max("x"), colour: 1)"#,
            r#"Diagram(measure: Most("x"))"#,
            "Diagram()",
            "Chart()",
            r#"Portrait(axes: ["x"])"#,
        ] {
            assert!(ron::from_str::<Figure>(wrong).is_err(), "{wrong}");
        }
        let told = ron::from_str::<Figure>(r#"Diagram(measure: Max("x"), colour: 1)"#).expect_err("refused");
        assert!(told.to_string().contains("colour") && told.to_string().contains("logarithmic"), "{told}");
    }
}
