//! The atomics: the machine's, or those of the model checker.

#[cfg(loom)]
pub(crate) use loom::sync::{
    Arc,
    atomic::{AtomicU8, AtomicU64, AtomicUsize, Ordering},
};

#[cfg(not(loom))]
pub(crate) use std::sync::{
    Arc,
    atomic::{AtomicU8, AtomicU64, AtomicUsize, Ordering},
};

/// Lets the model checker see that whoever reads or writes has a place alone: it reports any two
/// uses, one of them a write, that no order of the program keeps apart. Nothing at all otherwise.
#[derive(Debug, Default)]
pub(crate) struct Alone(#[cfg(loom)] loom::cell::UnsafeCell<()>);

#[cfg(loom)]
#[allow(
    unsafe_code,
    reason = "in the model only: nothing is reached through the cell, and both threads have to announce their uses"
)]
// SAFETY: no method gives out or follows the cell's pointer.
unsafe impl Sync for Alone {}

impl Alone {
    #[inline]
    pub(crate) fn read(&self) {
        #[cfg(loom)]
        self.0.with(|_| ());
    }

    #[inline]
    pub(crate) fn written(&self) {
        #[cfg(loom)]
        self.0.with_mut(|_| ());
    }
}
