//! Times the numerical part of one main job, without files and figures: Roessler's cycle (three states) followed over a
//! range with about a hundred points, multipliers at each, its first doubling located to 1e-9, the doubled branch
//! entered and followed to its own doubling and beyond. Settling is timed beside it, and so is the job with its files.

use std::hint::black_box;

use armilla_follow::{Follower, Outcome, Settings};
use armilla_record::Profile;
use armilla_stability::{CriticalKind, CyclePoint, CycleProblem, Located, WATCH_DOUBLING};
use armilla_tests::{Case, job, settings};
use criterion::{Criterion, criterion_group, criterion_main};

const FROM: f64 = 1.0;
const TO: f64 = 4.0;

/// Points described and the doubling met between `point` and the edge.
fn pursue(problem: &mut CycleProblem, point: CyclePoint, turns: usize) -> (usize, Option<Located>) {
    let (mut points, mut doubling) = (0, None);
    // Both branches together have about a hundred points with strides no longer than this.
    let settings = Settings { longest: 0.017, ..Settings::new((FROM, TO)) };
    let mut follower = Follower::start(problem, point, 1.0, settings).expect("the walk starts");
    while let Outcome::Step(step) = follower.step() {
        let (problem, before, after) = follower.parts();
        let after = after.clone();
        if step.crossings.iter().any(|crossing| crossing.index == WATCH_DOUBLING) {
            let before = before.expect("a step was made").clone();
            doubling = Some(problem.locate(CriticalKind::Doubling, WATCH_DOUBLING, &before, &after).expect("located"));
        }
        black_box(problem.describe(&after.point, turns, after.distance).expect("multipliers"));
        points += 1;
    }
    (points, doubling)
}

fn main_job(case: &Case, settled: &Profile) -> (usize, f64, f64) {
    let (mut problem, cycle) = case.start(settled, settings(1e-9), FROM);
    let (first_points, first) = pursue(&mut problem, cycle, 1);
    let first = first.expect("the first doubling");
    let form = problem.doubling_form(&first);
    let mut doubled = problem.double(&first, form.as_ref()).expect("a doubled branch");
    let (second_points, second) = pursue(&mut doubled.problem, doubled.point, 2);
    let second = second.expect("the second doubling");
    (first_points + second_points, first.point.unknowns.parameter, second.point.unknowns.parameter)
}

fn bench(criterion: &mut Criterion) {
    let case = Case::new("roessler", "c", TO - FROM);
    let settled = case.settled(FROM);
    let (points, first, second) = main_job(&case, &settled);
    eprintln!("{points} points, doublings {first} and {second}");
    // Independent: single shooting with a Taylor integrator in 113-bit arithmetic.
    assert!((first - 2.832_445_027_862_539).abs() < 1e-9 && (second - 3.837_358_168_410_094).abs() < 1e-9);
    let mut group = criterion.benchmark_group("main job");
    group.sample_size(20);
    group.bench_function("numerical part", |bencher| bencher.iter(|| main_job(&case, black_box(&settled))));
    group.bench_function("settling", |bencher| bencher.iter(|| case.settled(black_box(FROM))));
    let fields =
        r#"start: Settle(at: {"c": 1.0}), follow: (parameter: "c", from: 1.0, to: 4.0), pursue: (doublings: 1)"#;
    group.bench_function("whole, with files and figure", |bencher| bencher.iter(|| job("roessler", black_box(fields))));
    group.finish();
}

criterion_group!(benches, bench);
criterion_main!(benches);
