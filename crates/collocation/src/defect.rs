//! Local errors of a collocated cycle from its defect.
//!
//! On an interval of length h the pieces satisfy `u' = T f(u) + r / h`, where the defect r vanishes at the Gauss points
//! alone. Started right at the interval's beginning they are off by `E(s) = Int_0^s r dx` before the error is carried
//! on, which is the local error of de Boor & Swartz (1973, SIAM J. Numer. Anal. 10:582), extreme at the Gauss
//! points. With `r = Pi g`, Pi the product over the Gauss points, g is interpolated at m+1 stations that interlace with them,
//! so E is a fixed combination of m+1 defects. Where g hardly varies this is the leading term from the (m+1)-th
//! derivative; on coarse meshes it still holds, where jumps of the m-th derivative see a tenth of the error or less
//! (van der Pol's oscillator, degree 8, accuracy 1e-6). Kierzenka & Shampine (2001, ACM Trans. Math. Softw. 27:299)
//! control residuals in this spirit. Not seen: the error of the mesh points, of order 2m.

use armilla_model::{Batch, Evaluator, VectorField};
use armilla_record::{barycentric_weights, lagrange_at};

use crate::gauss::gauss;
use crate::tables::{Tables, lagrange_slopes};

/// Stations and weights of one degree m, on the unit interval.
struct Stations {
    /// Number of stations, m + 1.
    len: usize,
    /// `value[k * (m+1) + j]`: j-th Lagrange polynomial of the profile's nodes at station k.
    value: Vec<f64>,
    /// Its derivative there.
    slope: Vec<f64>,
    /// Where they are.
    places: Vec<f64>,
    /// `integral[l * (m+1) + k]`: weight of the defect of station k in E at Gauss point l.
    integral: Vec<f64>,
}

impl Stations {
    fn new(tables: &Tables) -> Self {
        let points = &tables.points;
        // Both ends, and the middles between Gauss points.
        let mut places = vec![0.0];
        places.extend(points.windows(2).map(|pair| 0.5 * (pair[0] + pair[1])));
        places.push(1.0);
        let len = places.len();
        let weights = barycentric_weights(tables.degree);
        let (mut value, mut slope) = (vec![0.0; len * len], vec![0.0; len * len]);
        for (k, &place) in places.iter().enumerate() {
            let of = k * len..(k + 1) * len;
            lagrange_at(&tables.nodes, &weights, place, &mut value[of.clone()]);
            lagrange_slopes(&tables.nodes, &weights, &value[of.clone()], &mut slope[of]);
        }
        Self { len, value, slope, integral: integrals(points, &places), places }
    }
}

/// `Int_0^rho_l Pi(x) / Pi(s_k) L_k(x) dx`, L_k the Lagrange polynomials of the stations: degree 2m, so m+1 Gauss points
/// integrate exactly.
fn integrals(points: &[f64], stations: &[f64]) -> Vec<f64> {
    let (nodes, weights) = gauss(stations.len());
    let nodal = |x: f64| points.iter().map(|rho| x - rho).product::<f64>();
    let lagrange = |k: usize, x: f64| {
        let others = stations.iter().enumerate().filter(|(l, _)| *l != k);
        others.map(|(_, s)| (x - s) / (stations[k] - s)).product::<f64>()
    };
    let mut out = Vec::with_capacity(points.len() * stations.len());
    for &end in points {
        for k in 0..stations.len() {
            let at = |x: f64| nodal(x) / nodal(stations[k]) * lagrange(k, x);
            out.push(end * nodes.iter().zip(&weights).map(|(x, w)| w * at(end * x)).sum::<f64>());
        }
    }
    out
}

/// A cycle on a mesh: what a defect is computed of.
#[derive(Clone, Copy, Debug)]
pub struct Collocated<'a> {
    /// N+1 points.
    pub mesh: &'a [f64],
    /// Node values as in a profile.
    pub nodes: &'a [f64],
    /// The period.
    pub period: f64,
    /// All parameters.
    pub parameters: &'a [f64],
}

