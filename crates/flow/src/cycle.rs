//! A cycle that was settled on, and its hand-over as a profile on a mesh of the caller's size.

use armilla_record::{Profile, nodes};

use crate::error::FlowError;
use crate::integrator::Integrator;
use crate::observe::liveliest;
use crate::section::{Return, Section};

/// A cycle as simulated over one period.
#[derive(Clone, Debug)]
pub struct Cycle {
    /// The orbit over one period on the steps of the integration, with its exact dense output inside each.
    /// The little that it fails to close by ([`Cycle::distance`]) is spread over the period.
    pub orbit: Profile,
    /// Turns before it closes: forcing periods, or upward crossings of its own mean by the state with the
    /// largest relative range.
    pub turns: usize,
    /// Index of that state.
    pub state_index: usize,
    /// How far one more period of simulation leads away, relative to the range of each state, worst state.
    pub distance: f64,
    /// Ratio of this distance from one period to the next, signed, where it was still shrinking when the
    /// cycle was accepted: an estimate of the multiplier nearest the unit circle.
    pub contraction: Option<f64>,
    /// Whether it attracts nothing: volume is kept over a turn (the integral of the divergence vanishes). Such cycles
    /// come in continua as a rule (conservative models), and the one found is that of the start.
    pub neutral: bool,
    /// Time of the simulation at which the orbit begins.
    pub time: f64,
}

/// Degree of the pieces of the orbit: that of the dense output of the explicit method, and more than that of
/// the implicit one, so that nothing is lost.
const ORBIT_DEGREE: usize = 7;

/// Shares of the three measures by which mesh intervals are dealt out: path length (each state over its
/// range) resolves jumps, steps of the integration resolve corners, and time keeps quiet stretches covered.
const BY_LENGTH: f64 = 0.4;
const BY_STEPS: f64 = 0.4;
const BY_TIME: f64 = 0.2;

impl Cycle {
    /// Its period.
    pub fn period(&self) -> f64 {
        self.orbit.period
    }

    /// The cycle on `intervals` mesh intervals with pieces of degree `degree`, the mesh dense where the orbit
    /// moves or bends fast. Both numbers must be at least 1.
    pub fn profile(&self, degree: usize, intervals: usize) -> Profile {
        on_mesh_of_motion(&self.orbit, degree, intervals)
    }
}

/// An orbit on `intervals` mesh intervals with pieces of degree `degree`, the mesh dense where the orbit moves or bends
/// fast. Both numbers must be at least 1.
pub fn on_mesh_of_motion(orbit: &Profile, degree: usize, intervals: usize) -> Profile {
    let (degree, intervals) = (degree.max(1), intervals.max(1));
    let mut profile = Profile {
        n_states: orbit.n_states,
        degree,
        period: orbit.period,
        mesh: mesh_of_motion(orbit, intervals),
        values: Vec::new(),
    };
    let times = profile.node_times();
    let mut values = vec![0.0; times.len() * profile.n_states];
    let mut evaluator = orbit.evaluator();
    for (time, chunk) in times.iter().zip(values.chunks_exact_mut(profile.n_states)) {
        evaluator.at(*time, chunk);
    }
    profile.values = values;
    profile
}

/// Mesh that gives every interval the same share of the three measures.
fn mesh_of_motion(orbit: &Profile, intervals: usize) -> Vec<f64> {
    let times = orbit.node_times();
    let length = path_length(orbit);
    let last = times.len() - 1;
    let total = if length[last] > 0.0 { length[last] } else { 1.0 };
    let share = |k: usize| BY_LENGTH * length[k] / total + BY_STEPS * k as f64 / last as f64 + BY_TIME * times[k];
    let whole = share(last);
    let mut mesh = vec![0.0];
    let mut k = 0;
    for i in 1..intervals {
        let wanted = whole * i as f64 / intervals as f64;
        while share(k + 1) < wanted {
            k += 1;
        }
        let (low, high) = (share(k), share(k + 1));
        mesh.push(times[k] + (times[k + 1] - times[k]) * (wanted - low) / (high - low));
    }
    mesh.push(1.0);
    mesh
}

/// Upward crossings of its own mean by the state with the largest relative range over one period: the turns of a cycle.
pub fn turns_of(orbit: &Profile) -> usize {
    turns(orbit, &vec![0.0; orbit.n_states]).1
}

