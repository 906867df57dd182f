//! What the basis of one degree knows: Lagrange polynomials on the profile's nodes at the Gauss points, their
//! derivatives, the weights of the highest derivative, and the constant of the local error.

use std::sync::OnceLock;

use armilla_record::{barycentric_weights, lagrange_at, node_quadrature, nodes};

use crate::gauss::gauss;

/// Tables of degree m. Everything refers to the unit interval.
#[derive(Clone, Debug)]
pub struct Tables {
    /// Degree m.
    pub degree: usize,
    /// Interpolation nodes, m+1.
    pub nodes: Vec<f64>,
    /// Quadrature weights on the nodes, m+1.
    pub node_weights: Vec<f64>,
    /// Gauss points, m.
    pub points: Vec<f64>,
    /// Gauss weights, m.
    pub weights: Vec<f64>,
    /// `value[k * (m+1) + j]`: j-th Lagrange polynomial at Gauss point k.
    pub value: Vec<f64>,
    /// `slope[k * (m+1) + j]`: its derivative there.
    pub slope: Vec<f64>,
    /// `node_slope[i * (m+1) + j]`: derivative of the j-th Lagrange polynomial at node i.
    pub node_slope: Vec<f64>,
    /// Weights of the m-th derivative, a constant on the interval: m+1 numbers.
    pub highest: Vec<f64>,
    /// `max |P|`, `P(s) = (1/m!) Int_0^s Prod (x - rho_l) dx`: the constant of the local error (de Boor 1973).
    pub error_constant: f64,
}

/// Degrees a cycle may be computed with. Below 3 nothing is gained on any profile; above 8 the blocks of an interval
/// cost more than the intervals they save, and rounding of high derivatives spoils the estimates.
pub const DEGREES: (usize, usize) = (3, 8);

impl Tables {
    /// The tables of a degree from 1 to one beyond [`DEGREES`], made once; the nearest of them for others.
    pub fn of(degree: usize) -> &'static Self {
        const MOST: usize = DEGREES.1 + 1;
        static ALL: [OnceLock<Tables>; MOST] = [const { OnceLock::new() }; MOST];
        let degree = degree.clamp(1, MOST);
        ALL[degree - 1].get_or_init(|| Self::new(degree))
    }

    /// Computes the tables of degree `degree` (1 or more).
    pub fn new(degree: usize) -> Self {
        let (points, weights) = gauss(degree);
        let nodes = nodes(degree);
        let bary = barycentric_weights(degree);
        let size = degree + 1;
        let (mut value, mut slope) = (vec![0.0; degree * size], vec![0.0; degree * size]);
        for (k, &point) in points.iter().enumerate() {
            let of = k * size..(k + 1) * size;
            lagrange_at(&nodes, &bary, point, &mut value[of.clone()]);
            lagrange_slopes(&nodes, &bary, &value[of.clone()], &mut slope[of.clone()]);
            balance(&mut slope[of.clone()], 0.0);
            balance(&mut value[of], 1.0);
        }
        let mut node_slope = vec![0.0; size * size];
        for i in 0..size {
            let unit: Vec<f64> = (0..size).map(|j| if i == j { 1.0 } else { 0.0 }).collect();
            lagrange_slopes(&nodes, &bary, &unit, &mut node_slope[i * size..(i + 1) * size]);
        }
        let error_constant = error_constant(&points);
        let highest = highest_derivative(&nodes);
        Self {
            degree,
            node_weights: node_quadrature(degree),
            nodes,
            points,
            weights,
            value,
            slope,
            node_slope,
            highest,
            error_constant,
        }
    }
}

/// Slopes of all Lagrange polynomials at a place where their values are `value_at_s`: rows of the barycentric
/// differentiation matrix, interpolated (exact, since slopes are polynomials of lower degree).
pub(crate) fn lagrange_slopes(nodes: &[f64], bary: &[f64], value_at_s: &[f64], out: &mut [f64]) {
    out.fill(0.0);
    for (i, &weight_of_row) in value_at_s.iter().enumerate() {
        let mut diagonal = 0.0;
        for j in 0..nodes.len() {
            if i != j {
                let entry = (bary[j] / bary[i]) / (nodes[i] - nodes[j]);
                out[j] += weight_of_row * entry;
                diagonal -= entry;
            }
        }
        out[i] += weight_of_row * diagonal;
    }
}

/// Makes numbers add up to `wanted` as nearly as 64-bit numbers can: the slopes of a constant to 0, its values to 1. What is
/// left of the slopes acts on every interval alike, as a growth from nowhere, and moved the doubling of a twisted band
/// by N units in the last place.
fn balance(numbers: &mut [f64], wanted: f64) {
    let finest = (0..numbers.len()).min_by(|a, b| numbers[*a].abs().total_cmp(&numbers[*b].abs())).unwrap_or(0);
    // The correction itself is rounded, to the finest number there is.
    for _ in 0..2 {
        numbers[finest] -= exact_sum(numbers, -wanted);
    }
}

