//! Floquet multipliers of a cycle from its interval maps.
//!
//! The trivial multiplier is taken out by its known vector, the rate at each mesh point: in the orthogonal basis
//! whose first vector is the (scaled) rate, every interval map of a free cycle is block triangular, and the remaining (n-1) x
//! (n-1) blocks go to the periodic Schur form (Fairgrieve & Jepson 1991, SIAM J. Numer. Anal. 28:1446, on why
//! from the sequence; Bojanczyk, Golub & Van Dooren 1992, Proc. SPIE 1770:31). Two audits come along: how far the
//! deflated multiplier is from 1, and how far the sum of all log-moduli is from the integral of the divergence
//! (Liouville's formula).

use armilla_collocation::{MapsFault, Variational, VariationalMaps};
use armilla_linalg::{NotConverged, PeriodicSchur, ScaledMultiplier};
use armilla_model::VectorField;
use armilla_record::{Multiplier, Profile, Unresolved};

use crate::agreement::{Reading, Resolved, SideUnknown};

/// Multipliers of a cycle with their audits.
#[derive(Clone, Debug, PartialEq)]
pub struct Spectrum {
    /// The multipliers besides the trivial one and those that are not resolved, largest modulus first: n-1 in all, n under a
    /// forcing, where none is trivial.
    pub multipliers: Vec<Multiplier>,
    /// |trivial multiplier - 1|, 0 under a forcing.
    pub trivial_defect: f64,
    /// |sum of log-moduli - integral of the divergence|. Where a multiplier is given by that integral: by how much it
    /// may be off, from the trivial multiplier and from how far two linear meshes agree on the others.
    pub liouville_defect: f64,
    /// Whether a stretch was too stiff for the accurate scheme.
    pub damped: bool,
    /// Multipliers too small to be told from each other; never outside the unit circle.
    pub unresolved: Option<Unresolved>,
}

/// Why there are no multipliers.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SpectrumFault {
    /// The variational equation could not be passed.
    Maps(MapsFault),
    /// The periodic QR iteration did not converge.
    NotConverged(NotConverged),
    /// The rate vanishes at a mesh point: the cycle touches an equilibrium.
    AtRest,
    /// Damping and repulsion along the cycle are too strong to tell on which side of the unit circle a multiplier lies.
    SideUnknown,
}

impl std::fmt::Display for SpectrumFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Maps(fault) => fault.fmt(f),
            Self::NotConverged(fault) => fault.fmt(f),
            Self::AtRest => write!(f, "the cycle touches an equilibrium"),
            Self::SideUnknown => {
                write!(f, "damping and repulsion along the cycle are too strong to tell whether it is stable")
            }
        }
    }
}

impl std::error::Error for SpectrumFault {}

impl Spectrum {
    /// Number of multipliers outside the unit circle, pairs by more than they are known to: those of a conservative model stay
    /// on it. (Real ones go with the signs of the products below.)
    pub fn unstable_count(&self) -> usize {
        /// |log mu| that says no side, whatever the trivial multiplier is off by.
        const NO_SIDE: f64 = 1e-10;
        /// Multiple of what the trivial multiplier is off by that another may be.
        const MARGIN: f64 = 4.0;
        let side = NO_SIDE.max(MARGIN * self.trivial_defect);
        let is_real = |mu: &Multiplier| mu.angle == 0.0 || mu.angle == std::f64::consts::PI;
        let outside = |mu: &&Multiplier| mu.log_modulus > if is_real(mu) { 0.0 } else { side };
        self.multipliers.iter().filter(outside).count()
    }

    /// `Prod (mu + 1)` over the multipliers, each factor scaled to modulus at most about 1: negative real multipliers
    /// beyond -1 make it change sign.
    pub fn doubling_product(&self) -> f64 {
        self.multipliers.iter().filter(|mu| mu.angle >= 0.0).map(|mu| distance_to_unit(*mu, -1.0)).product()
    }

    /// `Prod (mu - 1)` over the multipliers besides the trivial one, scaled alike: a real multiplier that passes +1, at a
    /// fold or where another branch crosses, makes it change sign.
    pub fn branching_product(&self) -> f64 {
        self.multipliers.iter().filter(|mu| mu.angle >= 0.0).map(|mu| distance_to_unit(*mu, 1.0)).product()
    }

