//! Smooth invertible changes of coordinates.
//!
//! `y = phi(x)` is a sequence of moves whose inverses are written by hand: turns, shears `x_i + a g(x_j)`, stretches and
//! shifts. Cycles of `x' = f(x)` become cycles of `y' = Dphi(x) f(x)`, `x = phi^-1(y)`, with the same periods,
//! multipliers, thresholds and criticality. A change acts on numbers (any dual number) and on formulas.

use num_dual::DualNum;

use crate::Random;

/// The bend of a shear.
#[derive(Clone, Copy, Debug)]
pub enum Bend {
    /// t^2.
    Square,
    /// t^3.
    Cube,
    /// sin t.
    Sine,
    /// exp t.
    Exponential,
    /// tanh t.
    Sigmoid,
}

impl Bend {
    const ALL: [Self; 5] = [Self::Square, Self::Cube, Self::Sine, Self::Exponential, Self::Sigmoid];

    /// Value and slope.
    fn at<D: DualNum<Primitive = f64> + Copy>(self, t: D) -> (D, D) {
        match self {
            Self::Square => (t * t, t * 2.0),
            Self::Cube => (t * t * t, t * t * 3.0),
            Self::Sine => (t.sin(), t.cos()),
            Self::Exponential => (t.exp(), t.exp()),
            Self::Sigmoid => (t.tanh(), -(t.tanh() * t.tanh()) + 1.0),
        }
    }

    /// Formulas of both.
    fn text(self, t: &str) -> (String, String) {
        match self {
            Self::Square => (format!("{t}^2"), format!("2*{t}")),
            Self::Cube => (format!("{t}^3"), format!("3*{t}^2")),
            Self::Sine => (format!("sin({t})"), format!("cos({t})")),
            Self::Exponential => (format!("exp({t})"), format!("exp({t})")),
            Self::Sigmoid => (format!("tanh({t})"), format!("(1 - tanh({t})^2)")),
        }
    }
}

/// One move.
#[derive(Clone, Copy, Debug)]
pub enum Move {
    /// The plane (i, j) is turned; cosine and sine.
    Turn(usize, usize, (f64, f64)),
    /// `size` times the bend of coordinate j is added to coordinate i.
    Shear(usize, usize, (f64, Bend)),
    /// Coordinate i is multiplied.
    Stretch(usize, f64),
    /// A number is added to coordinate i.
    Shift(usize, f64),
}

/// Moves in the order in which they act.
#[derive(Clone, Debug, Default)]
pub struct Change {
    /// The moves.
    pub moves: Vec<Move>,
}

impl Change {
    /// A random change of `n` coordinates of size about 1: up to three turns and shears each, then every coordinate
    /// gets an origin within a few sizes and a unit within four decades either way.
    pub fn random(random: &mut Random, n: usize) -> Self {
        let mut moves = Vec::new();
        for _ in 0..1 + random.below(3) {
            let (i, j) = pair(random, n);
            let angle = random.between(0.0, std::f64::consts::TAU);
            moves.push(Move::Turn(i, j, (angle.cos(), angle.sin())));
            let (i, j) = pair(random, n);
            moves.push(Move::Shear(i, j, (random.either_sign(0.05, 0.3), random.one_of(&Bend::ALL))));
        }
        for i in 0..n {
            moves.push(Move::Shift(i, random.between(-3.0, 3.0)));
            moves.push(Move::Stretch(i, random.decade(-4.0, 4.0)));
        }
        Self { moves }
    }

    /// From x to y, and a velocity with it.
    pub fn push<D: DualNum<Primitive = f64> + Copy>(&self, x: &mut [D], velocity: &mut [D]) {
        for step in &self.moves {
            match *step {
                Move::Turn(i, j, (c, s)) => {
                    (x[i], x[j]) = (x[i] * c - x[j] * s, x[i] * s + x[j] * c);
                    (velocity[i], velocity[j]) = (velocity[i] * c - velocity[j] * s, velocity[i] * s + velocity[j] * c);
                }
                Move::Shear(i, j, (size, bend)) => {
                    let (value, slope) = bend.at(x[j]);
                    x[i] += value * size;
                    let carried = slope * velocity[j] * size;
                    velocity[i] += carried;
                }
                Move::Stretch(i, factor) => {
                    x[i] *= D::from(factor);
                    velocity[i] *= D::from(factor);
                }
                Move::Shift(i, by) => x[i] += D::from(by),
            }
        }
    }

