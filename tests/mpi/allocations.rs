//! Counts what this program asks its allocator for (MPI's own allocations go elsewhere).

use std::alloc::{GlobalAlloc, Layout, System};
use std::sync::atomic::{AtomicU64, Ordering};

static COUNT: AtomicU64 = AtomicU64::new(0);

pub struct Counted;

// SAFETY: everything is passed on to the system's allocator.
unsafe impl GlobalAlloc for Counted {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        COUNT.fetch_add(1, Ordering::Relaxed);
        // SAFETY: the caller's promises are passed on.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, address: *mut u8, layout: Layout) {
        // SAFETY: the caller's promises are passed on.
        unsafe { System.dealloc(address, layout) }
    }

    unsafe fn realloc(&self, address: *mut u8, layout: Layout, size: usize) -> *mut u8 {
        COUNT.fetch_add(1, Ordering::Relaxed);
        // SAFETY: the caller's promises are passed on.
        unsafe { System.realloc(address, layout, size) }
    }
}

/// Allocations of this process so far.
pub fn so_far() -> u64 {
    COUNT.load(Ordering::Relaxed)
}