    /// `Prod (|mu|^2 - 1)` over complex pairs, scaled; 1 where there is none. A pair crossing the unit circle makes it
    /// change sign; a pair that becomes real only makes it jump without one where that happens off the circle.
    pub fn torus_product(&self) -> f64 {
        let pairs = self.multipliers.iter().filter(|mu| mu.angle > 0.0 && mu.angle < std::f64::consts::PI);
        // tanh maps the log-modulus of the squared modulus to (-1, 1) with its sign.
        pairs.map(|mu| -mu.log_modulus.tanh()).product()
    }

    /// log-modulus of the real positive multiplier nearest to 1, the critical one of a branch just born.
    pub fn nearest_to_one(&self) -> Option<f64> {
        let real = self.multipliers.iter().filter(|mu| mu.angle == 0.0).map(|mu| mu.log_modulus);
        real.min_by(|a, b| a.abs().total_cmp(&b.abs()))
    }
}

/// `(mu - at) / sqrt(1 + mu^2)` for real mu, `|mu - at|^2 / (1 + |mu|^2)` for a pair, at = -1 or 1; from logarithms, so
/// that no modulus overflows.
fn distance_to_unit(mu: Multiplier, at: f64) -> f64 {
    // With r = |mu| <= 1, or its inverse beyond: both forms are symmetric under mu -> 1/mu up to a sign.
    let inside = mu.log_modulus <= 0.0;
    let r = (-mu.log_modulus.abs()).exp();
    if mu.angle == 0.0 || mu.angle == std::f64::consts::PI {
        let sign = if mu.angle == 0.0 { 1.0 } else { -1.0 };
        let difference = if inside { sign * r - at } else { sign - at * r };
        return difference / (1.0 + r * r).sqrt();
    }
    (1.0 + r * r - 2.0 * at * r * mu.angle.cos()) / (1.0 + r * r)
}

/// Computes spectra; owns its workspace.
pub struct SpectrumSolver {
    variational: Variational,
    is_forced: bool,
    schur: PeriodicSchur,
    found: Vec<ScaledMultiplier>,
    reduced: Vec<f64>,
}

impl SpectrumSolver {
    /// For a field and the degree of its profiles.
    pub fn new(field: &dyn VectorField, degree: usize) -> Self {
        Self {
            variational: Variational::new(field, degree),
            is_forced: field.is_forced(),
            schur: PeriodicSchur::new(),
            found: Vec::new(),
            reduced: Vec::new(),
        }
    }

    /// Spectrum of the cycle `profile`; `scales` are the sizes of the states, `accuracy` the wanted
    /// agreement with Liouville's formula relative to the sum of all |log mu|, or of two linear meshes: the linear mesh
    /// is refined until it holds.
    ///
    /// # Errors
    /// [`SpectrumFault`].
    pub fn spectrum(
        &mut self,
        profile: &Profile,
        parameters: &[f64],
        scales: &[f64],
        accuracy: f64,
    ) -> Result<Spectrum, SpectrumFault> {
        let enough = self.variational.fineness_for(accuracy);
        let mut on = |refinement: f64| self.reading(profile, parameters, (scales, enough * refinement));
        let coarse = on(FINENESS[0])?;
        match () {
            () if coarse.multipliers.len() == 1 => Ok(single(&coarse)),
            () if coarse.dropped == 0 => by_formula(coarse, on, accuracy),
            () => by_comparison(coarse, on, accuracy),
        }
    }

    /// What the linear mesh of one fineness gives.
    fn reading(
        &mut self,
        profile: &Profile,
        parameters: &[f64],
        (scales, fineness): (&[f64], f64),
    ) -> Result<Reading, SpectrumFault> {
        let maps = self.variational.maps(profile, parameters, scales, fineness).map_err(SpectrumFault::Maps)?;
        let (trivial, size) = if self.is_forced {
            scale_maps(&maps, scales, &mut self.reduced);
            (0.0, maps.n)
        } else {
            (deflate(&maps, scales, &mut self.reduced)?, maps.n - 1)
        };
        self.schur.multipliers(size, &self.reduced, &mut self.found).map_err(SpectrumFault::NotConverged)?;
        let multiplier = |mu: &ScaledMultiplier| Multiplier { log_modulus: mu.log_modulus, angle: mu.angle };
        Ok(Reading {
            multipliers: self.found.iter().map(multiplier).collect(),
            trivial,
            divergence: maps.divergence,
            stiffness: maps.stiffness,
            dropped: maps.dropped,
        })
    }
}

