//! Branches whose numbers are random bit patterns.

use armilla_record::*;

/// SplitMix64 (Steele, Lea & Flood 2014, OOPSLA), for reproducible bits.
pub struct Bits(pub u64);

impl Bits {
    pub fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.0 ^ (self.0 >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    pub fn below(&mut self, n: u64) -> usize {
        (self.next() % n) as usize
    }

    /// Any finite f64: all exponents alike, so subnormals and huge values too, and signed zeros.
    pub fn finite(&mut self) -> f64 {
        loop {
            let value = match self.below(20) {
                0 => -0.0,
                1 => f64::from_bits(self.next() >> 12),
                2 => f64::MAX,
                3 => (self.next() % 100_000) as f64 / 1000.0,
                _ => f64::from_bits(self.next()),
            };
            if value.is_finite() {
                return value;
            }
        }
    }

    pub fn unit(&mut self) -> f64 {
        (self.next() >> 11) as f64 / (1u64 << 53) as f64
    }

    pub fn list(&mut self, n: usize) -> Vec<f64> {
        (0..n).map(|_| self.finite()).collect()
    }

    fn ascending(&mut self, n: usize) -> Vec<f64> {
        let mut all = self.list(n);
        all.sort_by(f64::total_cmp);
        all
    }

    fn optional(&mut self) -> Option<f64> {
        (self.below(2) == 0).then(|| self.finite())
    }
}

pub fn quantity(name: &str) -> Quantity {
    Quantity { name: name.into(), label: format!("{name} \"τ\"\\"), unit: "m^3/s".into() }
}

pub fn profile(bits: &mut Bits, n: usize) -> Profile {
    let (intervals, degree) = (2 + bits.below(6), 2 + bits.below(4));
    let mut mesh: Vec<f64> = (0..intervals - 1).map(|_| bits.unit().max(1e-300)).collect();
    mesh.extend([0.0, 1.0]);
    mesh.sort_by(f64::total_cmp);
    mesh.dedup();
    let nodes = (mesh.len() - 1) * degree + 1;
    Profile { n_states: n, degree, period: bits.finite().abs().max(5e-324), mesh, values: bits.list(nodes * n) }
}

fn point(bits: &mut Bits, n: usize, distance: f64) -> Point {
    let angle = [std::f64::consts::PI, 0.0, -0.0, 1.25, -3.0];
    let multipliers: Vec<Multiplier> = (1..n)
        .map(|_| Multiplier {
            log_modulus: if bits.below(5) == 0 { f64::NEG_INFINITY } else { bits.finite() },
            angle: angle[bits.below(5)],
        })
        .collect();
    Point {
        value: bits.finite(),
        period: bits.finite(),
        turns: 1 + bits.below(40),
        distance,
        unstable_count: bits.below(n as u64),
        trivial_defect: bits.finite(),
        liouville_defect: if bits.below(5) == 0 { f64::INFINITY } else { bits.finite() },
        profile_error: bits.finite(),
        maxima: bits.list(n),
        minima: bits.list(n),
        means: bits.list(n),
        spreads: bits.list(n),
        multipliers,
        intervals: bits.below(5000),
        degree: bits.below(9),
        ..Point::default()
    }
}

/// A branch as [`branch_of_format_2`] gives it, with what format 3 added: every second one is of equilibria.
pub fn branch_of_today(seed: u64, name: &str, n_points: usize) -> Branch {
    let mut branch = branch_of_format_2(seed, name, n_points);
    if seed % 2 == 1 {
        let bits = &mut Bits(seed + 177);
        branch.of = Solutions::Equilibria;
        let n = branch.states.len();
        for point in &mut branch.points {
            point.multipliers.clear();
            point.eigenvalues = (0..n).map(|_| Eigenvalue { re: bits.finite(), im: bits.finite() }).collect();
        }
    }
    branch
}

/// A branch as [`branch`] gives it, with what format 2 added.
pub fn branch_of_format_2(seed: u64, name: &str, n_points: usize) -> Branch {
    use MeshReason::*;
    let choices = [Start, Kept, Given, ProfileError, Ease, Work, LiouvilleDefect];
    let reached = [Reached::Accuracy, Reached::RoundoffFloor, Reached::MeshLimit, Reached::GivenMesh];
    let mut branch = branch(seed, name, n_points);
    let bits = &mut Bits(seed + 77);
    for point in &mut branch.points {
        (point.choice, point.reached) = (choices[bits.below(7)], reached[bits.below(4)]);
        let some = bits.below(2) == 0;
        point.unresolved =
            some.then(|| Unresolved { count: 1 + bits.below(5), below: -bits.finite().abs(), log_sum: bits.finite() });
    }
    branch
}

fn event(bits: &mut Bits, branch: &str, number: usize, n: usize, distance: f64) -> Event {
    let kind = EventKind::ALL[bits.below(12)];
    Event {
        name: format!("{branch}/{}{number}", kind.word()),
        kind,
        value: bits.finite(),
        error: bits.optional(),
        period: if kind == EventKind::PeriodBlowUp { f64::INFINITY } else { bits.finite() },
        period_error: bits.optional(),
        turns: bits.below(9),
        angle: bits.optional(),
        criticality: [None, Some(Criticality::Supercritical), Some(Criticality::Subcritical)][bits.below(3)],
        distance,
        note: "two lines,\nwith \"quotes\", a ; and \\ in them".into(),
        maxima: bits.list(n),
        minima: bits.list(n),
        means: bits.list(n),
        spreads: if bits.below(2) == 0 { bits.list(n) } else { Vec::new() },
        profile: (bits.below(2) == 0).then(|| profile(bits, n)),
    }
}

/// A branch of random bits that contradicts none of the rules.
pub fn branch(seed: u64, name: &str, n_points: usize) -> Branch {
    let bits = &mut Bits(seed);
    let n = 1 + bits.below(9);
    let reasons = [
        EndReason::Edge,
        EndReason::Closed,
        EndReason::Equilibrium { value: bits.finite() },
        EndReason::PeriodBlowUp,
        EndReason::ReturnsToParent,
        EndReason::Continuum,
        EndReason::Joins { branch: "a.doubling1".into() },
        EndReason::ResolutionLost,
        EndReason::Stuck,
        EndReason::Budget,
        EndReason::Interrupted,
        EndReason::NotFinite,
    ];
    let mut end = || End { reason: reasons[bits.below(10)].clone(), value: bits.finite(), words: "the \"end\"".into() };
    let ends = (end(), end());
    let range = bits.ascending(2);
    let distances = bits.ascending(n_points);
    let points = distances.iter().map(|&distance| point(bits, n, distance)).collect();
    let n_events = bits.below(6);
    let distances = bits.ascending(n_events);
    let events = distances.iter().enumerate().map(|(k, &at)| event(bits, name, k + 1, n, at)).collect();
    let profiles = (0..n_points).step_by(3).map(|k| StoredProfile { point: k, profile: profile(bits, n) }).collect();
    Branch {
        format: BRANCH_FORMAT,
        armilla: "0.1.0".into(),
        name: name.into(),
        born_at: name.rsplit_once('.').map(|(parent, event)| format!("{parent}/{event}")),
        model_title: "A title with (brackets), \"quotes\" and τ".into(),
        model_fingerprint: "0123abcd".into(),
        states: (0..n).map(|k| quantity(&format!("x{k}"))).collect(),
        parameter: quantity("gain"),
        range: (range[0], range[1]),
        fixed: vec![("lag".into(), bits.finite()), ("drive".into(), -0.0)],
        accuracy: 1e-9,
        points,
        events,
        ends,
        profiles,
        of: Solutions::Cycles,
    }
}

/// Every number of a branch as bits, in some fixed order; `==` alone would call -0 and 0 equal.
pub fn all_bits(branch: &Branch) -> Vec<u64> {
    let mut all = vec![branch.range.0, branch.range.1, branch.accuracy, branch.ends.0.value, branch.ends.1.value];
    all.extend(branch.fixed.iter().map(|(_, value)| value));
    for end in [&branch.ends.0, &branch.ends.1] {
        if let EndReason::Equilibrium { value } = end.reason {
            all.push(value);
        }
    }
    let profile = |all: &mut Vec<f64>, profile: &Profile| {
        all.push(profile.period);
        all.extend(profile.mesh.iter().chain(&profile.values));
    };
    for p in &branch.points {
        all.extend([p.value, p.period, p.distance, p.trivial_defect, p.liouville_defect, p.profile_error]);
        all.extend(p.maxima.iter().chain(&p.minima).chain(&p.means).chain(&p.spreads));
        all.extend(p.multipliers.iter().flat_map(|m| [m.log_modulus, m.angle]));
        all.extend(p.eigenvalues.iter().flat_map(|value| [value.re, value.im]));
        all.extend(p.unresolved.iter().flat_map(|u| [u.below, u.log_sum]));
    }
    for e in &branch.events {
        all.extend([e.value, e.period, e.distance]);
        all.extend([e.error, e.period_error, e.angle].into_iter().flatten());
        all.extend(e.maxima.iter().chain(&e.minima).chain(&e.means).chain(&e.spreads));
        e.profile.iter().for_each(|cycle| profile(&mut all, cycle));
    }
    branch.profiles.iter().for_each(|stored| profile(&mut all, &stored.profile));
    all.into_iter().map(f64::to_bits).collect()
}
