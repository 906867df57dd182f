//! Memory and evaluations of one Newton iteration and one spectrum grow with the number of intervals and not faster.
#![allow(unsafe_code, reason = "an allocator that counts is unsafe by its trait")]

use std::alloc::{GlobalAlloc, Layout, System as Allocator};
use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};

use armilla_collocation::{LinearClosing, Row, System, SystemSpec, Workspace};
use armilla_model::{
    Batch, Column, Direction, Evaluator, Gradient, Linearisation, NotProvided, SparsityPattern, VectorField,
};
use armilla_record::Profile;
use armilla_stability::SpectrumSolver;
use armilla_tests::{Case, Uniform};

struct Counting;

static LIVE: AtomicUsize = AtomicUsize::new(0);
static PEAK: AtomicUsize = AtomicUsize::new(0);

// SAFETY: every call is handed to the system's allocator unchanged.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        let live = LIVE.fetch_add(layout.size(), Ordering::Relaxed) + layout.size();
        PEAK.fetch_max(live, Ordering::Relaxed);
        unsafe { Allocator.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        LIVE.fetch_sub(layout.size(), Ordering::Relaxed);
        unsafe { Allocator.dealloc(pointer, layout) }
    }
}

#[global_allocator]
static COUNTING: Counting = Counting;

/// Largest memory in use during `work` beyond what was in use before.
fn peak<T>(work: impl FnOnce() -> T) -> (T, usize) {
    let before = LIVE.load(Ordering::Relaxed);
    PEAK.store(before, Ordering::Relaxed);
    let done = work();
    (done, PEAK.load(Ordering::Relaxed) - before)
}

/// Points at which rates or derivatives were evaluated.
static POINTS: AtomicUsize = AtomicUsize::new(0);

/// A field that counts.
struct Counted(Arc<dyn VectorField>);

impl VectorField for Counted {
    fn n_states(&self) -> usize {
        self.0.n_states()
    }
    fn n_parameters(&self) -> usize {
        self.0.n_parameters()
    }
    fn is_forced(&self) -> bool {
        self.0.is_forced()
    }
    fn pattern(&self) -> &SparsityPattern {
        self.0.pattern()
    }
    fn evaluator(&self, columns: &[Column]) -> Box<dyn Evaluator> {
        Box::new(CountedEvaluator(self.0.evaluator(columns)))
    }
}

struct CountedEvaluator(Box<dyn Evaluator>);

impl Evaluator for CountedEvaluator {
    fn rates(&mut self, at: Batch<'_>, rates: &mut [f64]) {
        POINTS.fetch_add(at.len, Ordering::Relaxed);
        self.0.rates(at, rates);
    }
    fn linearise(&mut self, at: Batch<'_>, out: Linearisation<'_>) {
        POINTS.fetch_add(at.len, Ordering::Relaxed);
        self.0.linearise(at, out);
    }
    fn second(&mut self, at: Batch<'_>, u: Direction<'_>, v: Direction<'_>, out: &mut [f64]) {
        POINTS.fetch_add(at.len, Ordering::Relaxed);
        self.0.second(at, u, v, out);
    }
    fn third(&mut self, at: Batch<'_>, directions: [Direction<'_>; 3], out: &mut [f64]) -> Result<(), NotProvided> {
        POINTS.fetch_add(at.len, Ordering::Relaxed);
        self.0.third(at, directions, out)
    }
    fn second_gradient(&mut self, at: Batch<'_>, psi: &[f64], v: Direction<'_>, out: Gradient<'_>) {
        POINTS.fetch_add(at.len, Ordering::Relaxed);
        self.0.second_gradient(at, psi, v, out);
    }
}

const DEGREE: usize = 6;
const INTERVALS: usize = 200;
const AT: f64 = 2.0;

/// What one Newton iteration and one spectrum take, an interval each.
#[derive(Debug)]
struct Taken {
    newton_bytes: f64,
    newton_points: f64,
    spectrum_bytes: f64,
    spectrum_points: f64,
}

/// Of a cycle told `turns` times.
fn taken(case: &Case, cycle: &Profile, spec: &SystemSpec, turns: usize) -> Taken {
    let told = cycle.repeated(turns);
    let (mut at, metric) = (Uniform::new(case, &told, AT, (DEGREE, told.intervals())).at, spec.metric.clone());
    let reference = at.nodes.clone();
    let mut row = Row::zero(reference.len());
    row.parameter = 1.0;
    let mut closing = LinearClosing { row, target: AT };
    POINTS.store(0, Ordering::Relaxed);
    let (correction, newton_bytes) = peak(|| {
        let mut system = System::new(spec.clone(), DEGREE, &told.mesh);
        let iteration = Workspace::default().iterate(&mut system, &mut at, &reference, &mut closing);
        iteration.expect("regular").correction
    });
    assert!(correction < 1e-8, "it has converged: {correction}");
    let newton_points = POINTS.swap(0, Ordering::Relaxed);
    let (spectrum, spectrum_bytes) = peak(|| {
        let mut solver = SpectrumSolver::new(spec.field.as_ref(), DEGREE);
        solver.spectrum(&told, &case.parameters(AT), &metric.scales, 1e-9).expect("multipliers")
    });
    assert!(spectrum.trivial_defect < 1e-8, "{spectrum:?}");
    let spectrum_points = POINTS.swap(0, Ordering::Relaxed);
    let each = |count: usize| count as f64 / told.intervals() as f64;
    Taken {
        newton_bytes: each(newton_bytes),
        newton_points: each(newton_points),
        spectrum_bytes: each(spectrum_bytes),
        spectrum_points: each(spectrum_points),
    }
}

/// The only test of this binary: others would allocate beside it. Roessler's cycle (three states) told once on 200
/// intervals and a hundred times on 20 000: the same work an interval.
#[test]
fn twenty_thousand_intervals_take_no_more_each_than_two_hundred() {
    let case = Case::new("roessler", "c", 1.0);
    let mut solved = Uniform::new(&case, &case.settled(AT), AT, (DEGREE, INTERVALS));
    solved.hold_parameter();
    let cycle = solved.profile();
    let spec = solved.system.spec();
    let spec = SystemSpec { field: Arc::new(Counted(spec.field.clone())), ..spec.clone() };
    let (few, many) = (taken(&case, &cycle, &spec, 1), taken(&case, &cycle, &spec, 100));
    eprintln!("each of 200: {few:?}\neach of 20 000: {many:?}");
    // A vector that grows by doubling may have reserved twice what it holds; the bound is that of the whole program.
    const MOST: f64 = 1.5;
    for (what, few, many) in [
        ("bytes of an iteration", few.newton_bytes, many.newton_bytes),
        ("points of an iteration", few.newton_points, many.newton_points),
        ("bytes of a spectrum", few.spectrum_bytes, many.spectrum_bytes),
        ("points of a spectrum", few.spectrum_points, many.spectrum_points),
    ] {
        assert!(many <= MOST * few, "{what}: {many} an interval for {few}");
    }
}