/// A single multiplier (of a free cycle in the plane, or of one state under a forcing) is Liouville's formula itself, and it
/// is positive: the flow keeps orientation. The audit
/// then tells how far the interval maps are from it, unless an L-stable scheme is not meant to be near.
fn single(reading: &Reading) -> Spectrum {
    let liouville_defect = if reading.dropped > 0 { reading.trivial.abs() } else { reading.defect() };
    Spectrum {
        multipliers: vec![Multiplier { log_modulus: reading.divergence, angle: 0.0 }],
        trivial_defect: reading.trivial.exp_m1().abs(),
        liouville_defect,
        damped: reading.dropped > 0,
        unresolved: None,
    }
}

/// Everything is resolved: refined until Liouville's formula holds, or roundoff forbids.
fn by_formula(
    mut best: Reading,
    mut refined: impl FnMut(f64) -> Result<Reading, SpectrumFault>,
    accuracy: f64,
) -> Result<Spectrum, SpectrumFault> {
    for &fineness in &FINENESS[1..] {
        if best.defect() <= accuracy * best.size().max(1.0) {
            break;
        }
        let finer = refined(fineness)?;
        // Past roundoff more pieces do not help.
        let stalled = !(finer.defect() < 0.5 * best.defect());
        if finer.defect() < best.defect() {
            best = finer;
        }
        if stalled {
            break;
        }
    }
    Ok(Spectrum {
        trivial_defect: best.trivial.exp_m1().abs(),
        liouville_defect: best.defect(),
        multipliers: best.multipliers,
        damped: false,
        unresolved: None,
    })
}

/// Some directions are not: refined until no more multipliers differ from mesh to mesh than were left to an L-stable
/// scheme.
fn by_comparison(
    mut coarse: Reading,
    mut refined: impl FnMut(f64) -> Result<Reading, SpectrumFault>,
    accuracy: f64,
) -> Result<Spectrum, SpectrumFault> {
    let mut fine = refined(FINENESS[1])?;
    for &fineness in &FINENESS[2..] {
        if fine.n_doubtful(&coarse, accuracy) <= fine.dropped {
            break;
        }
        match refined(fineness) {
            Ok(finer) => (coarse, fine) = (fine, finer),
            // More pieces than allowed: what is known must do.
            Err(SpectrumFault::Maps(MapsFault::TooStiff(_))) => break,
            Err(fault) => return Err(fault),
        }
    }
    let Resolved { multipliers, unresolved, defect } =
        fine.resolve(&coarse, accuracy).map_err(|SideUnknown| SpectrumFault::SideUnknown)?;
    Ok(Spectrum {
        multipliers,
        trivial_defect: fine.trivial.exp_m1().abs(),
        liouville_defect: defect,
        damped: true,
        unresolved,
    })
}

/// Refinements of the linear mesh tried in turn.
const FINENESS: [f64; 4] = [1.0, 2.0, 4.0, 8.0];

/// The maps in units of the states.
fn scale_maps(maps: &VariationalMaps, scales: &[f64], scaled: &mut Vec<f64>) {
    let n = maps.n;
    scaled.clear();
    scaled.extend(maps.maps.iter().enumerate().map(|(k, entry)| entry * scales[k % n] / scales[k / n % n]));
}

