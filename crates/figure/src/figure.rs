//! From what is asked to the text of an SVG file.

use armilla_record::Branch;

use crate::error::FigureError;
use crate::spec::Figure;
use crate::{diagram, portrait};

impl Figure {
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
