//! The state of the estimate, with hysteresis so that it does not flutter.

use serde::{Deserialize, Serialize};

use crate::estimate::{Reason, State};

/// Half-width within which a clock is no longer free-running, dimensionless.
pub(crate) const ACQUIRE_HALF_WIDTH: f64 = 1e-5;
/// Rows before a lock can be.
pub(crate) const LOCK_ROWS: u16 = 64;
/// A threshold is entered at this fraction of itself…
pub(crate) const ENTER: f64 = 1.0 / 1.3;
/// …held for this many rows, because "first crossed" claims are optimistic…
const HOLD_ROWS: u8 = 8;
/// …and left at this multiple.
const LEAVE: f64 = 1.5;

/// Where the estimate stands against both thresholds.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Lock {
    acquired: Gate,
    locked: Gate,
    lost: bool,
}

/// One threshold with its hysteresis.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Gate {
    inside: bool,
    held: u8,
}

impl Gate {
    fn update(&mut self, half_width: f64, threshold: f64, may_enter: bool) {
        if self.inside {
            self.inside = half_width <= LEAVE * threshold;
            self.held = 0;
        } else if may_enter && half_width <= ENTER * threshold {
            self.held += 1;
            if self.held >= HOLD_ROWS {
                *self = Gate {
                    inside: true,
                    held: 0,
                };
            }
        } else {
            self.held = 0;
        }
    }
}

impl Lock {
    /// Takes the half-width after a row.
    pub(crate) fn update(&mut self, half_width: f64, threshold: f64, rows: u16) {
        self.acquired
            .update(half_width, ACQUIRE_HALF_WIDTH.max(threshold), true);
        let was_locked = self.locked.inside;
        self.locked.update(half_width, threshold, rows >= LOCK_ROWS);
        self.lost = (self.lost || was_locked) && !self.locked.inside;
    }

    /// State and reason for a half-width at the time of asking.
    pub(crate) fn state(&self, half_width: f64, threshold: f64, in_gap: bool) -> (State, Reason) {
        let wide = half_width > LEAVE * ACQUIRE_HALF_WIDTH.max(threshold);
        if !self.acquired.inside || wide {
            return (State::FreeRunning, Reason::TooWide);
        }
        if in_gap {
            return (State::Holdover, Reason::ReadingsStopped);
        }
        if self.locked.inside && half_width <= LEAVE * threshold {
            return (State::Locked, Reason::WithinThreshold);
        }
        let lost = self.lost || self.locked.inside;
        (
            State::Acquiring,
            if lost {
                Reason::LockLost
            } else {
                Reason::Narrowing
            },
        )
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn enters_after_eight_narrow_rows_and_leaves_at_half_as_much_again() {
        let mut lock = Lock::default();
        for row in 0..7 {
            lock.update(0.7e-7, 1e-7, 64 + row);
        }
        assert_eq!(lock.state(0.7e-7, 1e-7, false).0, State::FreeRunning);
        lock.update(0.7e-7, 1e-7, 71);
        assert_eq!(lock.state(0.7e-7, 1e-7, false).0, State::Locked);
        lock.update(1.4e-7, 1e-7, 72);
        assert_eq!(lock.state(1.4e-7, 1e-7, false).0, State::Locked);
        lock.update(1.6e-7, 1e-7, 73);
        assert_eq!(
            lock.state(1.6e-7, 1e-7, false),
            (State::Acquiring, Reason::LockLost)
        );
        assert_eq!(
            lock.state(1.6e-7, 1e-7, true),
            (State::Holdover, Reason::ReadingsStopped)
        );
    }
}
