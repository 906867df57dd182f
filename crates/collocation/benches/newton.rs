//! Times one Newton iteration on Roessler's cycle: n = 3 states, degree m = 4, N = 48 intervals, uniform mesh, the
//! parameter held: evaluation, assembly, condensation, chain, both borders and back-substitution. Its parts follow.

use std::hint::black_box;
use std::sync::Arc;

use armilla_collocation::{
    Iterate, LinearClosing, Metric, NewtonSettings, Row, System, SystemSpec, Workspace, correct,
};
use armilla_model::{Model, VectorField};
use armilla_record::Profile;
use criterion::{Criterion, criterion_group, criterion_main};

const DEGREE: usize = 4;
const INTERVALS: usize = 48;

/// Roessler 1976 (Physics Letters A 57:397).
const MODEL: &str = r#"(
    states: { "x": (begin: 1), "y": (begin: 0), "z": (begin: 0) },
    parameters: { "a": (value: 0.2), "b": (value: 0.2), "c": (value: 1) },
    rates: { "x": "-y - z", "y": "x + a*y", "z": "b + z*(x - c)" },
)"#;

/// Independent: single shooting with a Taylor integrator in 113-bit arithmetic.
const PERIOD: f64 = 5.541_660_322_289_143;

fn rates([x, y, z]: [f64; 3]) -> [f64; 3] {
    [-y - z, x + 0.2 * y, 0.2 + z * (x - 1.0)]
}

/// The classical Runge-Kutta method in small steps: accurate enough for a guess.
fn after(state: [f64; 3], time: f64) -> [f64; 3] {
    const STEP: f64 = 0.01;
    let steps = (time / STEP).ceil().max(1.0);
    let h = time / steps;
    let moved = |u: [f64; 3], k: [f64; 3], h: f64| [u[0] + h * k[0], u[1] + h * k[1], u[2] + h * k[2]];
    (0..steps as usize).fold(state, |u, _| {
        let k1 = rates(u);
        let k2 = rates(moved(u, k1, 0.5 * h));
        let k3 = rates(moved(u, k2, 0.5 * h));
        let k4 = rates(moved(u, k3, h));
        std::array::from_fn(|a| u[a] + h / 6.0 * (k1[a] + 2.0 * k2[a] + 2.0 * k3[a] + k4[a]))
    })
}

/// The cycle at c = 1 as simulated: a guess.
fn cycle(field: Arc<dyn VectorField>, parameters: Vec<f64>) -> (System, Iterate) {
    let mesh: Vec<f64> = (0..=INTERVALS).map(|i| i as f64 / INTERVALS as f64).collect();
    let mut guess = Profile { n_states: 3, degree: DEGREE, period: PERIOD, mesh, values: Vec::new() };
    // The slowest multiplier is 0.53 a period: sixty of them leave nothing of the way in.
    let (mut state, mut now) = (after([1.0, 0.0, 0.1], 60.0 * PERIOD), 0.0);
    for time in guess.node_times() {
        state = after(state, (time - now) * PERIOD);
        now = time;
        guess.values.extend(state);
    }
    let metric = Metric { scales: vec![3.0, 3.0, 1.0], period_scale: PERIOD, parameter_scale: 1.0 };
    let spec = SystemSpec { field, parameters, free: 2, metric };
    let system = System::new(spec, DEGREE, &guess.mesh);
    (system, Iterate { nodes: guess.values, period: guess.period, parameter: 1.0 })
}

fn bench(criterion: &mut Criterion) {
    let model = Model::parse(MODEL, "roessler").expect("a valid model");
    let (mut system, mut at) = cycle(model.field(), model.values());
    let mut row = Row::zero(at.nodes.len());
    row.parameter = 1.0;
    let mut closing = LinearClosing { row, target: 1.0 };
    let reference = at.nodes.clone();
    correct(&mut system, &mut at, &reference, &mut closing, NewtonSettings::default()).expect("a cycle");
    assert!((at.period - PERIOD).abs() < 1e-9, "{}", at.period);
    let reference = at.nodes.clone();
    let mut workspace = Workspace::default();
    let mut group = criterion.benchmark_group("newton");
    group.bench_function("one iteration, n = 3, m = 4, N = 48", |bencher| {
        bencher.iter(|| workspace.iterate(&mut system, black_box(&mut at), &reference, &mut closing).expect("regular"));
    });
    group.bench_function("of it, linearisation with its factors", |bencher| {
        bencher.iter(|| system.linearise(black_box(&at)).expect("regular"));
    });
    group.finish();
}

criterion_group!(benches, bench);
criterion_main!(benches);
