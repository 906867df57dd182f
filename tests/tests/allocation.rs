//! Newton's method does not allocate once its workspace has its size.
#![allow(unsafe_code, reason = "an allocator that counts is unsafe by its trait")]

use std::alloc::{GlobalAlloc, Layout, System as Allocator};
use std::sync::atomic::{AtomicUsize, Ordering};

use armilla_collocation::{Closing, LinearClosing, Row, Workspace};
use armilla_stability::{CriticalKind, TestFunction};
use armilla_tests::{Case, Uniform};

struct Counting;

static ALLOCATIONS: AtomicUsize = AtomicUsize::new(0);

// SAFETY: every call is handed to the system's allocator unchanged.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        ALLOCATIONS.fetch_add(1, Ordering::Relaxed);
        unsafe { Allocator.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        unsafe { Allocator.dealloc(pointer, layout) }
    }
}

#[global_allocator]
static COUNTING: Counting = Counting;

/// Allocations of 100 iterations after a first one, which sizes the workspace.
fn allocations(solved: &mut Uniform, closing: &mut dyn Closing) -> usize {
    let reference = solved.at.nodes.clone();
    let mut workspace = Workspace::default();
    let mut iterate = || workspace.iterate(&mut solved.system, &mut solved.at, &reference, closing).expect("regular");
    iterate();
    let before = ALLOCATIONS.load(Ordering::Relaxed);
    for _ in 0..100 {
        assert!(iterate().correction < 1e-9, "it has converged");
    }
    ALLOCATIONS.load(Ordering::Relaxed) - before
}

/// The only test of this binary: others would allocate beside it. Roessler's cycle (three states) at degree 4 on 48
/// intervals, the parameter held, then its first doubling by the augmented system.
#[test]
fn a_hundred_newton_iterations_allocate_nothing() {
    let case = Case::new("roessler", "c", 1.0);
    let mut solved = Uniform::new(&case, &case.settled(2.8), 2.8, (4, 48));
    solved.hold_parameter();
    let mut row = Row::zero(solved.at.nodes.len());
    row.parameter = 1.0;
    assert_eq!(allocations(&mut solved, &mut LinearClosing { row, target: 2.8 }), 0);

    solved.threshold(CriticalKind::Doubling);
    solved.system.linearise(&solved.at).expect("regular");
    let mut function = TestFunction::new(CriticalKind::Doubling, &solved.system, &solved.at).expect("regular");
    assert_eq!(allocations(&mut solved, &mut function), 0);
}
