//! What the daemon counts. The names live here and nowhere else.

use std::time::Duration;

use ratewright_control::{Setting, Transition};

/// Starts counting. Call once a process, before anything is recorded; later calls do nothing.
pub fn install() {}

/// A batch of readings was answered.
pub fn readings(_accepted: usize, _refused: usize) {}

/// A group of commands was written: events in it, and how long the transaction took.
pub fn commit(_events: usize, _took: Duration) {}

/// A setting was published.
pub fn setting(_setting: &Setting) {}

/// A clock or a crossing changed its state.
pub fn transition(_transition: &Transition) {}

/// Streams open now.
pub fn open_streams(_open: usize) {}
