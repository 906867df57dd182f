//! Normal form of a Hopf point.
//!
//! With `A q = i omega q`, `psi^H A = i omega psi^H`, `q^H q = 1`, `psi^H q = 1` and the derivative forms B, C of the rates,
//! the motion on the centre manifold is `z' = (i omega + lambda' (p - p0)) z + c z |z|^2`, the states being
//! `x0 + 2 Re(z q) + h11 |z|^2 + Re(h20 z^2)` (Kuznetsov 2004, Elements of Applied Bifurcation Theory, 3rd ed., sec. 5.4):
//!
//! ```text
//! h11 = -A^(-1) B(q, conj q)       h20 = (2 i omega - A)^(-1) B(q, q)
//! c = 1/2 psi^H (C(q, q, conj q) + 2 B(q, h11) + B(conj q, h20))       l1 = Re c / omega
//! ```
//! l1 < 0: the cycles are born on the side where the equilibrium has lost its stability. Its size depends on the units of
//! the states through `q^H q = 1`, its sign does not. `lambda' = psi^H (A_p + B(x', .)) q`, `x' = -A^(-1) f_p`.

use super::local::{Along, Local};
use super::locate::{LocatedRest, Vectors};
use super::point::EquilibriumPoint;
use super::problem::EquilibriumProblem;
use super::systems::{Border, Complex};

/// Normal form of a Hopf point.
#[derive(Clone, Debug, PartialEq)]
pub struct HopfForm {
    /// First Lyapunov coefficient, in the inverse square of the states' units.
    pub l1: f64,
    /// Whether its sign stands out of rounding.
    pub is_sure: bool,
    /// `c`, complex.
    pub(crate) cubic: (f64, f64),
    /// `lambda'`, complex.
    pub(crate) slope: (f64, f64),
    /// Derivative of the equilibrium in the parameter.
    pub(crate) shift: Vec<f64>,
    pub(crate) h11: Vec<f64>,
    pub(crate) h20: Complex,
    /// q of Euclidean length 1.
    pub(crate) q: Complex,
}

/// Share of the terms that l1 is summed from within which its sign is rounding.
const ROUNDING: f64 = 1e-10;

impl HopfForm {
    /// Offset of the parameter on the cycle with `z` of this modulus, to leading order.
    pub(crate) fn offset(&self, modulus: f64) -> f64 {
        -self.cubic.0 / self.slope.0 * modulus * modulus
    }

    /// Change of the frequency there.
    pub(crate) fn detuning(&self, modulus: f64) -> f64 {
        self.slope.1 * self.offset(modulus) + self.cubic.1 * modulus * modulus
    }
}

/// `B(u, v)` of complex vectors.
fn second(local: &mut Local, at: &EquilibriumPoint, u: &Complex, v: &Complex) -> Complex {
    let mut real = |a: &[f64], b: &[f64]| local.second(at, Along::states(a), Along::states(b));
    let (aa, bb) = (real(&u.re, &v.re), real(&u.im, &v.im));
    let (ab, ba) = (real(&u.re, &v.im), real(&u.im, &v.re));
    Complex {
        re: aa.iter().zip(&bb).map(|(x, y)| x - y).collect(),
        im: ab.iter().zip(&ba).map(|(x, y)| x + y).collect(),
    }
}

/// `C(q, q, conj q)`; none by a field without third derivatives.
fn third(local: &mut Local, at: &EquilibriumPoint, q: &Complex) -> Option<Complex> {
    let mut real = |u: &[f64], v: &[f64], w: &[f64]| local.third(at, [u, v, w]).ok();
    let (a, b) = (&q.re[..], &q.im[..]);
    let (aaa, abb) = (real(a, a, a)?, real(a, b, b)?);
    let (aab, bbb) = (real(a, a, b)?, real(b, b, b)?);
    let sum = |x: &[f64], y: &[f64]| x.iter().zip(y).map(|(x, y)| x + y).collect();
    Some(Complex { re: sum(&aaa, &abb), im: sum(&aab, &bbb) })
}

