//! Times rates with Jacobian and one parameter column of compiled fields, per point: one point a call,
//! and batches of 64 and 192 (the collocation points of 48 intervals of degree 4).

use std::hint::black_box;

use armilla_model::{Batch, Column, Linearisation, Model};
use criterion::{Criterion, Throughput, criterion_group, criterion_main};

/// Roessler 1976 (Physics Letters A 57:397): three states, one product.
const THREE_STATES: &str = r#"(
    states: { "x": (begin: 1), "y": (begin: 0), "z": (begin: 0) },
    parameters: { "a": (value: 0.2), "b": (value: 0.2), "c": (value: 5.7) },
    rates: { "x": "-y - z", "y": "x + a*y", "z": "b + z*(x - c)" },
)"#;

/// A membrane of our own with the usual shapes of rates: exponentials and quotients.
const MEMBRANE: &str = r#"(
    states: { "V": (begin: -60), "n": (begin: 0.3), "h": (begin: 0.5) },
    parameters: { "current": (value: 10), "g": (value: 36) },
    expressions: {
        "open": "0.01*(10 - V)/(exp((10 - V)/10) - 1)",
        "shut": "0.125*exp(-V/80)",
        "limit": "1/(1 + exp((V + 40)/8))",
    },
    rates: {
        "V": "current - g*n^4*(V + 12) - 120*(1 - limit)^3*h*(V - 115) - 0.3*(V - 10.6)",
        "n": "open*(1 - n) - shut*n",
        "h": "(limit - h)/(1 + 5*limit)",
    },
)"#;

fn linearise(criterion: &mut Criterion, name: &str, text: &str) {
    let model = Model::parse(text, name).expect("a valid model");
    let field = model.field();
    let mut evaluator = field.evaluator(&[Column::Parameter(0)]);
    let (n, nonzeros) = (field.n_states(), field.pattern().nnz());
    let parameters = model.values();
    let mut group = criterion.benchmark_group(name);
    for len in [1, 64, 192] {
        let states: Vec<f64> = (0..n * len).map(|i| 0.3 + 0.01 * i as f64).collect();
        let (mut rates, mut jacobian, mut columns) =
            (vec![0.0; n * len], vec![0.0; nonzeros * len], vec![0.0; n * len]);
        group.throughput(Throughput::Elements(len as u64));
        group.bench_function(format!("{len} points"), |bencher| {
            bencher.iter(|| {
                let at = Batch { len, time: &[], states: black_box(&states), parameters: &parameters };
                let out = Linearisation { rates: &mut rates, jacobian: &mut jacobian, columns: &mut columns };
                evaluator.linearise(at, out);
                black_box(&jacobian);
            });
        });
    }
    group.finish();
}

fn bench(criterion: &mut Criterion) {
    linearise(criterion, "three states", THREE_STATES);
    linearise(criterion, "membrane", MEMBRANE);
}

criterion_group!(benches, bench);
criterion_main!(benches);
