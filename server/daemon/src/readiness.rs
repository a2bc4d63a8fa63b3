//! Whether the daemon serves: not before the store is recovered, not once it drains.

use std::sync::Arc;

use tokio::sync::watch;

/// The life of a daemon.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Phase {
    /// The journal is being replayed; no call is served but health and reflection.
    Recovering,
    /// Everything is served.
    Serving,
    /// Open streams are told to end; new calls are refused.
    Draining,
}

/// Shared view of the phase. Cheap to clone.
#[derive(Clone, Debug)]
pub struct Readiness(Arc<watch::Sender<Phase>>);

impl Readiness {
    /// Starts as [`Phase::Recovering`].
    pub fn new() -> Self {
        Self(Arc::new(watch::Sender::new(Phase::Recovering)))
    }

    /// The phase now.
    pub fn phase(&self) -> Phase {
        *self.0.borrow()
    }

    /// Enters a phase. Draining is final.
    pub fn enter(&self, phase: Phase) {
        self.0.send_if_modified(|now| {
            let changes = *now != phase && *now != Phase::Draining;
            if changes {
                *now = phase;
            }
            changes
        });
    }

    /// Waits for a phase, and tells which it was.
    pub async fn wait_for(&self, wanted: impl Fn(Phase) -> bool) -> Phase {
        let mut phases = self.0.subscribe();
        let met = phases.wait_for(|phase| wanted(*phase)).await;
        *met.expect("the sender lives in self")
    }

    /// Waits until the daemon drains.
    pub async fn draining(&self) {
        self.wait_for(|phase| phase == Phase::Draining).await;
    }
}

impl Default for Readiness {
    fn default() -> Self {
        Self::new()
    }
}
