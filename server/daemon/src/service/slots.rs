//! Counts open streams: no layer of the transport does once the answer's head is sent.

use std::sync::{
    Arc,
    atomic::{AtomicUsize, Ordering},
};

use tokio::sync::{OwnedSemaphorePermit, Semaphore};

use crate::{metrics, refused::Refused};

/// What a stream is for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Kind {
    Report,
    Watch,
    Follow,
}

/// Places for streams. Cheap to clone.
#[derive(Clone, Debug)]
pub(crate) struct Slots {
    free: Arc<Semaphore>,
    limit: usize,
    /// Open streams of each kind.
    open: Arc<[AtomicUsize; 3]>,
}

/// A place, given back when dropped.
#[derive(Debug)]
pub(crate) struct Slot {
    _permit: OwnedSemaphorePermit,
    kind: Kind,
    slots: Slots,
}

impl Slots {
    pub(crate) fn new(limit: usize) -> Self {
        Self {
            free: Arc::new(Semaphore::new(limit)),
            limit,
            open: Arc::default(),
        }
    }

    /// Takes a place.
    pub(crate) fn take(&self, kind: Kind) -> Result<Slot, Refused> {
        let permit = Arc::clone(&self.free).try_acquire_owned();
        let permit = permit.map_err(|_| Refused::TooManyStreams { limit: self.limit })?;
        let before = self.open[kind as usize].fetch_add(1, Ordering::Relaxed);
        metrics::open_streams(kind.label(), before + 1);
        Ok(Slot {
            _permit: permit,
            kind,
            slots: self.clone(),
        })
    }
}

impl Kind {
    fn label(self) -> &'static str {
        match self {
            Self::Report => "report",
            Self::Watch => "watch",
            Self::Follow => "follow",
        }
    }
}

impl Drop for Slot {
    fn drop(&mut self) {
        let before = self.slots.open[self.kind as usize].fetch_sub(1, Ordering::Relaxed);
        metrics::open_streams(self.kind.label(), before - 1);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_place_comes_back() {
        let slots = Slots::new(1);
        let held = slots.take(Kind::Watch).unwrap();
        assert_eq!(
            slots.take(Kind::Follow).unwrap_err(),
            Refused::TooManyStreams { limit: 1 }
        );
        drop(held);
        assert!(slots.take(Kind::Report).is_ok());
    }
}