/// Cumulative length of the polygon through the nodes, each state in units of its range.
fn path_length(orbit: &Profile) -> Vec<f64> {
    let ranges: Vec<f64> = orbit.extremes().iter().map(|(low, high)| high - low).collect();
    let mut total = 0.0;
    let mut length = vec![0.0];
    for node in 1..orbit.n_nodes() {
        let square = |((a, b), range): ((&f64, &f64), &f64)| if *range > 0.0 { ((b - a) / range).powi(2) } else { 0.0 };
        let pairs = orbit.node(node - 1).iter().zip(orbit.node(node));
        total += pairs.zip(&ranges).map(square).sum::<f64>().sqrt();
        length.push(total);
    }
    length
}

/// Samples the dense output step by step.
struct Recorder {
    nodes: Vec<f64>,
    times: Vec<f64>,
    values: Vec<f64>,
    point: Vec<f64>,
}

impl Recorder {
    fn new(start: &Return) -> Self {
        Self {
            nodes: nodes(ORBIT_DEGREE),
            times: vec![start.time],
            values: start.state.clone(),
            point: start.state.clone(),
        }
    }

    /// Takes in the last step up to `end`, whose state is known better than by the dense output.
    fn add(&mut self, integrator: &Integrator<'_>, end: (f64, &[f64])) {
        let whole = integrator.time() - integrator.previous_time();
        let part = (end.0 - integrator.previous_time()) / whole;
        // A return at the very beginning of a step leaves no piece.
        if end.0 <= *self.times.last().expect("the recorder starts with one time") {
            return;
        }
        for node in &self.nodes[1..ORBIT_DEGREE] {
            integrator.dense(node * part, &mut self.point);
            self.values.extend_from_slice(&self.point);
        }
        self.values.extend_from_slice(end.1);
        self.times.push(end.0);
    }
}

/// Simulates from `start` until the return to `section` of the number asked for; none where that takes longer
/// than the time given with it.
pub(crate) fn record(
    integrator: &mut Integrator<'_>,
    section: Section,
    start: &Return,
    (returns, longest): (usize, f64),
) -> Result<Option<(Profile, Return)>, FlowError> {
    integrator.restart(start.time, &start.state)?;
    let mut recorder = Recorder::new(start);
    let mut found = Vec::new();
    loop {
        integrator.advance()?;
        section.returns(integrator, &mut found);
        if let Some(end) = found.get(returns - 1) {
            recorder.add(integrator, (end.time, &end.state));
            break;
        }
        if integrator.time() - start.time > longest {
            return Ok(None);
        }
        recorder.add(integrator, (integrator.time(), integrator.state()));
    }
    let end = found.swap_remove(returns - 1);
    Ok(Some((closed_profile(recorder, start, &end), end)))
}

/// The recorded orbit in scaled time, its gap spread linearly over the period.
fn closed_profile(recorder: Recorder, start: &Return, end: &Return) -> Profile {
    let n = start.state.len();
    let period = end.time - start.time;
    let mut mesh: Vec<f64> = recorder.times.iter().map(|time| (time - start.time) / period).collect();
    let last = mesh.len() - 1;
    mesh[last] = 1.0;
    let mut profile = Profile { n_states: n, degree: ORBIT_DEGREE, period, mesh, values: recorder.values };
    let times = profile.node_times();
    for (time, chunk) in times.iter().zip(profile.values.chunks_exact_mut(n)) {
        for (i, value) in chunk.iter_mut().enumerate() {
            *value += (start.state[i] - end.state[i]) * time;
        }
    }
    let (begin, rest) = profile.values.split_at_mut(n);
    let tail = rest.len() - n;
    rest[tail..].copy_from_slice(begin);
    profile
}

/// The state with the largest relative range (of those that have not `died` out), and how often it crosses its own mean upward in one period.
pub(crate) fn turns(orbit: &Profile, died: &[f64]) -> (usize, usize) {
    /// Looks per piece: no wave of a polynomial of degree 7 fits between.
    const LOOKS: usize = 4 * ORBIT_DEGREE;
    let state_index = liveliest(&orbit.extremes(), died);
    let mean = orbit.means()[state_index];
    let mut evaluator = orbit.evaluator();
    let mut point = vec![0.0; orbit.n_states];
    let mut before = orbit.node(0)[state_index] - mean;
    let mut count = 0;
    for i in 0..orbit.intervals() {
        for look in 1..=LOOKS {
            evaluator.in_interval(i, look as f64 / LOOKS as f64, &mut point);
            let here = point[state_index] - mean;
            count += usize::from(before < 0.0 && here >= 0.0);
            before = here;
        }
    }
    (state_index, count.max(1))
}
