//! Hand-written models for the tests, rates and Jacobian as plain functions.

use armilla_model::{
    Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, SparsityPattern, VectorField,
};

/// Rates, and the dense Jacobian row by row.
pub(crate) type Rates = fn(time: f64, x: &[f64], p: &[f64], rates: &mut [f64], jacobian: &mut [f64]);

/// A field made of one function.
pub(crate) struct TestField {
    n: usize,
    n_parameters: usize,
    forced: bool,
    rates: Rates,
    pattern: SparsityPattern,
}

impl TestField {
    pub(crate) fn new(n: usize, n_parameters: usize, rates: Rates) -> Self {
        let offsets = (0..=n).map(|i| i * n).collect();
        let columns = (0..n * n).map(|k| k % n).collect();
        let pattern = SparsityPattern::try_from_offsets_and_indices(n, n, offsets, columns).expect("a full pattern");
        Self { n, n_parameters, forced: false, rates, pattern }
    }

    pub(crate) fn forced(mut self) -> Self {
        self.forced = true;
        self
    }
}

struct TestEvaluator {
    n: usize,
    rates: Rates,
    jacobian: Vec<f64>,
}

impl VectorField for TestField {
    fn n_states(&self) -> usize {
        self.n
    }
    fn n_parameters(&self) -> usize {
        self.n_parameters
    }
    fn is_forced(&self) -> bool {
        self.forced
    }
    fn pattern(&self) -> &SparsityPattern {
        &self.pattern
    }
    fn evaluator(&self, _columns: &[Column]) -> Box<dyn Evaluator> {
        Box::new(TestEvaluator { n: self.n, rates: self.rates, jacobian: vec![0.0; self.n * self.n] })
    }
}

impl Evaluator for TestEvaluator {
    fn rates(&mut self, at: Batch<'_>, rates: &mut [f64]) {
        assert_eq!((at.len, at.states.len()), (1, self.n));
        (self.rates)(at.time[0], at.states, at.parameters, rates, &mut self.jacobian);
    }
    fn linearise(&mut self, at: Batch<'_>, out: Linearisation<'_>) {
        (self.rates)(at.time[0], at.states, at.parameters, out.rates, out.jacobian);
    }
    fn second(&mut self, _: Batch<'_>, _: Direction<'_>, _: Direction<'_>, _: &mut [f64]) {
        unreachable!("time integration needs no second derivatives")
    }
    fn third(&mut self, _: Batch<'_>, _: [Direction<'_>; 3], _: &mut [f64]) -> Result<(), NotProvided> {
        Err(NotProvided)
    }
    fn second_gradient(&mut self, _: Batch<'_>, _: &[f64], _: Direction<'_>, _: Gradient<'_>) {
        unreachable!("time integration needs no second derivatives")
    }
}

/// x' = -w y, y' = w x.
pub(crate) fn rotation(_w: f64) -> TestField {
    TestField::new(2, 1, |_, x, p, f, j| {
        f.copy_from_slice(&[-p[0] * x[1], p[0] * x[0]]);
        j.copy_from_slice(&[0.0, -p[0], p[0], 0.0]);
    })
}

/// x' = y, y' = mu (1 - x^2) y - x.
pub(crate) fn van_der_pol() -> TestField {
    TestField::new(2, 1, |_, x, p, f, j| {
        let (mu, x, y) = (p[0], x[0], x[1]);
        f.copy_from_slice(&[y, mu * (1.0 - x * x) * y - x]);
        j.copy_from_slice(&[0.0, 1.0, -2.0 * mu * x * y - 1.0, mu * (1.0 - x * x)]);
    })
}

/// x' = -y - z, y' = x + a y, z' = b + z (x - c), parameters a, b, c.
pub(crate) fn roessler() -> TestField {
    TestField::new(3, 3, |_, x, p, f, j| {
        f.copy_from_slice(&[-x[1] - x[2], x[0] + p[0] * x[1], p[1] + x[2] * (x[0] - p[2])]);
        j.copy_from_slice(&[0.0, -1.0, -1.0, 1.0, p[0], 0.0, x[2], 0.0, x[0] - p[2]]);
    })
}

