//! From what is asked to the text of an SVG file.

use armilla_record::Branch;

use crate::error::FigureError;
use crate::page::points;
use crate::range::Asked;
use crate::spec::{Figure, Measure};
use crate::{diagram, portrait};

impl Figure {
    /// Checks what can be checked before there is anything to draw: ranges and width.
    ///
    /// # Errors
    /// [`FigureError::Range`] or [`FigureError::Width`].
    pub fn check(&self) -> Result<(), FigureError> {
        let (x, y, logarithmic, width) = match self {
            Figure::Diagram(diagram) => {
                let logarithmic = diagram.logarithmic || diagram.measure == Measure::LargestMultiplier;
                (diagram.x, diagram.y, logarithmic, diagram.width)
            }
            Figure::Portrait(portrait) => (portrait.x, portrait.y, false, portrait.width),
        };
        Asked::new(x, y, logarithmic)?;
        points(width).map(|_| ())
    }

    /// The figure as the text of an SVG file.
    ///
    /// The branches are those of one study, in the order in which they are to be named.
    ///
    /// # Errors
    /// No branches, branches that do not belong together, an unknown state or orbit, a range or width
    /// that is none, nothing inside the range.
    pub fn draw(&self, branches: &[Branch]) -> Result<String, FigureError> {
        let (first, others) = branches.split_first().ok_or(FigureError::NoBranches)?;
        for branch in others {
            let mixed = |what| Err(FigureError::Mixed { branch: branch.name.clone(), what });
            if branch.parameter != first.parameter {
                return mixed("parameter");
            }
            if branch.states != first.states {
                return mixed("states");
            }
        }
        match self {
            Figure::Diagram(diagram) => diagram::draw(diagram, branches),
            Figure::Portrait(portrait) => portrait::draw(portrait, branches),
        }
    }
}
