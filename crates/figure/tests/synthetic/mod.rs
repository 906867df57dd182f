//! Branches made by formula, with the shapes that figures must show.

use armilla_record::{
    Branch, Criticality, End, EndReason, Event, EventKind, Multiplier, Point, Profile, Quantity, Solutions, nodes,
};

/// What a synthetic cycle is at a distance along its branch.
#[derive(Clone, Debug)]
pub struct Cycle {
    pub value: f64,
    pub max: f64,
    pub min: f64,
    pub period: f64,
    pub unstable_count: usize,
    pub log_modulus: f64,
}

pub fn quantity(name: &str, label: &str, unit: &str) -> Quantity {
    Quantity { name: name.into(), label: label.into(), unit: unit.into() }
}

/// A branch through `count` cycles at equal distances from 0 to `length`.
pub fn branch(name: &str, length: f64, count: usize, cycle: impl Fn(f64) -> Cycle) -> Branch {
    let end = |value| End { reason: EndReason::Edge, value, words: "the edge of the range is reached".into() };
    let points: Vec<Point> =
        (0..count).map(|k| length * k as f64 / (count.max(2) - 1) as f64).map(|s| point(s, &cycle(s))).collect();
    Branch {
        format: 1,
        armilla: "0.1.0".into(),
        name: name.into(),
        born_at: None,
        model_title: "Level control with a slow valve".into(),
        model_fingerprint: "0".into(),
        states: vec![quantity("level", "level", "m"), quantity("flow", "q", "m^3/s")],
        parameter: quantity("gain", "gain", "1/s"),
        range: (0.0, 4.0),
        fixed: vec![("lag".into(), 2.5), ("leak".into(), 1e-7)],
        accuracy: 1e-9,
        events: Vec::new(),
        ends: (end(cycle(0.0).value), end(cycle(length).value)),
        points,
        profiles: Vec::new(),
        of: Solutions::Cycles,
    }
}

fn point(s: f64, cycle: &Cycle) -> Point {
    Point {
        value: cycle.value,
        period: cycle.period,
        turns: 1,
        distance: s,
        unstable_count: cycle.unstable_count,
        trivial_defect: 1e-12,
        liouville_defect: 1e-12,
        profile_error: 1e-10,
        maxima: vec![cycle.max, cycle.max + 1.0],
        minima: vec![cycle.min, cycle.min - 1.0],
        means: vec![0.5 * (cycle.max + cycle.min), 0.1],
        spreads: vec![0.3 * (cycle.max - cycle.min), 0.2],
        multipliers: vec![Multiplier { log_modulus: cycle.log_modulus, angle: std::f64::consts::PI }],
        intervals: 20,
        degree: 4,
        ..Point::default()
    }
}

/// An event with the measures of a cycle.
pub fn event(branch: &str, kind: EventKind, number: usize, s: f64, cycle: &Cycle) -> Event {
    Event {
        name: format!("{branch}/{}{number}", kind.word()),
        kind,
        value: cycle.value,
        error: Some(1e-10),
        period: cycle.period,
        period_error: Some(1e-10),
        turns: 1,
        angle: None,
        criticality: Some(Criticality::Supercritical),
        distance: s,
        note: String::new(),
        maxima: vec![cycle.max, cycle.max + 1.0],
        minima: vec![cycle.min, cycle.min - 1.0],
        means: vec![0.5 * (cycle.max + cycle.min), 0.1],
        spreads: vec![0.3 * (cycle.max - cycle.min), 0.2],
        profile: Some(orbit(cycle)),
    }
}

/// An egg-shaped orbit between the extremes of a cycle.
pub fn orbit(cycle: &Cycle) -> Profile {
    let (degree, intervals) = (4, 20);
    let mesh: Vec<f64> = (0..=intervals).map(|i| i as f64 / intervals as f64).collect();
    let local = nodes(degree);
    let mut values = Vec::new();
    let (middle, radius) = (0.5 * (cycle.max + cycle.min), 0.5 * (cycle.max - cycle.min));
    for k in 0..=intervals * degree {
        let (i, j) = if k == intervals * degree { (intervals - 1, degree) } else { (k / degree, k % degree) };
        let t = std::f64::consts::TAU * (mesh[i] + (mesh[i + 1] - mesh[i]) * local[j]);
        values.extend([middle + radius * t.cos(), radius * (t.sin() + 0.3 * (2.0 * t).sin())]);
    }
    Profile { n_states: 2, degree, period: cycle.period, mesh, values }
}