/// x' = x (mu - r2) - y (1 + k r2), y' = y (mu - r2) + x (1 + k r2), r2 = x^2 + y^2, parameters mu, k.
pub(crate) fn hopf_with_shear() -> TestField {
    TestField::new(2, 2, |_, s, p, f, j| {
        let (x, y, mu, k) = (s[0], s[1], p[0], p[1]);
        let r2 = x * x + y * y;
        f.copy_from_slice(&[x * (mu - r2) - y * (1.0 + k * r2), y * (mu - r2) + x * (1.0 + k * r2)]);
        j[0] = mu - r2 - 2.0 * x * x - 2.0 * k * x * y;
        j[1] = -2.0 * x * y - (1.0 + k * r2) - 2.0 * k * y * y;
        j[2] = -2.0 * x * y + 1.0 + k * r2 + 2.0 * k * x * x;
        j[3] = mu - r2 - 2.0 * y * y + 2.0 * k * x * y;
    })
}

/// The torus case: x' = (lam - b) x - c y + x (z + d (1 - z^2)), y' = c x + (lam - b) y + y (z + d (1 - z^2)),
/// z' = lam z - (x^2 + y^2 + z^2) with b = 3, c = 0.25, d = 0.2; parameter lam.
pub(crate) fn torus_case() -> TestField {
    TestField::new(3, 1, |_, s, p, f, j| {
        const B: f64 = 3.0;
        const C: f64 = 0.25;
        const D: f64 = 0.2;
        let (x, y, z, lam) = (s[0], s[1], s[2], p[0]);
        let g = lam - B + z + D * (1.0 - z * z);
        let dg = 1.0 - 2.0 * D * z;
        f.copy_from_slice(&[x * g - C * y, C * x + y * g, lam * z - x * x - y * y - z * z]);
        j.copy_from_slice(&[g, -C, x * dg, C, g, y * dg, -2.0 * x, -2.0 * y, lam - 2.0 * z]);
    })
}

/// x' = y, y' = -delta y - x - beta x^3 + gamma cos(omega t), parameters delta, beta, gamma, omega.
pub(crate) fn duffing() -> TestField {
    TestField::new(2, 4, |t, x, p, f, j| {
        f.copy_from_slice(&[x[1], -p[0] * x[1] - x[0] - p[1] * x[0].powi(3) + p[2] * (p[3] * t).cos()]);
        j.copy_from_slice(&[0.0, 1.0, -1.0 - 3.0 * p[1] * x[0] * x[0], -p[0]]);
    })
    .forced()
}

/// van der Pol at mu = 1 with x = p2 + p0 u, y = p1 v.
pub(crate) fn scaled_van_der_pol() -> TestField {
    TestField::new(2, 3, |_, x, p, f, j| {
        let (u, v) = ((x[0] - p[2]) / p[0], x[1] / p[1]);
        f.copy_from_slice(&[p[0] * v, p[1] * ((1.0 - u * u) * v - u)]);
        j.copy_from_slice(&[0.0, p[0] / p[1], p[1] / p[0] * (-2.0 * u * v - 1.0), 1.0 - u * u]);
    })
}

/// Lorenz, parameters sigma, r, b.
pub(crate) fn lorenz() -> TestField {
    TestField::new(3, 3, |_, x, p, f, j| {
        f.copy_from_slice(&[p[0] * (x[1] - x[0]), x[0] * (p[1] - x[2]) - x[1], x[0] * x[1] - p[2] * x[2]]);
        j.copy_from_slice(&[-p[0], p[0], 0.0, p[1] - x[2], -1.0, -x[0], x[1], x[0], -p[2]]);
    })
}

/// x' = A - (B + 1) x + x^2 y, y' = B x - x^2 y, parameters A, B.
pub(crate) fn common_brusselator() -> TestField {
    TestField::new(2, 2, |_, s, p, f, j| {
        let (x, y) = (s[0], s[1]);
        f.copy_from_slice(&[p[0] - (p[1] + 1.0) * x + x * x * y, p[1] * x - x * x * y]);
        j.copy_from_slice(&[-(p[1] + 1.0) + 2.0 * x * y, x * x, p[1] - 2.0 * x * y, -x * x]);
    })
}

