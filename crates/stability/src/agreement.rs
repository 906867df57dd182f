//! Which multipliers of a strongly damped cycle are resolved.
//!
//! Where some directions are left to an L-stable scheme, Liouville's formula cannot audit: the scheme is not meant to
//! satisfy it. Two linear meshes, one twice as fine, tell instead. Multipliers on which they agree are resolved. If one
//! alone is left, Liouville's formula gives it: its log-modulus is the integral of the divergence less the sum of the
//! others, its sign the one that makes the product of all positive, for a flow keeps orientation. If several are left, all
//! from the first of them on are not resolved; only their sum is known.

use std::f64::consts::PI;

use armilla_record::{Multiplier, Unresolved};

/// What one linear mesh gives.
#[derive(Clone, Debug)]
pub(crate) struct Reading {
    /// The multipliers besides the trivial one, largest modulus first.
    pub multipliers: Vec<Multiplier>,
    /// Logarithm of the trivial one, 0 where there is none.
    pub trivial: f64,
    /// Integral of the divergence.
    pub divergence: f64,
    /// `Int |A| dt`.
    pub stiffness: f64,
    /// Largest number of directions at one place that were left to an L-stable scheme.
    pub dropped: usize,
}

/// What two linear meshes say together.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Resolved {
    /// The multipliers that are right, largest modulus first.
    pub multipliers: Vec<Multiplier>,
    /// The others.
    pub unresolved: Option<Unresolved>,
    /// By how much the log-moduli of `multipliers` may miss Liouville's formula.
    pub defect: f64,
}

/// A multiplier that is not resolved may lie outside the unit circle.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct SideUnknown;

/// Roundoff of a log-modulus, in units of epsilon times `Int |A| dt`: each entry of A is rounded a few times.
const ROUNDOFF: f64 = 10.0;

impl Reading {
    fn sum(&self) -> f64 {
        self.multipliers.iter().map(|mu| mu.log_modulus).sum()
    }

    /// Sum of |log mu|; multipliers that are exactly zero have none.
    pub(crate) fn size(&self) -> f64 {
        self.multipliers.iter().map(|mu| mu.log_modulus.abs()).filter(|x| x.is_finite()).sum()
    }

    /// |sum of all log-moduli - integral of the divergence|, infinite where a multiplier is exactly zero.
    pub(crate) fn defect(&self) -> f64 {
        let defect = (self.trivial + self.sum() - self.divergence).abs();
        if defect.is_nan() { f64::INFINITY } else { defect }
    }

    /// Agreement that can be had where `accuracy` is wanted.
    fn tolerance(&self, accuracy: f64, size: f64) -> f64 {
        accuracy * size.max(1.0) + ROUNDOFF * f64::EPSILON * self.stiffness
    }

    /// Indices of the multipliers on which `coarse` differs, a pair whole.
    fn doubtful(&self, coarse: &Self, accuracy: f64) -> Vec<usize> {
        let differs = |index: usize| {
            let (fine, coarse) = (self.multipliers[index].log_modulus, coarse.multipliers[index].log_modulus);
            !((fine - coarse).abs() <= self.tolerance(accuracy, fine.abs()))
        };
        let mut found: Vec<usize> = (0..self.multipliers.len())
            .filter(|&index| match self.multipliers[index].angle {
                angle if angle == 0.0 || angle == PI => differs(index),
                angle if angle > 0.0 => differs(index) || differs(index + 1),
                _ => differs(index - 1) || differs(index),
            })
            .collect();
        // Both may be wrong alike by accident; the formula sees that, and the last is the most damped.
        if found.is_empty() && self.defect() > self.tolerance(accuracy, self.size()) {
            found.extend(self.multipliers.len().checked_sub(1));
        }
        found
    }

    /// Number of multipliers on which `coarse` differs.
    pub(crate) fn n_doubtful(&self, coarse: &Self, accuracy: f64) -> usize {
        self.doubtful(coarse, accuracy).len()
    }

    /// What this reading and one on a coarser mesh say together.
    pub(crate) fn resolve(&self, coarse: &Self, accuracy: f64) -> Result<Resolved, SideUnknown> {
        let doubtful = self.doubtful(coarse, accuracy);
        let drift = |index: usize| (self.multipliers[index].log_modulus - coarse.multipliers[index].log_modulus).abs();
        let defect = |kept: usize| {
            let others = (0..kept).filter(|index| !doubtful.contains(index));
            self.trivial.abs() + others.map(drift).sum::<f64>()
        };
        match doubtful[..] {
            [] => Ok(Resolved { multipliers: self.multipliers.clone(), unresolved: None, defect: self.defect() }),
            [index] => {
                let multipliers = self.completed(index);
                Ok(Resolved { multipliers, unresolved: None, defect: defect(self.multipliers.len()) })
            }
            [first, ..] => {
                let unresolved = self.unresolved_from(first, coarse)?;
                let multipliers = self.multipliers[..self.multipliers.len() - unresolved.count].to_vec();
                let defect = defect(multipliers.len());
                Ok(Resolved { multipliers, unresolved: Some(unresolved), defect })
            }
        }
    }

