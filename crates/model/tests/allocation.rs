//! An evaluator that has seen its largest batch does not allocate.
#![allow(unsafe_code, reason = "an allocator that counts is unsafe by its trait")]

use std::alloc::{GlobalAlloc, Layout, System};
use std::sync::atomic::{AtomicUsize, Ordering};

use armilla_model::{Batch, Column, Direction, Gradient, Linearisation, Model};

struct Counting;

static ALLOCATIONS: AtomicUsize = AtomicUsize::new(0);

// SAFETY: every call is handed to the system's allocator unchanged.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        ALLOCATIONS.fetch_add(1, Ordering::Relaxed);
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        unsafe { System.dealloc(pointer, layout) }
    }
}

#[global_allocator]
static COUNTING: Counting = Counting;

/// The only test of this binary: others would allocate beside it.
#[test]
fn evaluation_does_not_allocate() {
    let text = r#"(
        states: { "x": (begin: 1), "y": (begin: 0.5) },
        parameters: { "a": (value: 0.7) },
        rates: { "x": "y - x^3/a + x/(exp(x) - 1)", "y": "sin(x)*y^a" },
    )"#;
    let model = Model::parse(text, "test").expect("a valid model");
    let field = model.field();
    let mut evaluator = field.evaluator(&[Column::Parameter(0)]);
    let largest = 200;
    // Both branches of the safe quotient are taken.
    let numbers: Vec<f64> = (0..2 * largest).map(|i| 0.4 + 0.01 * i as f64).collect();
    let mut out = vec![vec![0.0; 4 * largest]; 3];
    let mut all = |len: usize| {
        let at = Batch { len, time: &[], states: &numbers[..2 * len], parameters: &[0.7] };
        let u = Direction { states: &numbers[..2 * len], columns: &numbers[..len] };
        let [first, second, third] = &mut out[..] else { unreachable!("three vectors were made") };
        let (rates, columns) = (&mut first[..2 * len], &mut third[..2 * len]);
        evaluator.rates(at, rates);
        evaluator.linearise(at, Linearisation { rates, jacobian: &mut second[..4 * len], columns });
        evaluator.second(at, u, u, rates);
        evaluator.third(at, [u; 3], rates).expect("compiled fields have third derivatives");
        let gradient = Gradient { states: rates, columns: &mut columns[..len] };
        evaluator.second_gradient(at, &numbers[..2 * len], u, gradient);
    };
    all(largest);
    let before = ALLOCATIONS.load(Ordering::Relaxed);
    for len in [largest, 1, 64, 65, largest] {
        all(len);
    }
    assert_eq!(ALLOCATIONS.load(Ordering::Relaxed) - before, 0);
}
