//! From one thread to another, the latest message only: neither ever waits.
//!
//! Three places for a message: one is the writer's, one the reader's, and one lies between them.
//! The writer fills its own and exchanges it for the one between, marked as fresh; the reader
//! exchanges its own for the one between if that is fresh. An exchange is one atomic swap that
//! releases what was done to the place given and acquires what was done to the place taken, so each
//! place belongs to one thread at a time, and a message is read whole.

use std::marker::PhantomData;

use crate::cells::{Cells, Words};
use crate::sync::{Arc, AtomicU8, Ordering};

/// Set beside the index of the place between if its message was not read yet.
const FRESH: u8 = 4;

/// The index of a place.
const INDEX: u8 = 3;

#[derive(Debug)]
struct Shared<const N: usize> {
    places: [Cells<N>; 3],
    between: AtomicU8,
}

/// Where messages go in.
#[derive(Debug)]
pub(crate) struct Sender<T, const N: usize> {
    shared: Arc<Shared<N>>,
    mine: u8,
    message: PhantomData<fn(T)>,
}

/// Where the latest message comes out.
#[derive(Debug)]
pub(crate) struct Receiver<T, const N: usize> {
    shared: Arc<Shared<N>>,
    mine: u8,
    message: PhantomData<fn() -> T>,
}

/// A pair for messages of `N` words.
pub(crate) fn latest<T: Words<N>, const N: usize>() -> (Sender<T, N>, Receiver<T, N>) {
    let shared = Arc::new(Shared {
        places: [Cells::new(), Cells::new(), Cells::new()],
        between: AtomicU8::new(1),
    });
    let sender = Sender {
        shared: shared.clone(),
        mine: 0,
        message: PhantomData,
    };
    let receiver = Receiver {
        shared,
        mine: 2,
        message: PhantomData,
    };
    (sender, receiver)
}

impl<T: Words<N>, const N: usize> Sender<T, N> {
    /// Puts a message in place of whatever the reader has not read.
    pub(crate) fn send(&mut self, message: &T) {
        self.shared.places[usize::from(self.mine)].store(message.to_words());
        let taken = self
            .shared
            .between
            .swap(self.mine | FRESH, Ordering::AcqRel);
        self.mine = taken & INDEX;
    }
}

impl<T: Words<N>, const N: usize> Receiver<T, N> {
    /// True if there is a message that was not taken.
    #[inline]
    pub(crate) fn is_fresh(&self) -> bool {
        // The swap that follows does the ordering.
        self.shared.between.load(Ordering::Relaxed) & FRESH != 0
    }

    /// The latest message, if it was not taken already.
    pub(crate) fn take(&mut self) -> Option<T> {
        if !self.is_fresh() {
            return None;
        }
        let taken = self.shared.between.swap(self.mine, Ordering::AcqRel);
        self.mine = taken & INDEX;
        Some(T::from_words(
            self.shared.places[usize::from(self.mine)].load(),
        ))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Its own number twice, so that a mixture of two shows.
    #[derive(Clone, Copy, Debug, PartialEq)]
    pub(super) struct Twin(pub(super) u64);

    impl Words<2> for Twin {
        fn to_words(&self) -> [u64; 2] {
            [self.0, self.0]
        }

        fn from_words([one, other]: [u64; 2]) -> Self {
            assert_eq!(one, other, "torn");
            Self(one)
        }
    }

    #[cfg(not(loom))]
    #[test]
    fn the_latest_comes_out_once() {
        let (mut sender, mut receiver) = latest::<Twin, 2>();
        assert_eq!(receiver.take(), None);
        for number in 1..=5 {
            sender.send(&Twin(number));
        }
        assert_eq!(receiver.take(), Some(Twin(5)));
        assert_eq!(receiver.take(), None);
        sender.send(&Twin(6));
        assert!(receiver.is_fresh());
        assert_eq!(receiver.take(), Some(Twin(6)));
    }

    #[cfg(loom)]
    #[test]
    fn model_no_message_is_torn_none_comes_after_a_later_one_and_the_last_arrives() {
        crate::model::explore("latest: 4 sends, 3 takes", || {
            let (mut sender, mut receiver) = latest::<Twin, 2>();
            let sending = loom::thread::spawn(move || {
                for number in 1..=4 {
                    sender.send(&Twin(number));
                }
            });
            let mut newest = 0;
            for _ in 0..3 {
                if let Some(Twin(number)) = receiver.take() {
                    assert!(number > newest, "{number} after {newest}");
                    newest = number;
                }
            }
            sending.join().expect("it does not panic");
            if let Some(Twin(number)) = receiver.take() {
                assert!(number > newest, "{number} after {newest}");
                newest = number;
            }
            assert_eq!(newest, 4, "the last is never lost");
        });
    }
}
