//! Doublings of Roessler's band by single shooting, sharing nothing with the engine.
//!
//! The equations `x' = -y - z, y' = x + a y, z' = b + z (x - c)` are integrated by their Taylor series (Moore 1966, Interval
//! Analysis, ch. 11; step from the last coefficients, Jorba & Zou 2005, Exp. Math. 14:99) together with the matrix of the
//! variational equation. A cycle of k turns is a zero of `flow(T; x, y0, z) - (x, y0, z)` in x, z and T, y0 fixed where y
//! moves fast, by Newton's method; a doubling is a zero of `det(M + 1)` in c, by the secant method.

/// Order of the series.
const ORDER: usize = 26;
/// a = b.
const A: f64 = 0.2;

/// State, and matrix of the variational equation by columns.
#[derive(Clone, Copy)]
struct Carried {
    state: [f64; 3],
    columns: [[f64; 3]; 3],
}

type Series = [f64; ORDER + 1];

fn product(u: &Series, v: &Series, k: usize) -> f64 {
    (0..=k).map(|i| u[i] * v[k - i]).sum()
}

fn value(series: &Series, h: f64) -> f64 {
    series.iter().rev().fold(0.0, |sum, coefficient| sum * h + coefficient)
}

/// Longest step at which the last terms stay below roundoff of the state.
fn step_length(series: &[Series; 3]) -> f64 {
    let size = series.iter().map(|s| s[0].abs()).fold(0.0, f64::max);
    let last = |k: usize| series.iter().map(|s| s[k].abs()).fold(0.0, f64::max);
    let bound = |k: usize| (1e-17 * size / last(k)).powf(1.0 / k as f64);
    bound(ORDER).min(bound(ORDER - 1))
}

/// One step of at most `longest`; returns its length.
fn step(at: &mut Carried, c: f64, longest: f64) -> f64 {
    let mut u = [[0.0; ORDER + 1]; 3];
    (0..3).for_each(|i| u[i][0] = at.state[i]);
    let mut w = [[[0.0; ORDER + 1]; 3]; 3];
    (0..3).for_each(|j| (0..3).for_each(|i| w[j][i][0] = at.columns[j][i]));
    for k in 0..ORDER {
        let next = (k + 1) as f64;
        let constant = if k == 0 { A } else { 0.0 };
        let [x, y, z] = [u[0][k], u[1][k], u[2][k]];
        let zx = product(&u[2], &u[0], k);
        u[0][k + 1] = (-y - z) / next;
        u[1][k + 1] = (x + A * y) / next;
        u[2][k + 1] = (constant + zx - c * z) / next;
        for column in &mut w {
            let [dx, dy, dz] = [column[0][k], column[1][k], column[2][k]];
            let mixed = product(&column[2], &u[0], k) + product(&u[2], &column[0], k);
            column[0][k + 1] = (-dy - dz) / next;
            column[1][k + 1] = (dx + A * dy) / next;
            column[2][k + 1] = (mixed - c * dz) / next;
        }
    }
    let h = step_length(&u).min(longest);
    (0..3).for_each(|i| at.state[i] = value(&u[i], h));
    (0..3).for_each(|j| (0..3).for_each(|i| at.columns[j][i] = value(&w[j][i], h)));
    h
}

fn flow(state: [f64; 3], time: f64, c: f64) -> Carried {
    let columns = [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]];
    let mut at = Carried { state, columns };
    let mut left = time;
    while left > 0.0 {
        left -= step(&mut at, c, left);
    }
    at
}

fn rates([x, y, z]: [f64; 3], c: f64) -> [f64; 3] {
    [-y - z, x + A * y, A + z * (x - c)]
}

fn determinant(m: [[f64; 3]; 3]) -> f64 {
    m[0][0] * (m[1][1] * m[2][2] - m[1][2] * m[2][1]) - m[0][1] * (m[1][0] * m[2][2] - m[1][2] * m[2][0])
        + m[0][2] * (m[1][0] * m[2][1] - m[1][1] * m[2][0])
}

/// Solves by Cramer's rule; `columns` are those of the matrix.
fn solve(columns: [[f64; 3]; 3], right: [f64; 3]) -> [f64; 3] {
    let whole = determinant(columns);
    std::array::from_fn(|i| {
        let mut replaced = columns;
        replaced[i] = right;
        determinant(replaced) / whole
    })
}

/// A cycle: a point on it, and its period.
#[derive(Clone, Copy, Debug)]
pub struct Cycle {
    pub state: [f64; 3],
    pub period: f64,
}

impl Cycle {
    /// The cycle at c near this one, and `det(M + 1)` of it.
    fn at(mut self, c: f64) -> (Self, f64) {
        for _ in 0..30 {
            let end = flow(self.state, self.period, c);
            let defect = std::array::from_fn(|i| end.state[i] - self.state[i]);
            let mut columns = end.columns;
            (0..3).for_each(|i| columns[i][i] -= 1.0);
            let [dx, dt, dz] = solve([columns[0], rates(end.state, c), columns[2]], defect);
            self.state[0] -= dx;
            self.state[2] -= dz;
            self.period -= dt;
            // Roundoff of a thousand turns, far below what moves a threshold by 1e-12.
            if dx.abs().max(dz.abs()) < 1e-11 {
                break;
            }
        }
        let mut shifted = flow(self.state, self.period, c).columns;
        (0..3).for_each(|i| shifted[i][i] += 1.0);
        (self, determinant(shifted))
    }
}

/// The doubling near a cycle at about c; `scale` is the length over which the multiplier changes.
pub fn doubling(guess: Cycle, c: f64, scale: f64) -> (f64, Cycle) {
    // The secant starts from two wrong values, so that what is found does not lean on the guess.
    let (mut before, mut here) = (c - 0.02 * scale, c + 0.01 * scale);
    let (mut cycle, mut g_before) = guess.at(before);
    for _ in 0..20 {
        let (found, g_here) = cycle.at(here);
        cycle = found;
        let next = here - g_here * (here - before) / (g_here - g_before);
        (before, g_before, here) = (here, g_here, next);
        if (here - before).abs() < 1e-8 * scale {
            break;
        }
    }
    (here, cycle)
}