/// Splits the flow direction off every map. Writes the (n-1) x (n-1) blocks to `reduced`, returns the logarithm of
/// the trivial multiplier.
fn deflate(maps: &VariationalMaps, scales: &[f64], reduced: &mut Vec<f64>) -> Result<f64, SpectrumFault> {
    let n = maps.n;
    let count = maps.flow.len() / n;
    let mut reflectors = vec![0.0; count * n];
    for (v, flow) in reflectors.chunks_exact_mut(n).zip(maps.flow.chunks_exact(n)) {
        if !reflector(flow, scales, v) {
            return Err(SpectrumFault::AtRest);
        }
    }
    reduced.clear();
    reduced.reserve(count * (n - 1) * (n - 1));
    let mut trivial = 0.0;
    let mut scaled = vec![0.0; n * n];
    for (index, map) in maps.maps.chunks_exact(n * n).enumerate() {
        for a in 0..n {
            for b in 0..n {
                scaled[a * n + b] = map[a * n + b] * scales[b] / scales[a];
            }
        }
        let before = &reflectors[index * n..(index + 1) * n];
        let next = (index + 1) % count;
        let after = &reflectors[next * n..(next + 1) * n];
        reflect_columns(n, before, &mut scaled);
        reflect_rows(n, after, &mut scaled);
        // Both reflections send the flow direction to the same signed axis, so this entry is the stretch along it.
        trivial += (scaled[0] * signed_axis(maps, scales, index) * signed_axis(maps, scales, next)).abs().ln();
        for row in scaled.chunks_exact(n).skip(1) {
            reduced.extend_from_slice(&row[1..]);
        }
    }
    Ok(trivial)
}

/// Sign of the axis the reflection of map `index` sends the flow to.
fn signed_axis(maps: &VariationalMaps, scales: &[f64], index: usize) -> f64 {
    let first = maps.flow[index * maps.n] / scales[0];
    if first > 0.0 { -1.0 } else { 1.0 }
}

/// v with `(I - v v^T) q = +-e_1`, |v|^2 = 2, for the unit vector q along the scaled flow; false where the flow vanishes.
fn reflector(flow: &[f64], scales: &[f64], v: &mut [f64]) -> bool {
    let largest = flow.iter().zip(scales).map(|(f, s)| (f / s).abs()).fold(0.0, f64::max);
    if !(largest > 0.0 && largest.is_finite()) {
        return false;
    }
    let norm = flow.iter().zip(scales).map(|(f, s)| (f / s / largest).powi(2)).sum::<f64>().sqrt();
    v.iter_mut().zip(flow).zip(scales).for_each(|((v, f), s)| *v = f / s / largest / norm);
    v[0] += 1.0f64.copysign(v[0]);
    let length = v.iter().map(|x| x * x).sum::<f64>();
    let factor = (2.0 / length).sqrt();
    v.iter_mut().for_each(|x| *x *= factor);
    true
}

fn reflect_columns(n: usize, v: &[f64], matrix: &mut [f64]) {
    for row in matrix.chunks_exact_mut(n) {
        let product: f64 = row.iter().zip(v).map(|(a, b)| a * b).sum();
        row.iter_mut().zip(v).for_each(|(a, b)| *a -= product * b);
    }
}

fn reflect_rows(n: usize, v: &[f64], matrix: &mut [f64]) {
    for column in 0..n {
        let product: f64 = (0..n).map(|row| v[row] * matrix[row * n + column]).sum();
        (0..n).for_each(|row| matrix[row * n + column] -= product * v[row]);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::PI;

    fn of(multipliers: &[(f64, f64)]) -> Spectrum {
        let multipliers = multipliers.iter().map(|&(log_modulus, angle)| Multiplier { log_modulus, angle }).collect();
        Spectrum { multipliers, trivial_defect: 0.0, liouville_defect: 0.0, damped: false, unresolved: None }
    }

    #[test]
    fn doubling_product_changes_sign_only_at_minus_one() {
        assert!(of(&[(0.01, PI), (-800.0, 0.0)]).doubling_product() < 0.0);
        assert!(of(&[(-0.01, PI), (-800.0, 0.0)]).doubling_product() > 0.0);
        assert!(of(&[(900.0, PI), (800.0, PI)]).doubling_product() > 0.0);
        assert!(of(&[(0.3, 2.0), (0.3, -2.0)]).doubling_product() > 0.0);
        let near = of(&[(1e-9, PI)]).doubling_product();
        assert!((near + 1e-9 / 2.0f64.sqrt()).abs() < 1e-15, "{near}");
    }
}