/// Computes local errors of cycles of one model; owns its workspaces.
pub struct Defects {
    evaluator: Box<dyn Evaluator>,
    n: usize,
    stations: Vec<Option<Stations>>,
    states: Vec<f64>,
    rates: Vec<f64>,
    times: Vec<f64>,
}

/// Intervals evaluated together: enough to fill batches, few enough to stay in the cache.
const TOGETHER: usize = 64;

impl Defects {
    /// For the rates of a model.
    pub fn new(field: &dyn VectorField) -> Self {
        Self {
            evaluator: field.evaluator(&[]),
            n: field.n_states(),
            stations: Vec::new(),
            states: Vec::new(),
            rates: Vec::new(),
            times: Vec::new(),
        }
    }

    /// Largest local error in each interval over all states, each divided by its entry of `scales`; not finite where a
    /// rate is not.
    pub fn local_errors(&mut self, tables: &Tables, cycle: Collocated<'_>, scales: &[f64]) -> Vec<f64> {
        if self.stations.len() <= tables.degree {
            self.stations.resize_with(tables.degree + 1, || None);
        }
        let stations = self.stations[tables.degree].take().unwrap_or_else(|| Stations::new(tables));
        let intervals = cycle.mesh.len() - 1;
        let mut errors = Vec::with_capacity(intervals);
        for first in (0..intervals).step_by(TOGETHER) {
            let block = first..(first + TOGETHER).min(intervals);
            self.evaluate(&stations, tables.degree, cycle, block.clone());
            for interval in block.clone() {
                errors.push(self.largest(&stations, cycle, (interval, &block), scales));
            }
        }
        self.stations[tables.degree] = Some(stations);
        errors
    }

    /// States and rates at all stations of a block: point `(i - first) len + k`.
    fn evaluate(&mut self, stations: &Stations, m: usize, cycle: Collocated<'_>, block: std::ops::Range<usize>) {
        let (n, len) = (self.n, block.len() * stations.len);
        self.states.resize(n * len, 0.0);
        self.rates.resize(n * len, 0.0);
        self.times.clear();
        for (place, interval) in block.enumerate() {
            let (from, h) = (cycle.mesh[interval], cycle.mesh[interval + 1] - cycle.mesh[interval]);
            self.times.extend(stations.places.iter().map(|s| cycle.period * (from + h * s)));
            let nodes = &cycle.nodes[interval * m * n..(interval * m + m + 1) * n];
            for k in 0..stations.len {
                let basis = &stations.value[k * stations.len..(k + 1) * stations.len];
                for a in 0..n {
                    let sum: f64 = basis.iter().enumerate().map(|(j, value)| value * nodes[j * n + a]).sum();
                    self.states[a * len + place * stations.len + k] = sum;
                }
            }
        }
        let at = Batch { len, time: &self.times, states: &self.states, parameters: cycle.parameters };
        self.evaluator.rates(at, &mut self.rates);
    }

    /// The largest `E` of an interval over Gauss points and states.
    fn largest(
        &self,
        stations: &Stations,
        cycle: Collocated<'_>,
        (interval, block): (usize, &std::ops::Range<usize>),
        scales: &[f64],
    ) -> f64 {
        let (n, size) = (self.n, stations.len);
        let (m, len) = (size - 1, block.len() * size);
        let nodes = &cycle.nodes[interval * m * n..(interval * m + m + 1) * n];
        let h = cycle.mesh[interval + 1] - cycle.mesh[interval];
        let mut worst = 0.0f64;
        for a in 0..n {
            let defect = |k: usize| {
                let slopes = &stations.slope[k * size..(k + 1) * size];
                // Differences from the first node: slopes of a constant vanish, and its rounding with them.
                let slope: f64 =
                    slopes.iter().enumerate().map(|(j, slope)| slope * (nodes[j * n + a] - nodes[a])).sum();
                h * cycle.period * self.rates[a * len + (interval - block.start) * size + k] - slope
            };
            for weights in stations.integral.chunks_exact(size) {
                let error: f64 = weights.iter().enumerate().map(|(k, weight)| weight * defect(k)).sum();
                let relative = (error / scales[a]).abs();
                // NaN comes and stays.
                worst = if worst.is_nan() || relative <= worst { worst } else { relative };
            }
        }
        worst
    }
}