impl EquilibriumProblem {
    /// Normal form of a located Hopf point; none where third derivatives are missing or another eigenvalue is 0 too.
    pub fn hopf_form(&mut self, located: &LocatedRest) -> Option<HopfForm> {
        let Vectors::Complex { q, psi } = &located.vectors else { return None };
        let (omega, at) = (located.frequency.0, &located.point);
        let n = at.state.len();
        let length = q.product(q).0.sqrt();
        let q = q.times((1.0 / length, 0.0));
        // psi^H q = 1: psi over the conjugate of what it is.
        let (re, im) = psi.product(&q);
        let square = re * re + im * im;
        let psi = psi.times((re / square, im / square));
        self.local.linearise(at).ok()?;
        let squares = second(&mut self.local, at, &q, &q.conjugate()).re;
        let h11: Vec<f64> = self.real_solve(&squares)?.into_iter().map(|value| -value).collect();
        let column = self.local.column.clone();
        let shift: Vec<f64> = self.real_solve(&column)?.into_iter().map(|value| -value).collect();
        let doubled = second(&mut self.local, at, &q, &q);
        let h20 = self.shifted_solve(2.0 * omega, &doubled)?.times((-1.0, 0.0));
        let real = Complex { re: h11.clone(), im: vec![0.0; n] };
        let terms = [
            third(&mut self.local, at, &q)?,
            second(&mut self.local, at, &q, &real).times((2.0, 0.0)),
            second(&mut self.local, at, &q.conjugate(), &h20),
        ];
        let parts = terms.each_ref().map(|term| psi.product(term));
        let cubic = parts.iter().fold((0.0, 0.0), |sum, part| (sum.0 + 0.5 * part.0, sum.1 + 0.5 * part.1));
        let moduli = psi.moduli();
        let size = |term: &Complex| moduli.iter().zip(term.moduli()).map(|(p, t)| p * t).sum::<f64>();
        let largest: f64 = terms.iter().map(size).sum();
        let mut along = |v: &[f64]| self.local.second(at, Along::states(v), Along { states: &shift, parameter: 1.0 });
        let moved = Complex { re: along(&q.re), im: along(&q.im) };
        let slope = psi.product(&moved);
        let l1 = cubic.0 / omega;
        let sound = l1.is_finite() && slope.0.is_finite() && slope.1.is_finite();
        let is_sure = cubic.0.abs() > ROUNDING * largest;
        sound.then_some(HopfForm { l1, is_sure, cubic, slope, shift, h11, h20, q })
    }

    /// `A^(-1) right` at the last point linearised.
    pub(crate) fn real_solve(&mut self, right: &[f64]) -> Option<Vec<f64>> {
        let n = right.len();
        let hold = vec![0.0; n];
        let border = Border { column: &hold, row: &hold, corner: 1.0 };
        let system = self.systems.single(&self.local.jacobian, 0.0, &border)?;
        let mut solved = right.to_vec();
        solved.push(0.0);
        system.solve(&mut solved);
        solved.truncate(n);
        solved.iter().all(|value| value.is_finite()).then_some(solved)
    }

    /// `(A - i omega)^(-1) right` at the last point linearised.
    fn shifted_solve(&mut self, omega: f64, right: &Complex) -> Option<Complex> {
        let n = right.re.len();
        let none = Complex::zero(n);
        let system = self.systems.twin(&self.local.jacobian, (0.0, omega), (&none, &none), 1.0)?;
        let mut solved: Vec<f64> = right.re.iter().chain(&right.im).copied().collect();
        solved.extend([0.0, 0.0]);
        system.solve(&mut solved);
        solved.iter().all(|value| value.is_finite()).then(|| Complex::of_twin(n, &solved))
    }
}
