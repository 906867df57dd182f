//! How finely the linear equation `v' = T A(t) v` is cut, and by what scheme each piece is passed.
//!
//! Resolving a rate lambda along a whole cycle takes about `2/m Int |lambda| dt` pieces. Where the norm of A asks for
//! few, that is done, by Gauss collocation. Where it asks for many, the eigenvalues of A tell which directions are
//! merely damped: what such a direction contributes is not worth its pieces, so the `dropped` strongest of them at
//! each place are left to an L-stable scheme and only the others are resolved. As few are left as the pieces allowed
//! permit; the trace tells what one of them amounts to, and nothing short of resolving tells two apart. Oscillations
//! and repelling directions decide about stability and are always resolved.

use armilla_linalg::{PeriodicSchur, ScaledMultiplier};

/// Pieces per mesh interval, on the average, that are cut without asking which directions are worth it. Fewer ask more
/// often, at the price of eigenvalues; more waste pieces on damped directions.
const EASY: usize = 16;
/// The same for a whole cycle: below so many pieces asking costs as much as cutting.
const EASY_IN_ALL: usize = 1024;
/// Pieces of a whole cycle spent on merely damped directions, at fineness 1. More resolve stronger damping, at a cost in
/// proportion; with degree 6 they carry rates up to some 12 000 over the period, beyond which multipliers are not
/// resolved.
const MOST_FOR_DAMPED: usize = 1 << 12;
/// Pieces of a whole cycle at any fineness, all of them perhaps for directions that decide about stability. Beyond, the
/// multipliers fail; a piece takes some microseconds for three states, and its map is kept.
const MOST: usize = 1 << 17;
/// Least share of |lambda| that |Re lambda| is of a direction called damped or repelling. Slower ones wind round so often
/// while they decay that an L-stable scheme would decide their side.
const SECTOR: f64 = 0.5;

/// How one mesh interval is passed.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Cut {
    /// Equal pieces it is cut into.
    pub pieces: usize,
    /// What they are like.
    pub stiffness: Stiffness,
}

/// What a piece is like.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Stiffness {
    /// Cut finely enough for the accurate scheme.
    None,
    /// Some direction is damped too strongly for it.
    Damped,
    /// Some direction repels too strongly for it.
    Repelling,
}

/// How a whole cycle is passed.
#[derive(Clone, Debug)]
pub(crate) struct Plan {
    /// One entry per mesh interval.
    pub cuts: Vec<Cut>,
    /// Largest number of directions left to an L-stable scheme at one place.
    pub dropped: usize,
    /// `Int |A| dt`: rounding of A moves a log multiplier by this times the machine's epsilon.
    pub stiffness: f64,
}

/// A mesh interval repels or oscillates too fast to be resolved with the pieces allowed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct TooStiff {
    /// Index of the mesh interval.
    pub interval: usize,
}

impl std::fmt::Display for TooStiff {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "mesh interval {} repels or oscillates too fast for multipliers to be told", self.interval)
    }
}

impl std::error::Error for TooStiff {}

/// Jacobians at some places of every mesh interval, as they are evaluated.
pub(crate) struct Samples<'a> {
    /// Lengths `h T` of the mesh intervals.
    pub lengths: &'a [f64],
    /// Places per interval.
    pub per_interval: usize,
    /// Row and column of each entry.
    pub entries: &'a [(usize, usize)],
    /// Entry by entry the values at all places, interval by interval.
    pub jacobian: &'a [f64],
    /// Sizes of the n states.
    pub scales: &'a [f64],
}

/// Rates of one mesh interval.
struct Rates {
    /// Whether the strongest direction that may be dropped repels.
    repelling: bool,
    /// `by_dropped[r]`: largest |lambda| where the r strongest such directions are dropped.
    by_dropped: Vec<f64>,
}

/// Plans for one number of states and degree.
pub(crate) struct LinearMesh {
    /// Largest `h T |lambda|` of a piece at fineness 1: half the degree, where Gauss collocation has 1e-6 or better.
    reach: f64,
    schur: PeriodicSchur,
    found: Vec<ScaledMultiplier>,
}

impl LinearMesh {
    pub(crate) fn new(degree: usize) -> Self {
        Self { reach: 0.5 * degree as f64, schur: PeriodicSchur::new(), found: Vec::new() }
    }