#[cfg(test)]
mod tests {
    use armilla_model::Model;

    use super::*;

    const MODEL: &str = r#"(
        title: "product",
        states: { "x": (begin: 0.0), "y": (begin: 0.0), "v": (begin: 0.0) },
        parameters: { "k": (value: 3.0) },
        rates: { "x": "k*y*v", "y": "0", "v": "0" },
    )"#;

    /// Exact: with x = 0, y the product Pi over the Gauss points and `v = 1 + s` on each interval the defect of x is
    /// `h T k Pi (1 + s)`, zero at the Gauss points; its integral is taken here by the trapezoidal rule on many points. The
    /// other states are given no weight.
    #[test]
    fn the_local_error_is_the_integral_of_the_defect() {
        let model = Model::parse(MODEL, "product").expect("a model");
        let mut defects = Defects::new(model.field().as_ref());
        for degree in 2..=8 {
            let tables = Tables::new(degree);
            let nodal = |s: f64| tables.points.iter().map(|rho| s - rho).product::<f64>();
            let mesh = [0.0, 0.25, 1.0];
            let mut nodes = Vec::new();
            for piece in 0..2 {
                // Neighbours share a node: the second piece is the mirror image, so that both agree there.
                for j in 0..degree + usize::from(piece == 1) {
                    let s = if piece == 0 { tables.nodes[j] } else { 1.0 - tables.nodes[j] };
                    nodes.extend([0.0, nodal(s), 1.0 + s]);
                }
            }
            let cycle = Collocated { mesh: &mesh, nodes: &nodes, period: 2.0, parameters: &[3.0] };
            let scales = [0.5, f64::INFINITY, f64::INFINITY];
            let found = defects.local_errors(&tables, cycle, &scales);
            const STEPS: usize = 200_000;
            let integrand = |s: f64| nodal(s) * (1.0 + s);
            let (mut integral, mut forwards, mut all) = (0.0, 0.0f64, Vec::new());
            for k in 0..STEPS {
                let (a, b) = (k as f64 / STEPS as f64, (k + 1) as f64 / STEPS as f64);
                integral += 0.5 * (integrand(a) + integrand(b)) / STEPS as f64;
                forwards = forwards.max(f64::abs(integral));
                all.push(integral);
            }
            // From the other end for the mirror image.
            let backwards = all.iter().fold(0.0f64, |most, part| most.max((integral - part).abs()));
            for (found, (h, wanted)) in found.iter().zip([(0.25, forwards), (0.75, backwards)]) {
                let wanted = h * 2.0 * 3.0 * wanted / 0.5;
                assert!((found / wanted - 1.0).abs() < 1e-7, "degree {degree}: {found:e} for {wanted:e}");
            }
        }
    }

    /// A rate that is not finite is not taken for a small error.
    #[test]
    fn a_rate_that_is_not_finite_is_no_small_error() {
        let model = Model::parse(&MODEL.replace("k*y*v", "log(y)"), "logarithm").expect("a model");
        let tables = Tables::new(3);
        let nodes: Vec<f64> = (0..21).map(|k| if k % 3 == 1 { -1.0 } else { 0.0 }).collect();
        let cycle = Collocated { mesh: &[0.0, 0.5, 1.0], nodes: &nodes, period: 1.0, parameters: &[3.0] };
        let found = Defects::new(model.field().as_ref()).local_errors(&tables, cycle, &[1.0; 3]);
        assert!(found.iter().all(|error| !error.is_finite()), "{found:?}");
    }
}
