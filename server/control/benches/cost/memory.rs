//! An allocator that counts what is held.
#![allow(
    unsafe_code,
    reason = "counting allocations takes an allocator of one's own"
)]

use std::alloc::{GlobalAlloc, Layout, System};
use std::sync::atomic::{AtomicU64, Ordering};

static HELD: AtomicU64 = AtomicU64::new(0);

/// Bytes that are allocated now.
pub(crate) fn held() -> u64 {
    HELD.load(Ordering::Relaxed)
}

/// The system's allocator, counted.
pub(crate) struct Counting;

// SAFETY: every call goes to the system's allocator unchanged.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        HELD.fetch_add(layout.size() as u64, Ordering::Relaxed);
        // SAFETY: the caller's promise is passed on.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        HELD.fetch_sub(layout.size() as u64, Ordering::Relaxed);
        // SAFETY: the caller's promise is passed on.
        unsafe { System.dealloc(pointer, layout) }
    }
}
