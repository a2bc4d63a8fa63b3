//! From one thread to another, every message in order, in a ring of fixed size: neither ever waits.
//!
//! The sender alone moves `sent`, the receiver alone `received`; each keeps its own count, publishes
//! it with a release after it is done with the cell, and acquires the other's before it touches one.

use std::marker::PhantomData;

use crate::cells::{Cells, Words};
use crate::sync::{Arc, AtomicUsize, Ordering};

#[derive(Debug)]
struct Shared<const N: usize> {
    ring: Vec<Cells<N>>,
    sent: AtomicUsize,
    received: AtomicUsize,
}

/// Where messages go in.
#[derive(Debug)]
pub(crate) struct Sender<T, const N: usize> {
    shared: Arc<Shared<N>>,
    sent: usize,
    message: PhantomData<fn(T)>,
}

/// Where they come out.
#[derive(Debug)]
pub(crate) struct Receiver<T, const N: usize> {
    shared: Arc<Shared<N>>,
    received: usize,
    message: PhantomData<fn() -> T>,
}

/// A pair for messages of `N` words, of which `length` can wait; a power of two, so that the
/// counts may wrap.
pub(crate) fn queue<T: Words<N>, const N: usize>(length: usize) -> (Sender<T, N>, Receiver<T, N>) {
    debug_assert!(length.is_power_of_two());
    let shared = Arc::new(Shared {
        ring: (0..length).map(|_| Cells::new()).collect(),
        sent: AtomicUsize::new(0),
        received: AtomicUsize::new(0),
    });
    let sender = Sender {
        shared: shared.clone(),
        sent: 0,
        message: PhantomData,
    };
    let receiver = Receiver {
        shared,
        received: 0,
        message: PhantomData,
    };
    (sender, receiver)
}

impl<const N: usize> Shared<N> {
    fn cell(&self, count: usize) -> &Cells<N> {
        &self.ring[count & (self.ring.len() - 1)]
    }
}

impl<T: Words<N>, const N: usize> Sender<T, N> {
    /// Appends a message; false, and nothing changes, if there is no room.
    pub(crate) fn send(&mut self, message: &T) -> bool {
        let received = self.shared.received.load(Ordering::Acquire);
        if self.sent.wrapping_sub(received) == self.shared.ring.len() {
            return false;
        }
        self.shared.cell(self.sent).store(message.to_words());
        self.sent = self.sent.wrapping_add(1);
        self.shared.sent.store(self.sent, Ordering::Release);
        true
    }
}

impl<T: Words<N>, const N: usize> Receiver<T, N> {
    /// The oldest message that was not taken.
    pub(crate) fn take(&mut self) -> Option<T> {
        if self.shared.sent.load(Ordering::Acquire) == self.received {
            return None;
        }
        let message = T::from_words(self.shared.cell(self.received).load());
        self.received = self.received.wrapping_add(1);
        self.shared.received.store(self.received, Ordering::Release);
        Some(message)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[derive(Clone, Copy, Debug, PartialEq)]
    struct Twin(u64);

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
    fn what_has_no_room_is_refused_and_the_rest_is_in_order() {
        let (mut sender, mut receiver) = queue::<Twin, 2>(4);
        for round in 0..3 {
            let sent: Vec<bool> = (0..5).map(|n| sender.send(&Twin(10 * round + n))).collect();
            assert_eq!(sent, [true, true, true, true, false]);
            for n in 0..4 {
                assert_eq!(receiver.take(), Some(Twin(10 * round + n)));
            }
            assert_eq!(receiver.take(), None);
        }
    }

    #[cfg(loom)]
    #[test]
    fn model_each_message_comes_whole_once_and_in_order() {
        crate::model::explore("queue of 2: 4 sends, takes until all are there", || {
            let (mut sender, mut receiver) = queue::<Twin, 2>(2);
            let sending = loom::thread::spawn(move || {
                (1..=4)
                    .filter(|number| sender.send(&Twin(*number)))
                    .collect::<Vec<_>>()
            });
            let mut taken = Vec::new();
            for _ in 0..3 {
                taken.extend(receiver.take().map(|Twin(number)| number));
            }
            let sent = sending.join().expect("it does not panic");
            while let Some(Twin(number)) = receiver.take() {
                taken.push(number);
            }
            assert_eq!(taken, sent);
        });
    }
}