    /// All multipliers, the one at `index` by Liouville's formula.
    fn completed(&self, index: usize) -> Vec<Multiplier> {
        let mut multipliers = self.multipliers.clone();
        multipliers.remove(index);
        let others: f64 = multipliers.iter().map(|mu| mu.log_modulus).sum();
        let negative = multipliers.iter().filter(|mu| mu.angle == PI).count() % 2 == 1;
        let angle = if negative { PI } else { 0.0 };
        let last = Multiplier { log_modulus: self.divergence - others, angle };
        let place = multipliers.partition_point(|mu| mu.log_modulus > last.log_modulus);
        multipliers.insert(place, last);
        multipliers
    }

    /// The multipliers from `first` on as not resolved.
    fn unresolved_from(&self, first: usize, coarse: &Self) -> Result<Unresolved, SideUnknown> {
        let count = self.multipliers.len() - first;
        let kept: f64 = self.multipliers[..first].iter().map(|mu| mu.log_modulus).sum();
        let log_sum = self.divergence - kept;
        let (fine, coarse) = (self.multipliers[first].log_modulus, coarse.multipliers[first].log_modulus);
        // An L-stable scheme damps too little where it is coarse, so refining moves the bound down; where it moves it
        // up, it may do so again.
        let bound = if fine > coarse { fine + (fine - coarse) } else { coarse };
        // The largest of some numbers is no less than their mean.
        let below = bound.max(log_sum / count as f64);
        if below < 0.0 { Ok(Unresolved { count, below, log_sum }) } else { Err(SideUnknown) }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn reading(logs: &[(f64, f64)], divergence: f64) -> Reading {
        let multipliers = logs.iter().map(|&(log_modulus, angle)| Multiplier { log_modulus, angle }).collect();
        Reading { multipliers, trivial: 0.0, divergence, stiffness: 1e3, dropped: 1 }
    }

    #[test]
    fn one_doubtful_multiplier_is_the_remainder_with_the_sign_that_keeps_orientation() {
        let coarse = reading(&[(0.5, 0.0), (-2.0, PI), (-90.0, 0.0)], -1000.0);
        let fine = reading(&[(0.5, 0.0), (-2.0, PI), (-150.0, 0.0)], -1000.0);
        let found = fine.resolve(&coarse, 1e-9).expect("sides known");
        assert_eq!(found.multipliers[2], Multiplier { log_modulus: -998.5, angle: PI });
        assert_eq!((found.unresolved, found.defect), (None, 0.0));
    }

    #[test]
    fn several_are_left_out_with_their_sum() {
        let coarse = reading(&[(-2.0, 0.0), (-80.0, 0.0), (-90.0, 0.0)], -1000.0);
        let fine = reading(&[(-2.0, 0.0), (-120.0, 0.0), (-150.0, 0.0)], -1000.0);
        let found = fine.resolve(&coarse, 1e-9).expect("sides known");
        assert_eq!(found.multipliers.len(), 1);
        assert_eq!(found.unresolved, Some(Unresolved { count: 2, below: -80.0, log_sum: -998.0 }));
    }

    /// A bound that refining raises is raised once more; a pair is kept or left out whole.
    #[test]
    fn the_bound_is_on_the_safe_side() {
        let coarse = reading(&[(-2.0, 0.0), (-8.0, 2.0), (-8.0, -2.0), (-90.0, 0.0)], -1000.0);
        let fine = reading(&[(-2.0, 0.0), (-6.0, 2.0), (-6.0, -2.0), (-150.0, 0.0)], -1000.0);
        let found = fine.resolve(&coarse, 1e-9).expect("sides known");
        assert_eq!(found.unresolved, Some(Unresolved { count: 3, below: -4.0, log_sum: -998.0 }));
    }

    #[test]
    fn a_side_is_never_guessed() {
        let coarse = reading(&[(3.0, 0.0), (-80.0, 0.0)], -1000.0);
        let fine = reading(&[(-0.5, 0.0), (-120.0, 0.0)], -1000.0);
        assert_eq!(fine.resolve(&coarse, 1e-9), Err(SideUnknown));
    }

    #[test]
    fn accidental_agreement_is_seen_by_the_formula() {
        let one = reading(&[(-2.0, 0.0), (-80.0, 0.0)], -1000.0);
        assert_eq!(one.resolve(&one.clone(), 1e-9).expect("sides known").multipliers[1].log_modulus, -998.0);
    }
}
