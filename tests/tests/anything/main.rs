//! Two hundred models that nobody chose: no panic, no hang, no number that is none, and a reason for every end.
//!
//! Common practice: random input finds what invented cases do not. The models are polynomials of third degree in two to five
//! states, bounded by `-x |x|^2`, drawn from seeds.

mod draw;
mod files;

use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

use armilla_study::{Silent, Study, StudyError, TraceOptions, Traced, trace};

use crate::draw::drawn;
use crate::files::check_files;

/// Models in all, and seconds after which one is told to stop: a run that heeds it ends within a few steps.
const MODELS: u64 = 200;
const BUDGET: Duration = Duration::from_secs(4);
/// Time within which a run must have ended after that.
const GRACE: Duration = Duration::from_secs(60);

/// What became of a model.
enum Outcome {
    Traced(Box<Traced>),
    Refused(StudyError),
}

fn run(seed: u64) -> (Outcome, tempfile::TempDir) {
    let place = tempfile::tempdir().expect("a temporary folder");
    let (model, study) = drawn(seed);
    std::fs::write(place.path().join("drawn.model.ron"), &model).expect("a model written");
    let path = place.path().join("drawn.study.ron");
    std::fs::write(&path, &study).expect("a study written");
    let study = Study::read(&path).unwrap_or_else(|fault| panic!("seed {seed}: {fault}\n{model}\n{study}"));
    let (abort, done) = (AtomicBool::new(false), AtomicBool::new(false));
    let options = TraceOptions { folder: None, replace: false, cascade: false, abort: &abort };
    let begun = Instant::now();
    let outcome = std::thread::scope(|scope| {
        scope.spawn(|| {
            while !done.load(Ordering::Relaxed) {
                std::thread::sleep(Duration::from_millis(5));
                abort.fetch_or(begun.elapsed() > BUDGET, Ordering::Relaxed);
            }
        });
        let outcome = std::panic::catch_unwind(std::panic::AssertUnwindSafe(|| trace(&study, &options, &mut Silent)));
        done.store(true, Ordering::Relaxed);
        outcome
    });
    assert!(begun.elapsed() < BUDGET + GRACE, "seed {seed} took {:?}\n{model}", begun.elapsed());
    match outcome.unwrap_or_else(|_| panic!("seed {seed} panics\n{model}")) {
        Ok(traced) => (Outcome::Traced(Box::new(traced)), place),
        Err(fault) => (Outcome::Refused(fault), place),
    }
}

#[test]
fn two_hundred_models_nobody_chose() {
    let (mut traced_count, mut points, mut events) = (0u64, 0, 0u64);
    for seed in 0..MODELS {
        let (outcome, place) = run(seed);
        match outcome {
            Outcome::Refused(fault) => assert!(fault.to_string().len() > 20, "seed {seed}: {fault}"),
            Outcome::Traced(traced) => {
                traced_count += 1;
                for branch in &traced.branches {
                    points += branch.points.len();
                    events += branch.events.iter().filter(|event| event.kind.is_threshold()).count() as u64;
                    for end in [&branch.ends.0, &branch.ends.1] {
                        assert!(end.words.split(' ').count() >= 3, "seed {seed}, {}: {end:?}", branch.name);
                    }
                }
                check_files(&traced.folder, seed);
            }
        }
        drop(place);
    }
    eprintln!("{traced_count} of {MODELS} followed, {points} points, {events} thresholds");
    assert!(10 * traced_count >= 9 * MODELS, "{traced_count} of {MODELS} only: the drawing is at fault");
    assert!(events > traced_count, "{events} thresholds only");
}