/// Sum, on top of `from`, with the rounding of every addition carried along (Neumaier 1974, Z. Angew. Math. Mech. 54:39).
fn exact_sum(numbers: &[f64], from: f64) -> f64 {
    let (mut sum, mut lost) = (from, 0.0);
    for &number in numbers {
        let next = sum + number;
        lost += if sum.abs() >= number.abs() { (sum - next) + number } else { (number - next) + sum };
        sum = next;
    }
    sum + lost
}

/// m! times the divided-difference weights of the nodes.
fn highest_derivative(nodes: &[f64]) -> Vec<f64> {
    let factorial: f64 = (1..nodes.len()).map(|k| k as f64).product();
    (0..nodes.len())
        .map(|j| {
            let product: f64 = (0..nodes.len()).filter(|&l| l != j).map(|l| nodes[j] - nodes[l]).product();
            factorial / product
        })
        .collect()
}

fn error_constant(points: &[f64]) -> f64 {
    let m = points.len();
    let factorial: f64 = (1..=m).map(|k| k as f64).product();
    // The integrand is a polynomial of degree m: m Gauss points integrate it exactly on any part.
    let (gauss_points, gauss_weights) = gauss(m);
    let integral_to = |s: f64| -> f64 {
        let nodal = |x: f64| points.iter().map(|rho| x - rho).product::<f64>();
        s * gauss_points.iter().zip(&gauss_weights).map(|(g, w)| w * nodal(s * g)).sum::<f64>()
    };
    // Extremes of P are the Gauss points, where its derivative vanishes.
    points.iter().map(|&rho| integral_to(rho).abs()).fold(0.0, f64::max) / factorial
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: monomials up to degree m and their derivatives.
    #[test]
    fn tables_reproduce_polynomials() {
        for degree in 2..=8 {
            let tables = Tables::new(degree);
            for power in 0..=degree as i32 {
                let at_nodes: Vec<f64> = tables.nodes.iter().map(|x| x.powi(power)).collect();
                for (k, &rho) in tables.points.iter().enumerate() {
                    let of = k * (degree + 1)..(k + 1) * (degree + 1);
                    let value: f64 = tables.value[of.clone()].iter().zip(&at_nodes).map(|(l, y)| l * y).sum();
                    let slope: f64 = tables.slope[of].iter().zip(&at_nodes).map(|(l, y)| l * y).sum();
                    let exact_slope = if power == 0 { 0.0 } else { power as f64 * rho.powi(power - 1) };
                    assert!((value - rho.powi(power)).abs() < 1e-14, "{degree} {power}");
                    assert!((slope - exact_slope).abs() < 1e-12, "{degree} {power} {slope} {exact_slope}");
                }
                let highest: f64 = tables.highest.iter().zip(&at_nodes).map(|(w, y)| w * y).sum();
                let exact = if power == degree as i32 { (1..=degree).map(|k| k as f64).product() } else { 0.0 };
                assert!(
                    (highest - exact).abs() < 1e-9 * tables.highest.iter().map(|w| w.abs()).sum::<f64>(),
                    "{degree}"
                );
            }
        }
    }

    /// Exact: sums in whole multiples of 2^-80, which all entries are.
    #[test]
    fn slopes_of_constants_vanish_but_for_half_a_unit_of_the_smallest() {
        let whole = |value: f64| (value * 2f64.powi(80)) as i128;
        for degree in 3..=8 {
            for row in Tables::new(degree).slope.chunks_exact(degree + 1) {
                let sum: i128 = row.iter().map(|value| whole(*value)).sum();
                let smallest = row.iter().fold(f64::INFINITY, |least, value| least.min(value.abs()));
                assert!(sum.abs() <= whole(0.5 * f64::EPSILON * smallest), "{degree}: {sum} {row:?}");
            }
        }
    }

    /// Exact: for m = 1, P(s) = s^2/2 - s/2 with largest modulus 1/8; for m = 2, P = (x^3/3 - x^2/2 + x/6)/2.
    #[test]
    fn error_constants_are_those_of_small_degrees() {
        assert!((Tables::new(1).error_constant - 0.125).abs() < 1e-16);
        let x = 0.5 - 0.5 / 3.0f64.sqrt();
        let exact = (x * x * x / 3.0 - x * x / 2.0 + x / 6.0) / 2.0;
        assert!((Tables::new(2).error_constant - exact).abs() < 1e-16);
    }
}