/// u' = k4 (v - u)(al + u^2) - k6 u, v' = k1 - k6 u, parameters k1, k4, al, k6.
pub(crate) fn tyson() -> TestField {
    TestField::new(2, 4, |_, s, p, f, j| {
        let (u, v) = (s[0], s[1]);
        let autocatalysis = p[2] + u * u;
        f.copy_from_slice(&[p[1] * (v - u) * autocatalysis - p[3] * u, p[0] - p[3] * u]);
        j[0] = -p[1] * autocatalysis + 2.0 * p[1] * (v - u) * u - p[3];
        j[1] = p[1] * autocatalysis;
        j[2] = -p[3];
        j[3] = 0.0;
    })
}

/// Hx = x^3 - x, H = y^2/2 - x^2/2 + x^4/4, x' = y - eps Hx (H - h), y' = -Hx - eps y (H - h); parameters eps, h.
pub(crate) fn saddle_loop() -> TestField {
    TestField::new(2, 2, |_, s, p, f, j| {
        let (x, y, eps) = (s[0], s[1], p[0]);
        let (hx, hxx) = (x * x * x - x, 3.0 * x * x - 1.0);
        let d = y * y / 2.0 - x * x / 2.0 + x.powi(4) / 4.0 - p[1];
        f.copy_from_slice(&[y - eps * hx * d, -hx - eps * y * d]);
        j[0] = -eps * (hxx * d + hx * hx);
        j[1] = 1.0 - eps * hx * y;
        j[2] = -hxx - eps * y * hx;
        j[3] = -eps * (d + y * y);
    })
}

/// x_i' = Sum a_ij x_j + Sum b_ijk x_j x_k - x_i |x|^2 with parameters a (n n numbers), then b (n n n numbers): the
/// last term keeps every motion bounded.
pub(crate) fn random_quadratic(n: usize) -> TestField {
    TestField::new(n, n * n + n * n * n, |_, x, p, f, j| {
        let n = x.len();
        let square: f64 = x.iter().map(|x| x * x).sum();
        for i in 0..n {
            f[i] = -x[i] * square;
            for l in 0..n {
                j[i * n + l] = p[i * n + l] - 2.0 * x[i] * x[l];
                f[i] += p[i * n + l] * x[l];
                for k in 0..n {
                    let b = p[n * n + (i * n + l) * n + k];
                    f[i] += b * x[l] * x[k];
                    j[i * n + l] += b * x[k];
                    // The other factor's derivative is added where its index comes by.
                    j[i * n + l] += p[n * n + (i * n + k) * n + l] * x[k];
                }
            }
            j[i * n + i] -= square;
        }
    })
}

/// A twisted band (parameters mu, kap, om). Exact: the cycle is the unit circle in the plane z = 0, T = 2 pi/om,
/// multipliers 1, -exp(mu T), -exp(-kap T).
pub(crate) fn twisted_band() -> TestField {
    TestField::new(3, 3, |_, x, p, f, j| {
        let (mu, kap, om) = (p[0], p[1], p[2]);
        let (r, z) = (x[0].hypot(x[1]), x[2]);
        let (q, c, s) = (r - 1.0, x[0] / r, x[1] / r);
        let u = 0.5 * (q * q + z * z + c * (q * q - z * z) + 2.0 * s * q * z);
        let a = 0.5 * (mu - kap);
        let b = 0.5 * (mu + kap);
        let big = -0.5 * om * z + a * q + b * (c * q + s * z) - u * q;
        f[0] = big * c - om * x[1];
        f[1] = big * s + om * x[0];
        f[2] = 0.5 * om * q + a * z + b * (s * q - c * z) - u * z;
        // Derivatives by q, c, s, z first, then by x and y through them.
        let (u_q, u_z) = (q + c * q + s * z, z - c * z + s * q);
        let (u_c, u_s) = (0.5 * (q * q - z * z), q * z);
        let big_by = [a + b * c - u_q * q - u, b * q - u_c * q, b * z - u_s * q, -0.5 * om + b * s - u_z * q];
        let rate_by = [0.5 * om + b * s - u_q * z, -b * z - u_c * z, b * q - u_s * z, a - b * c - u_z * z - u];
        let by_x = [c, s * s / r, -c * s / r];
        let by_y = [s, -c * s / r, c * c / r];
        let chain = |d: &[f64; 4], by: &[f64; 3]| d[0] * by[0] + d[1] * by[1] + d[2] * by[2];
        j[0] = chain(&big_by, &by_x) * c + big * by_x[1];
        j[1] = chain(&big_by, &by_y) * c + big * by_y[1] - om;
        j[2] = big_by[3] * c;
        j[3] = chain(&big_by, &by_x) * s + big * by_x[2] + om;
        j[4] = chain(&big_by, &by_y) * s + big * by_y[2];
        j[5] = big_by[3] * s;
        j[6] = chain(&rate_by, &by_x);
        j[7] = chain(&rate_by, &by_y);
        j[8] = rate_by[3];
    })
}

