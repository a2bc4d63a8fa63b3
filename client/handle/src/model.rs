//! Every interleaving of a small scene, counted.
#![allow(
    clippy::print_stdout,
    reason = "the number of interleavings is a figure to be seen"
)]

use std::sync::Arc;
use std::sync::atomic::{AtomicU64, Ordering};

/// Runs `scene` in every interleaving, and with every value that the memory model allows a load to
/// see.
pub(crate) fn explore(name: &str, scene: impl Fn() + Sync + Send + 'static) {
    let runs = Arc::new(AtomicU64::new(0));
    let counted = runs.clone();
    loom::model(move || {
        counted.fetch_add(1, Ordering::Relaxed);
        scene();
    });
    println!("{name}: {} interleavings", runs.load(Ordering::Relaxed));
}
