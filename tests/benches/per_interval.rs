//! Times one Newton iteration, its parts, and one spectrum of a cycle of Roessler's system (three states, degree 6) told
//! once on 200 intervals and a hundred times on 20 000: the same work an interval. Throughput is in intervals a second; it
//! should not fall by more than a third from the one to the other. Figures are in docs/decisions.md.

use std::hint::black_box;

use armilla_collocation::{LinearClosing, Row, Workspace};
use armilla_record::Profile;
use armilla_stability::SpectrumSolver;
use armilla_tests::{Case, Uniform};
use criterion::{Criterion, Throughput, criterion_group, criterion_main};

const DEGREE: usize = 6;
const INTERVALS: usize = 200;
const AT: f64 = 2.0;
/// Accuracy of the multipliers: that of the default settings.
const ACCURACY: f64 = 1e-9;

fn bench_of(criterion: &mut Criterion, case: &Case, cycle: &Profile, turns: usize) {
    let told = cycle.repeated(turns);
    let intervals = told.intervals();
    let mut solved = Uniform::new(case, &told, AT, (DEGREE, intervals));
    let mut row = Row::zero(solved.at.nodes.len());
    row.parameter = 1.0;
    let mut closing = LinearClosing { row, target: AT };
    let reference = solved.at.nodes.clone();
    let mut workspace = Workspace::default();
    let mut group = criterion.benchmark_group(format!("{intervals} intervals"));
    group.throughput(Throughput::Elements(intervals as u64)).sample_size(20);
    group.bench_function("newton iteration", |bencher| {
        bencher.iter(|| {
            workspace.iterate(&mut solved.system, black_box(&mut solved.at), &reference, &mut closing).expect("regular")
        });
    });
    group.bench_function("of it, linearisation with its factors", |bencher| {
        bencher.iter(|| solved.system.linearise(black_box(&solved.at)).expect("regular"));
    });
    let spec = solved.system.spec().clone();
    let mut solver = SpectrumSolver::new(spec.field.as_ref(), DEGREE);
    let parameters = case.parameters(AT);
    group.bench_function("spectrum", |bencher| {
        bencher.iter(|| {
            solver.spectrum(black_box(&told), &parameters, &spec.metric.scales, ACCURACY).expect("multipliers")
        });
    });
    group.finish();
}

fn bench(criterion: &mut Criterion) {
    let case = Case::new("roessler", "c", 1.0);
    let mut solved = Uniform::new(&case, &case.settled(AT), AT, (DEGREE, INTERVALS));
    solved.hold_parameter();
    let cycle = solved.profile();
    for turns in [1, 100] {
        bench_of(criterion, &case, &cycle, turns);
    }
}

criterion_group!(benches, bench);
criterion_main!(benches);
