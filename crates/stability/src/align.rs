//! One cycle told from another starting point, so that it lies nearest to a second one.
//!
//! The phase of each cycle of a branch is that nearest to its neighbour's. Round a closed branch these shifts need not add
//! up to none, as a vector carried round a loop on a sphere does not come back as it left: a cycle met again may begin
//! elsewhere on the same orbit. Under a forcing whole forcing periods are the only shifts. The shift is looked for on equidistant samples of both, then by golden section.

use armilla_collocation::Iterate;
use armilla_record::Profile;

use crate::point::CyclePoint;
use crate::problem::CycleProblem;

/// Samples of a cycle: two for each interval, within these bounds. More cost their square, and only where parameter and
/// period have come back already.
const SAMPLES: (usize, usize) = (64, 512);
/// Golden sections of the stretch between two samples: 0.618^40 = 4e-9 of it, less than a profile is known to.
const SECTIONS: usize = 40;
const GOLDEN: f64 = 0.618_033_988_749_894_8;

impl CycleProblem {
    /// Whether two cycles with their parameter values are within a distance of each other in some phase.
    pub fn is_same_cycle(&self, (a, at): (&Profile, f64), (b, there): (&Profile, f64), within: f64) -> bool {
        let (a, b) = (CyclePoint::from_profile(a, at), CyclePoint::from_profile(b, there));
        self.shifted_towards(&a, &b, within).is_some()
    }

    /// `point` shifted in time so that it lies nearest to `to`, on the mesh of `to`; none where they are farther apart than
    /// `within` in any phase.
    pub(crate) fn shifted_towards(&self, point: &CyclePoint, to: &CyclePoint, within: f64) -> Option<CyclePoint> {
        let (a, b) = (&point.unknowns, &to.unknowns);
        let parameter = (a.parameter - b.parameter).abs() / self.metric.parameter_scale;
        let period = (a.period - b.period).abs() / self.metric.period_scale;
        if !(parameter <= within && period <= within) {
            return None;
        }
        let (profile, wanted) = (self.profile(point), self.profile(to));
        let shift = match self.system.forced() {
            Some(_) => self.best_of_shifts(&profile, &wanted, self.periods_of(point)),
            None => self.best_shift(&profile, &wanted),
        };
        let mut evaluator = profile.evaluator();
        let mut nodes = vec![0.0; wanted.values.len()];
        for (node, time) in nodes.chunks_exact_mut(profile.n_states).zip(wanted.node_times()) {
            evaluator.at(time + shift, node);
        }
        let shifted = CyclePoint { unknowns: Iterate { nodes, ..point.unknowns.clone() }, ..to.clone() };
        (armilla_follow::Problem::distance(self, &shifted, to) <= within).then_some(shifted)
    }

    /// The shift of scaled time by which `profile` lies nearest to `wanted`.
    fn best_shift(&self, profile: &Profile, wanted: &Profile) -> f64 {
        let count = (2 * wanted.intervals()).clamp(SAMPLES.0, SAMPLES.1);
        let (here, there) = (self.samples(profile, 0.0, count), self.samples(wanted, 0.0, count));
        let n = profile.n_states;
        let apart = |shift: usize| {
            let (head, tail) = here.split_at(shift * n);
            tail.iter().chain(head).zip(&there).map(|(a, b)| (a - b).powi(2)).sum::<f64>()
        };
        let nearest = (0..count).min_by(|a, b| apart(*a).total_cmp(&apart(*b))).unwrap_or(0);
        let step = 1.0 / count as f64;
        let (mut low, mut high) = ((nearest as f64 - 1.0) * step, (nearest as f64 + 1.0) * step);
        let exactly = |shift: f64| {
            let here = self.samples(profile, shift, count);
            here.iter().zip(&there).map(|(a, b)| (a - b).powi(2)).sum::<f64>()
        };
        for _ in 0..SECTIONS {
            let (a, b) = (high - GOLDEN * (high - low), low + GOLDEN * (high - low));
            if exactly(a) < exactly(b) { high = b } else { low = a }
        }
        0.5 * (low + high)
    }

    /// Sum of squared distances of a profile, shifted, from another one at equidistant times.
    pub(crate) fn apart(&self, profile: &Profile, wanted: &Profile, shift: f64) -> f64 {
        let count = (2 * wanted.intervals()).clamp(SAMPLES.0, SAMPLES.1);
        let (here, there) = (self.samples(profile, shift, count), self.samples(wanted, 0.0, count));
        here.iter().zip(&there).map(|(a, b)| (a - b).powi(2)).sum()
    }

    /// States at equidistant times from a shift on, each in units of its scale.
    fn samples(&self, profile: &Profile, shift: f64, count: usize) -> Vec<f64> {
        let n = profile.n_states;
        let mut evaluator = profile.evaluator();
        let mut samples = vec![0.0; count * n];
        for (k, state) in samples.chunks_exact_mut(n).enumerate() {
            evaluator.at(k as f64 / count as f64 + shift, state);
            state.iter_mut().zip(&self.metric.scales).for_each(|(value, scale)| *value /= scale);
        }
        samples
    }
}