    /// From y back to x.
    pub fn pull<D: DualNum<Primitive = f64> + Copy>(&self, y: &mut [D]) {
        for step in self.moves.iter().rev() {
            match *step {
                Move::Turn(i, j, (c, s)) => (y[i], y[j]) = (y[i] * c + y[j] * s, y[j] * c - y[i] * s),
                Move::Shear(i, j, (size, bend)) => {
                    let value = bend.at(y[j]).0;
                    y[i] -= value * size;
                }
                Move::Stretch(i, factor) => y[i] /= D::from(factor),
                Move::Shift(i, by) => y[i] -= D::from(by),
            }
        }
    }

    /// Formulas of the way back: from names of y to names of x, with the names between, last first.
    pub(crate) fn pull_text(&self, y: Vec<String>, out: &mut Vec<(String, String)>) -> Vec<Vec<String>> {
        let mut points = vec![y];
        for (step, way) in self.moves.iter().enumerate().rev() {
            let mut at = points.last().expect("it starts with y").clone();
            let mut set = |i: usize, formula: String| {
                let name = format!("u{step}_{i}");
                out.push((name.clone(), formula));
                at[i] = name;
            };
            let old = points.last().expect("it starts with y");
            match *way {
                Move::Turn(i, j, (c, s)) => {
                    set(i, format!("{}*{} + {}*{}", old[i], number(c), old[j], number(s)));
                    set(j, format!("{}*{} - {}*{}", old[j], number(c), old[i], number(s)));
                }
                Move::Shear(i, j, (size, bend)) => {
                    set(i, format!("{} - {}*{}", old[i], number(size), bend.text(&old[j]).0));
                }
                Move::Stretch(i, factor) => set(i, format!("{}/{}", old[i], number(factor))),
                Move::Shift(i, by) => set(i, format!("{} - {}", old[i], number(by))),
            }
            points.push(at);
        }
        points
    }

    /// Formulas of a velocity on its way to y; `points` as from [`Change::pull_text`].
    pub(crate) fn push_text(
        &self,
        mut velocity: Vec<String>,
        points: &[Vec<String>],
        out: &mut Vec<(String, String)>,
    ) -> Vec<String> {
        for (step, way) in self.moves.iter().enumerate() {
            let before = &points[points.len() - 1 - step];
            let old = velocity.clone();
            let mut set = |i: usize, formula: String| {
                let name = format!("v{step}_{i}");
                out.push((name.clone(), formula));
                velocity[i] = name;
            };
            match *way {
                Move::Turn(i, j, (c, s)) => {
                    set(i, format!("{}*{} - {}*{}", old[i], number(c), old[j], number(s)));
                    set(j, format!("{}*{} + {}*{}", old[i], number(s), old[j], number(c)));
                }
                Move::Shear(i, j, (size, bend)) => {
                    set(i, format!("{} + {}*{}*{}", old[i], number(size), bend.text(&before[j]).1, old[j]));
                }
                Move::Stretch(i, factor) => set(i, format!("{}*{}", old[i], number(factor))),
                Move::Shift(..) => {}
            }
        }
        velocity
    }
}

fn pair(random: &mut Random, n: usize) -> (usize, usize) {
    let i = random.below(n);
    (i, (i + 1 + random.below(n - 1)) % n)
}

/// A number in a formula, to the last bit.
pub(crate) fn number(value: f64) -> String {
    format!("({value:?})")
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: the way back undoes the way there, and velocities are differences of neighbouring points.
    #[test]
    fn changes_are_undone_and_carry_velocities() {
        let mut random = Random::new(5);
        for _ in 0..200 {
            let n = 2 + random.below(3);
            let change = Change::random(&mut random, n);
            let mut point = || (0..n).map(|_| random.between(-1.0, 1.0)).collect::<Vec<f64>>();
            let (x, velocity) = (point(), point());
            let moved = |share: f64| {
                let mut y: Vec<f64> = x.iter().zip(&velocity).map(|(x, v)| x + share * v).collect();
                let mut carried = velocity.clone();
                change.push(&mut y, &mut carried);
                (y, carried)
            };
            let (mut y, carried) = moved(0.0);
            let (ahead, behind) = (moved(1e-5).0, moved(-1e-5).0);
            for a in 0..n {
                let difference = (ahead[a] - behind[a]) / 2e-5;
                let size = carried[a].abs().max(y[a].abs());
                assert!((difference - carried[a]).abs() < 1e-7 * size, "{change:?}");
            }
            change.pull(&mut y);
            assert!(x.iter().zip(&y).all(|(x, y)| (x - y).abs() < 1e-12), "{change:?}");
        }
    }
}
