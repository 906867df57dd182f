//! Models whose cycles come in families: what is said of them, and what to do.

use armilla_record::Profile;
use armilla_stability::{Degeneracy, Term, degeneracy, keeps_volume};

use crate::error::StudyError;
use crate::study::Study;
use crate::words::digits;

const PARAMETER_OF_ITS_VALUE: &str =
    "make its value a parameter of the model and leave out a state that follows from it";
const DAMPED_AND_DRIVEN: &str = "add to the model the damping and driving that single out one cycle";

/// Why the solutions about a state of rest come in families, if the model says so.
pub(crate) fn family_at_rest(study: &Study, state: &[f64]) -> Option<StudyError> {
    /// Size of the loop about it, in the sizes of the states.
    const SIZE: f64 = 0.3;
    let typical = study.model.begin();
    let sizes =
        state.iter().zip(&typical).map(|(x, y)| SIZE * if *x != 0.0 || *y != 0.0 { x.abs().max(y.abs()) } else { 1.0 });
    let sizes: Vec<f64> = sizes.collect();
    let mesh = (0..=INTERVALS).map(|i| i as f64 / INTERVALS as f64).collect();
    let mut around = Profile { n_states: state.len(), degree: DEGREE, period: 1.0, mesh, values: Vec::new() };
    for time in around.node_times() {
        let at = |(k, (x, size)): (usize, (&f64, &f64))| x + size * (std::f64::consts::TAU * time + k as f64).cos();
        around.values.extend(state.iter().zip(&sizes).enumerate().map(at));
    }
    family(study, &around, false)
}

/// Mesh of a loop that only serves to scatter states about.
const INTERVALS: usize = 20;
/// Its degree.
const DEGREE: usize = 3;

/// Why cycles near a profile come in families, if the model says so; `neutral` where the divergence integrates to zero over
/// the motion.
pub(crate) fn family(study: &Study, profile: &Profile, neutral: bool) -> Option<StudyError> {
    let field = study.model.field();
    // In the plane what keeps area has an energy, and cycles about its every minimum.
    let plane = study.model.states().len() == 2 && !field.is_forced();
    let neutral = neutral || plane && keeps_volume(field.as_ref(), &study.start_parameters, profile);
    let (reason, instead) = match degeneracy(field.as_ref(), &study.start_parameters, profile) {
        Some(Degeneracy::Conserved(terms)) => (
            format!("{} keeps its value along every solution", sum(study, &terms)),
            // Of two states none can be spared.
            if study.model.states().len() > 2 { PARAMETER_OF_ITS_VALUE } else { DAMPED_AND_DRIVEN },
        ),
        Some(Degeneracy::Symmetric(rows)) => (
            format!("a continuous symmetry ({}) carries each cycle into others", flow(study, &rows)),
            "use coordinates in which the symmetry is a shift of one angle, and leave that angle out",
        ),
        None if neutral => (
            "the model is conservative there, its divergence integrates to zero over the settled motion".to_string(),
            DAMPED_AND_DRIVEN,
        ),
        None => return None,
    };
    Some(StudyError::Families { reason, instead })
}

/// `x' = -y, y' = x`
fn flow(study: &Study, rows: &[Vec<(f64, Term)>]) -> String {
    let names = study.model.states().iter().map(|state| &state.name);
    let moving = names.zip(rows).filter(|(_, row)| !row.is_empty());
    moving.map(|(name, row)| format!("{name}' = {}", sum(study, row))).collect::<Vec<_>>().join(", ")
}

/// `x + 0.5*y - log(z)`
fn sum(study: &Study, terms: &[(f64, Term)]) -> String {
    let name = |index: usize| study.model.states().get(index).map_or("?", |state| state.name.as_str());
    let mut text = String::new();
    for (factor, term) in terms {
        let body = match term {
            Term::One => String::new(),
            Term::State(i) => name(*i).to_string(),
            Term::Logarithm(i) => format!("log({})", name(*i)),
            Term::Product(i, j) if i == j => format!("{}^2", name(*i)),
            Term::Product(i, j) => format!("{}*{}", name(*i), name(*j)),
        };
        let sign = match (text.is_empty(), *factor < 0.0) {
            (true, true) => "-",
            (true, false) => "",
            (false, true) => " - ",
            (false, false) => " + ",
        };
        let size = digits(factor.abs());
        text.push_str(sign);
        text.push_str(&match (size == "1.0", body.is_empty()) {
            (true, false) => body,
            (_, true) => size,
            (false, false) => format!("{size}*{body}"),
        });
    }
    text
}
