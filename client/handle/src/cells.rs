//! Messages as words, and the cells that hold them between two threads.

use crate::sync::{Alone, AtomicU64, Ordering};

/// A message of `N` words.
///
/// Cells of atomic words need no `unsafe`: without the order that [`crate::latest`] and
/// [`crate::queue`] keep, a reader would see a mixture of two messages, never undefined behaviour.
pub(crate) trait Words<const N: usize>: Sized {
    /// The message as words.
    fn to_words(&self) -> [u64; N];
    /// The message that [`Words::to_words`] made these of.
    fn from_words(words: [u64; N]) -> Self;
}

/// Room for a message. Whoever stores or loads must have it alone at that time.
#[derive(Debug)]
pub(crate) struct Cells<const N: usize> {
    words: [AtomicU64; N],
    alone: Alone,
}

impl<const N: usize> Cells<N> {
    pub(crate) fn new() -> Self {
        Self {
            words: std::array::from_fn(|_| AtomicU64::new(0)),
            alone: Alone::default(),
        }
    }

    #[inline]
    pub(crate) fn store(&self, words: [u64; N]) {
        self.alone.written();
        for (cell, word) in self.words.iter().zip(words) {
            cell.store(word, Ordering::Relaxed);
        }
    }

    #[inline]
    pub(crate) fn load(&self) -> [u64; N] {
        self.alone.read();
        std::array::from_fn(|index| self.words[index].load(Ordering::Relaxed))
    }
}