    /// Cuts at a `fineness`, which divides the largest `h T |lambda|` of a piece.
    pub(crate) fn plan(&mut self, samples: &Samples<'_>, fineness: f64) -> Result<Plan, TooStiff> {
        let norms = samples.norms();
        let wanted = |interval: usize, rate: f64, fineness: f64| {
            (rate * samples.lengths[interval] * fineness / self.reach).ceil().max(1.0)
        };
        let stiffness = norms.iter().zip(samples.lengths).map(|(norm, length)| norm * length).sum();
        let easy: f64 = norms.iter().enumerate().map(|(interval, &norm)| wanted(interval, norm, 1.0)).sum();
        if easy <= EASY_IN_ALL.max(EASY * norms.len()) as f64 {
            let accurate = |(interval, &norm): (usize, &f64)| Cut {
                pieces: wanted(interval, norm, fineness) as usize,
                stiffness: Stiffness::None,
            };
            return Ok(Plan { cuts: norms.iter().enumerate().map(accurate).collect(), dropped: 0, stiffness });
        }
        let rates: Vec<Rates> =
            (0..norms.len()).map(|interval| self.rates(samples, interval, norms[interval])).collect();
        let dropped = self.to_drop(samples, &rates, fineness)?;
        let cuts = rates.iter().zip(samples.lengths).map(|(rates, length)| self.cut(rates, *length, dropped, fineness));
        Ok(Plan { cuts: cuts.collect(), dropped, stiffness })
    }

    /// Directions that may be dropped and the rates that are left, from the eigenvalues on one interval.
    fn rates(&mut self, samples: &Samples<'_>, interval: usize, norm: f64) -> Rates {
        let n = samples.scales.len();
        // Resolved by a piece anyhow.
        if norm * samples.lengths[interval] <= self.reach {
            return Rates { repelling: false, by_dropped: vec![norm; n + 1] };
        }
        let mut spectra = Vec::with_capacity(samples.per_interval);
        for place in samples.places(interval) {
            if self.schur.multipliers(n, &samples.matrix(place), &mut self.found).is_err() {
                return Rates { repelling: false, by_dropped: vec![norm; n + 1] };
            }
            // Modulus and the cosine of the angle: largest modulus first.
            spectra.push(self.found.iter().map(|l| (l.log_modulus.exp(), l.angle.cos())).collect::<Vec<(f64, f64)>>());
        }
        let strongest = |sign: f64| {
            let inside = spectra.iter().flatten().filter(|(_, cosine)| sign * cosine >= SECTOR);
            inside.map(|(modulus, _)| *modulus).fold(0.0, f64::max)
        };
        let repelling = strongest(1.0) > strongest(-1.0);
        let sign = if repelling { 1.0 } else { -1.0 };
        let mut by_dropped = vec![0.0f64; n + 1];
        for spectrum in &spectra {
            let mut dropped = 0;
            for &(modulus, cosine) in spectrum {
                let droppable = sign * cosine >= SECTOR;
                let needed = if droppable { dropped } else { n };
                by_dropped[..=needed].iter_mut().for_each(|rate| *rate = rate.max(modulus));
                dropped += usize::from(droppable);
            }
        }
        Rates { repelling, by_dropped }
    }

    /// How many directions to drop: as few as the pieces allowed permit.
    fn to_drop(&self, samples: &Samples<'_>, rates: &[Rates], fineness: f64) -> Result<usize, TooStiff> {
        let total = |dropped: usize, fineness: f64| -> f64 {
            let pieces = |(rates, length): (&Rates, &f64)| self.pieces(rates, *length, dropped, fineness);
            rates.iter().zip(samples.lengths).map(pieces).sum()
        };
        let n = samples.scales.len();
        let afforded = |dropped: &usize| total(*dropped, 1.0) <= MOST_FOR_DAMPED as f64;
        let dropped = (1..=n).find(afforded).unwrap_or(n);
        if total(dropped, fineness) <= MOST as f64 {
            return Ok(dropped);
        }
        let rate = |interval: usize| rates[interval].by_dropped[n] * samples.lengths[interval];
        let worst = (0..rates.len()).max_by(|a, b| rate(*a).total_cmp(&rate(*b)));
        Err(TooStiff { interval: worst.unwrap_or(0) })
    }

    /// Pieces of an interval, a whole number that may be huge. Also where one would do, a finer plan has more, so that
    /// two can be compared.
    fn pieces(&self, rates: &Rates, length: f64, dropped: usize, fineness: f64) -> f64 {
        let kept = (rates.by_dropped[dropped] * length / self.reach).max(1.0);
        (kept * fineness).ceil()
    }

    fn cut(&self, rates: &Rates, length: f64, dropped: usize, fineness: f64) -> Cut {
        let pieces = self.pieces(rates, length, dropped, fineness);
        let stiffness = match () {
            () if rates.by_dropped[0] * length <= self.reach * pieces => Stiffness::None,
            () if rates.repelling => Stiffness::Repelling,
            () => Stiffness::Damped,
        };
        Cut { pieces: pieces as usize, stiffness }
    }
}

