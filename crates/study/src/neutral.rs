//! Eigenvalues that stay on the imaginary axis along a branch of equilibria: what is said of them.

use armilla_record::{Branch, Point, Solutions};
use armilla_stability::SIDE;

/// A note on branches on which eigenvalues stay on the imaginary axis; none where there are none.
pub(crate) fn neutral_note(branches: &[Branch]) -> Option<String> {
    let equilibria = branches.iter().filter(|branch| branch.of == Solutions::Equilibria);
    let neutral = equilibria.filter(|branch| branch.points.windows(2).any(|pair| pair.iter().all(is_neutral)));
    let names: Vec<&str> = neutral.map(|branch| branch.name.as_str()).collect();
    let (first, more) = names.split_first()?;
    let more = if more.is_empty() { String::new() } else { format!(" and {} more", more.len()) };
    Some(format!(
        "eigenvalues stay on the imaginary axis along {first}{more}, as where something is conserved: events are those of the \
         others, and whether the motion beside an equilibrium decays is not told by the eigenvalues there"
    ))
}

fn is_neutral(point: &Point) -> bool {
    let largest = point.eigenvalues.iter().map(|value| value.re.hypot(value.im)).fold(0.0, f64::max);
    point.eigenvalues.iter().any(|value| value.re.abs() <= SIDE * largest)
}