/// A circle that drives an oscillator by 0.1 (x - x r), which vanishes on it: x^2 + y^2 = r -> 1, and u, v die out
/// at the rate 0.3 while they turn at 1.618.
pub(crate) fn dying_oscillator() -> TestField {
    TestField::new(4, 0, |_, w, _, f, j| {
        let (x, y, u, v) = (w[0], w[1], w[2], w[3]);
        let (r, s) = (x * x + y * y, u * u + v * v);
        let (g, h) = (1.0 - r - 2.0 * s, 0.2 - 0.5 * r - s);
        f.copy_from_slice(&[x * g - y, y * g + x, u * h - 1.618 * v + 0.1 * (x - x * r), v * h + 1.618 * u]);
        j[..4].copy_from_slice(&[g - 2.0 * x * x, -2.0 * x * y - 1.0, -4.0 * x * u, -4.0 * x * v]);
        j[4..8].copy_from_slice(&[1.0 - 2.0 * x * y, g - 2.0 * y * y, -4.0 * y * u, -4.0 * y * v]);
        let by_x = -u * x + 0.1 * (1.0 - r - 2.0 * x * x);
        j[8..12].copy_from_slice(&[by_x, -u * y - 0.2 * x * y, h - 2.0 * u * u, -1.618 - 2.0 * u * v]);
        j[12..].copy_from_slice(&[-v * x, -v * y, 1.618 - 2.0 * u * v, h - 2.0 * v * v]);
    })
}

/// Van der Pol's oscillator at mu = 1 beside z' = z (m + c x y - z^2 (1 + 0.2 x^2)), parameters m, c: z dies out for
/// m < 0, and its rate, all of it in proportion to z, has no roundoff beside it.
pub(crate) fn dying_passenger() -> TestField {
    TestField::new(3, 2, |_, w, p, f, j| {
        let (x, y, z) = (w[0], w[1], w[2]);
        let rest = p[0] + p[1] * x * y;
        f.copy_from_slice(&[y, (1.0 - x * x) * y - x, z * (rest - z * z * (1.0 + 0.2 * x * x))]);
        j[..3].copy_from_slice(&[0.0, 1.0, 0.0]);
        j[3..6].copy_from_slice(&[-2.0 * x * y - 1.0, 1.0 - x * x, 0.0]);
        j[6] = z * (p[1] * y - 0.4 * x * z * z);
        j[7] = z * p[1] * x;
        j[8] = rest - 3.0 * z * z * (1.0 + 0.2 * x * x);
    })
}

/// Prey and predator without damping (parameters a, b): x' = x (a - y), y' = y (x - b). x - b ln x + y - a ln y is
/// conserved.
pub(crate) fn prey_and_predator() -> TestField {
    TestField::new(2, 2, |_, x, p, f, j| {
        f.copy_from_slice(&[x[0] * (p[0] - x[1]), x[1] * (x[0] - p[1])]);
        j.copy_from_slice(&[p[0] - x[1], -x[0], x[1], x[0] - p[1]]);
    })
}

/// A pendulum with the damping d: q' = v, v' = -sin q - d v.
pub(crate) fn pendulum() -> TestField {
    TestField::new(2, 1, |_, x, p, f, j| {
        f.copy_from_slice(&[x[1], -x[0].sin() - p[0] * x[1]]);
        j.copy_from_slice(&[0.0, 1.0, -x[0].cos(), -p[0]]);
    })
}
