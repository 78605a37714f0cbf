//! From the second batch of frequencies on the numerical core allocates nothing.
//!
//! Counts the calls of the process's allocator; this file holds a single test, so that nothing else
//! runs while it counts.
#![allow(unsafe_code)]

use num_complex::Complex64;
use squeg_analyzer::linalg::pattern::Pattern;
use squeg_analyzer::linalg::plan::Plan;
use squeg_analyzer::linalg::values::Values;
use std::alloc::{GlobalAlloc, Layout, System};
use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};

struct Counting;

static CALLS: AtomicUsize = AtomicUsize::new(0);

// SAFETY: every call goes to the system's allocator with its arguments unchanged.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        CALLS.fetch_add(1, Ordering::Relaxed);
        // SAFETY: the caller's promise about `layout` is passed on.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        // SAFETY: the pointer came from `alloc` above, with this layout.
        unsafe { System.dealloc(pointer, layout) }
    }

    unsafe fn realloc(&self, pointer: *mut u8, layout: Layout, size: usize) -> *mut u8 {
        CALLS.fetch_add(1, Ordering::Relaxed);
        // SAFETY: as above.
        unsafe { System.realloc(pointer, layout, size) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// A ladder of conductances and capacitances with gain from every third node to the next, and one
/// delayed source.
fn ladder(n: u32, gain: f64) -> Values {
    let mut entries = Vec::new();
    for k in 0..n - 1 {
        entries.extend([(k, k + 1), (k + 1, k)]);
    }
    entries.push((n - 1, 0));
    let mut values = Values::new(Pattern::new(n as usize, &entries));
    for k in 0..n {
        values
            .add_g(k, k, 1.0 + f64::from(k) / 7.0)
            .expect("in the pattern");
        values
            .add_c(k, k, 0.1 + f64::from(k % 5))
            .expect("in the pattern");
    }
    for k in 0..n - 1 {
        values.add_g(k, k + 1, -0.3).expect("in the pattern");
        values
            .add_g(k + 1, k, if k % 3 == 0 { gain } else { -0.3 })
            .expect("in the pattern");
    }
    values
        .add_delay(n - 1, 0, gain, 0.2)
        .expect("in the pattern");
    values
}

#[test]
fn nothing_is_allocated_from_the_second_batch_on() {
    let (on, off) = (ladder(40, 3.0), ladder(40, 0.0));
    let pattern = Arc::clone(&on.pattern);
    let off = Values {
        pattern: Arc::clone(&pattern),
        ..off
    };
    let wanted: Vec<(u32, u32)> = (0..40).map(|k| (k, k)).collect();
    let plan = Plan::new(pattern, &[&on, &off], &[1e-3, 1.0, 1e3], &wanted).expect("regular");
    let mut ws = plan.workspace();
    let mut x = vec![Complex64::default(); plan.n() * plan.lanes()];
    let points: Vec<Vec<Complex64>> = (0..50)
        .map(|batch| {
            let w = |lane| 1e-2 * 1.1f64.powi(batch * 8 + lane);
            (0..plan.lanes() as i32)
                .map(|lane| Complex64::new(0.0, w(lane)))
                .collect()
        })
        .collect();
    let mut sum = Complex64::default();
    let mut batch = |s: &[Complex64]| {
        for values in [&off, &on] {
            plan.factor_sound(values, s, &mut ws)
                .expect("sound everywhere");
            sum += ws.det(0).ln();
        }
        plan.invert_selected(&mut ws).expect("factored");
        sum += ws.log_derivative(0);
        plan.solve(&mut ws, &[(0, Complex64::new(1.0, 0.0))], &mut x)
            .expect("factored");
        sum += x[0];
    };
    batch(&points[0]);
    let before = CALLS.load(Ordering::Relaxed);
    for s in &points[1..] {
        batch(s);
    }
    let after = CALLS.load(Ordering::Relaxed);
    assert!(sum.is_finite(), "the work was done");
    assert_eq!(after - before, 0, "allocations in 49 batches");
}