/// A cascade: `a` loses stability at 2, its doubled branch at 2.9, that one's at 3.2.
pub fn cascade() -> Vec<Branch> {
    let base = |x: f64| 1.0 + 0.35 * x;
    let births = [2.0, 2.9, 3.2, 3.3];
    let names = ["a", "a.doubling1", "a.doubling1.doubling1", "a.doubling1.doubling1.doubling1"];
    let level = |depth: usize, x: f64| {
        base(x) + births[..depth].iter().map(|b| 0.42 * (x - b).max(0.0).sqrt() * (1.0 + 0.2 * (x - b))).sum::<f64>()
    };
    (0..4)
        .map(|depth| {
            let from = if depth == 0 { 0.3 } else { births[depth - 1] };
            // Along a branch the parameter grows as the square of the distance from its birth.
            let value = move |s: f64| if depth == 0 { from + s } else { from + s * s };
            let length = if depth == 0 { 4.0 - from } else { (4.0f64 - from).sqrt() };
            let cycle = move |s: f64| {
                let x = value(s);
                let max = level(depth, x);
                let period = (1 << depth) as f64 * (2.0 + 0.3 * x);
                Cycle {
                    value: x,
                    max,
                    min: -0.6 * max,
                    period,
                    unstable_count: usize::from(x > births[depth]),
                    log_modulus: (x - births[depth])
                        * if depth == 0 { 0.6 } else { (x - from) / (births[depth] - from) },
                }
            };
            let count = [12, 14, 12, 12][depth];
            // The first point of a doubled branch lies a little off its birth.
            let mut made = branch(names[depth], length, count, cycle);
            if depth > 0 {
                made.points.remove(0);
                made.born_at = Some(format!("{}/doubling1", names[depth - 1]));
            }
            made.points.iter_mut().for_each(|point| point.turns = 1 << depth);
            let s = if depth == 0 { births[0] - from } else { (births[depth] - from).sqrt() };
            let mut at = event(names[depth], EventKind::Doubling, 1, s, &cycle(s));
            at.turns = 1 << depth;
            made.events.push(at);
            if depth == 0 {
                for (k, target) in [1.0, 3.5].into_iter().enumerate() {
                    made.events.push(event("a", EventKind::Target, k + 1, target - from, &cycle(target - from)));
                }
                made.events.sort_by(|a, b| a.distance.total_cmp(&b.distance));
            }
            made
        })
        .collect()
}

/// An S-shaped branch with two folds and a torus bifurcation.
pub fn folded(scale: f64, count: usize) -> Branch {
    // value = 2 + 3 (u - u^3), folds at u = +-1/sqrt(3)
    let u = |s: f64| -1.25 + s;
    let turn = 3.0f64.sqrt().recip();
    let cycle = move |s: f64| {
        let u = u(s);
        Cycle {
            value: scale * (2.0 + 3.0 * (u - u * u * u)),
            max: scale * (1.5 + u),
            min: scale * (-0.4 - 0.8 * u),
            period: 3.0 + u * u,
            unstable_count: if u > -turn && u < turn {
                1
            } else if u > 1.1 {
                2
            } else {
                0
            },
            log_modulus: (0.4 * (turn - u.abs())).max(1.2 * (u - 1.1)),
        }
    };
    let mut made = branch("a", 2.5, count, cycle);
    for (kind, number, at) in [(EventKind::Fold, 1, -turn), (EventKind::Fold, 2, turn), (EventKind::Torus, 1, 1.1)] {
        let s = at + 1.25;
        made.events.push(event("a", kind, number, s, &cycle(s)));
    }
    made
}

/// Branches side by side.
pub fn many(count: usize) -> Vec<Branch> {
    (0..count)
        .map(|k| {
            let shift = k as f64;
            let cycle = move |s: f64| Cycle {
                value: s,
                max: 1.0 + 0.1 * shift + (s + 0.3 * shift).sin(),
                min: -1.0 - 0.1 * shift,
                period: 1.0 + 0.1 * shift,
                unstable_count: usize::from((s > 2.0) ^ (k % 3 == 0)),
                log_modulus: if k % 3 == 0 { 2.0 - s } else { s - 2.0 },
            };
            let name = if k == 0 { "a".to_string() } else { format!("a.doubling{k}") };
            let mut made = branch(&name, 4.0, 25, cycle);
            made.events.push(event(&name, EventKind::ALL[1 + k % 8], 1, 2.0, &cycle(2.0)));
            made
        })
        .collect()
}

/// Long and awkward labels.
pub fn awkward() -> Vec<Branch> {
    let mut branches = cascade();
    for branch in &mut branches {
        branch.model_title = "Tanks <A> & \"B\", with τ > 0".into();
        branch.parameter = quantity("gain", "τ", "kg*m^2*s^-3*A^-1");
        branch.states[0].label =
            "dimensionless height of the water level <above> the weir & below the \"brim\" of the second tank".into();
        branch.states[0].unit = "m^3/s".into();
        branch.fixed = vec![("α<β".into(), -3.5e-12), ("n".into(), 4.0)];
    }
    branches
}
