//! Counts open streams: no layer of the transport does once the answer's head is sent.

use std::sync::Arc;

use tokio::sync::{OwnedSemaphorePermit, Semaphore};

use crate::{metrics, refused::Refused};

/// Places for streams. Cheap to clone.
#[derive(Clone, Debug)]
pub(crate) struct Slots {
    free: Arc<Semaphore>,
    limit: usize,
}

/// A place, given back when dropped.
#[derive(Debug)]
pub(crate) struct Slot {
    permit: Option<OwnedSemaphorePermit>,
    slots: Slots,
}

impl Slots {
    pub(crate) fn new(limit: usize) -> Self {
        Self {
            free: Arc::new(Semaphore::new(limit)),
            limit,
        }
    }

    /// Takes a place.
    pub(crate) fn take(&self) -> Result<Slot, Refused> {
        let permit = Arc::clone(&self.free).try_acquire_owned();
        let permit = permit.map_err(|_| Refused::TooManyStreams { limit: self.limit })?;
        self.count();
        Ok(Slot {
            permit: Some(permit),
            slots: self.clone(),
        })
    }

    fn count(&self) {
        metrics::open_streams(self.limit - self.free.available_permits());
    }
}

impl Drop for Slot {
    fn drop(&mut self) {
        drop(self.permit.take());
        self.slots.count();
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_place_comes_back() {
        let slots = Slots::new(1);
        let held = slots.take().unwrap();
        assert_eq!(
            slots.take().unwrap_err(),
            Refused::TooManyStreams { limit: 1 }
        );
        drop(held);
        assert!(slots.take().is_ok());
    }
}