impl Samples<'_> {
    /// Places of one interval.
    fn places(&self, interval: usize) -> std::ops::Range<usize> {
        interval * self.per_interval..(interval + 1) * self.per_interval
    }

    /// The entries of the scaled Jacobian at a place: row, column, value.
    fn at(&self, place: usize) -> impl Iterator<Item = (usize, usize, f64)> + '_ {
        let places = self.lengths.len() * self.per_interval;
        let scaled = move |(entry, &(a, b)): (usize, &(usize, usize))| {
            (a, b, self.jacobian[entry * places + place] * self.scales[b] / self.scales[a])
        };
        self.entries.iter().enumerate().map(scaled)
    }

    /// Largest row sum on each interval.
    fn norms(&self) -> Vec<f64> {
        let mut row_sums = vec![0.0; self.scales.len()];
        let mut norm = |interval| {
            self.places(interval).fold(0.0f64, |norm, place| {
                row_sums.fill(0.0);
                self.at(place).for_each(|(row, _, value)| row_sums[row] += value.abs());
                row_sums.iter().fold(norm, |norm, sum| norm.max(*sum))
            })
        };
        (0..self.lengths.len()).map(&mut norm).collect()
    }

    /// The scaled Jacobian at a place, n x n row-major.
    fn matrix(&self, place: usize) -> Vec<f64> {
        let n = self.scales.len();
        let mut matrix = vec![0.0; n * n];
        self.at(place).for_each(|(row, column, value)| matrix[row * n + column] += value);
        matrix
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn plan(matrix: &[f64], length: f64, fineness: f64) -> Result<Plan, TooStiff> {
        let n = matrix.len().isqrt();
        let entries: Vec<(usize, usize)> = (0..n * n).map(|entry| (entry / n, entry % n)).collect();
        let (lengths, scales) = (&[length], &vec![1.0; n]);
        let samples = Samples { lengths, per_interval: 1, entries: &entries, jacobian: matrix, scales };
        LinearMesh::new(6).plan(&samples, fineness)
    }

    /// By hand: one damped direction of rate 1e6 is left to the scheme, 1e3 is resolved: 1000 x 6 / 3 x 2 pieces.
    #[test]
    fn the_strongest_damping_costs_no_pieces() {
        let found = plan(&[-1e6, 0.0, 0.0, 0.0, -1e3, 0.0, 0.0, 0.0, -1.0], 6.0, 2.0).expect("a plan");
        assert_eq!((found.dropped, found.cuts[0].pieces, found.cuts[0].stiffness), (1, 4000, Stiffness::Damped));
    }

    #[test]
    fn two_strong_dampings_are_both_dropped() {
        let found = plan(&[-1e6, 0.0, 0.0, 0.0, -2e5, 0.0, 0.0, 0.0, -1.0], 6.0, 1.0).expect("a plan");
        assert_eq!((found.dropped, found.cuts[0].pieces, found.cuts[0].stiffness), (2, 2, Stiffness::Damped));
    }

    /// By hand: eigenvalues -0.1 ± 1e4 i; an L-stable scheme would damp what may grow.
    #[test]
    fn oscillations_are_resolved_or_refused() {
        let found = plan(&[-0.1, 1e4, -1e4, -0.1], 6.0, 1.0).expect("a plan");
        assert_eq!(found.cuts[0].stiffness, Stiffness::None);
        assert!(found.cuts[0].pieces >= 20_000);
        assert_eq!(plan(&[-0.1, 1e6, -1e6, -0.1], 6.0, 1.0).expect_err("too fast"), TooStiff { interval: 0 });
    }

    /// Damped and repelling at one place: the weaker of the two is resolved.
    #[test]
    fn only_one_side_is_dropped() {
        let found = plan(&[-1e6, 0.0, 0.0, 0.0, 500.0, 0.0, 0.0, 0.0, -1.0], 6.0, 2.0).expect("a plan");
        assert_eq!((found.dropped, found.cuts[0].pieces, found.cuts[0].stiffness), (1, 2000, Stiffness::Damped));
        let found = plan(&[1e6, 0.0, 0.0, 0.0, -500.0, 0.0, 0.0, 0.0, -1.0], 6.0, 2.0).expect("a plan");
        assert_eq!((found.dropped, found.cuts[0].pieces, found.cuts[0].stiffness), (1, 2000, Stiffness::Repelling));
    }
}
