//! Once a link has begun, no measurement allocates.
#![allow(
    unsafe_code,
    reason = "counting allocations takes an allocator of one's own"
)]

use std::alloc::{GlobalAlloc, Layout, System};
use std::sync::atomic::{AtomicU64, Ordering};

use num_rational::Ratio;
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, probe};
use ratewright_timing::{Link, LinkConfig, Measurement};

struct Counting;

static ALLOCATIONS: AtomicU64 = AtomicU64::new(0);

// SAFETY: every call goes to the system's allocator unchanged.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        ALLOCATIONS.fetch_add(1, Ordering::Relaxed);
        // SAFETY: the caller's promise is passed on.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        // SAFETY: the caller's promise is passed on.
        unsafe { System.dealloc(pointer, layout) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

const NS: i64 = 1_000_000_000;

/// Allocations from the 70th measurement on, by when two-way links take blocks.
fn allocations(readings: &[Measurement]) -> u64 {
    let mut link = Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap();
    let (first, rest) = readings.split_at(70);
    for (i, m) in first.iter().enumerate() {
        link.observe(i as u64, m).unwrap();
    }
    let before = ALLOCATIONS.load(Ordering::Relaxed);
    for (i, m) in rest.iter().enumerate() {
        link.observe(70 + i as u64, m).unwrap();
    }
    ALLOCATIONS.load(Ordering::Relaxed) - before
}

#[test]
fn no_measurement_allocates_after_the_start() {
    let hz = Ratio::from_integer(48_000);
    let delay = Delay::Tailed {
        deviation_s: 9e-6,
        share: 0.2,
        tail_s: 90e-6,
        outliers: 0.01,
    };
    let model = PathModel {
        least_s: 1e-3,
        ..PathModel::new(delay)
    };
    let mut clock = Clock::new(
        ClockModel {
            drift: 5e-6,
            ..ClockModel::crystal()
        },
        1,
    );
    let [mut out, mut back] = [2, 3].map(|seed| Path::new(model.clone(), seed));
    let counters: Vec<_> = (1..3000)
        .map(|i| probe::counter(&mut clock, &mut out, hz, 32, i * NS).unwrap())
        .collect();
    let exchanges: Vec<_> = (3000..6000)
        .map(|i| probe::exchange(&mut clock, &mut out, &mut back, i * NS).unwrap())
        .collect();
    assert_eq!(allocations(&counters), 0);
    assert_eq!(allocations(&exchanges), 0);
}
