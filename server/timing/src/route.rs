//! Evidence that the least latency of a path has grown: runs of late rows.

use serde::{Deserialize, Serialize};

/// Evidence in nats that a route change takes.
const CERTAIN: f64 = 14.0;
/// Late rows that are looked at together.
const WINDOW: u16 = 16;

/// Late rows in a row, and how late they are.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct RouteEvidence {
    /// Late rows in a row.
    late: u16,
    /// Of these, the latest rows, up to [`WINDOW`], with the least and the mean of their errors.
    window: u16,
    least: f32,
    mean: f32,
    hit_rate: f32,
}

impl Default for RouteEvidence {
    fn default() -> Self {
        RouteEvidence {
            late: 0,
            window: 0,
            least: 0.0,
            mean: 0.0,
            hit_rate: 0.5,
        }
    }
}

impl RouteEvidence {
    /// Takes a row's error, µs; a `hit` is not late.
    pub(crate) fn take(&mut self, e: f64, hit: bool) {
        self.hit_rate += (f32::from(u8::from(hit)) - self.hit_rate) / 256.0;
        if hit {
            self.late = 0;
            return;
        }
        if self.late == 0 || self.window == WINDOW {
            self.window = 0;
            (self.least, self.mean) = (e as f32, 0.0);
        }
        self.late = self.late.saturating_add(1);
        self.window += 1;
        self.least = self.least.min(e as f32);
        self.mean += (e as f32 - self.mean) / f32::from(self.window);
    }

    /// Whether the rows are late because the least latency has grown, where lateness is
    /// `usual` µs on average, and `alike` rows speak as one.
    ///
    /// Queues make rows late by an exponential distance from nought, a longer route by one from
    /// the least of them; the ratio of likelihoods of n rows is (mean / (mean − least))ⁿ. Where
    /// that does not tell, so many late rows in a row do that chance would hardly make them, a
    /// longer route being as steady as the old one.
    pub(crate) fn is_certain(&self, usual: f64, alike: f64) -> bool {
        let spread = f64::from(self.mean - self.least);
        let excess = f64::from(self.mean) / spread.max(usual);
        let evidence = || f64::from(self.window) * libm::log(excess);
        let told = self.window >= 8 && evidence() > CERTAIN * alike;
        let unsteady = (spread / usual).clamp(1.0, 2.0);
        let chance = f64::from(self.hit_rate).max(0.02);
        let enough = CERTAIN * alike * unsteady / chance;
        told || (self.window >= 12 && f64::from(self.late) > enough)
    }

    /// Error of the least late of the rows, µs.
    pub(crate) fn least_us(&self) -> f64 {
        f64::from(self.least)
    }

    /// The next late row is the first.
    pub(crate) fn forget(&mut self) {
        self.late = 0;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Rows until it is certain, of errors that come again and again; usual lateness 20 µs.
    fn rows_until_certain(errors: &[f64]) -> Option<usize> {
        let mut evidence = RouteEvidence::default();
        let mut rows = errors.iter().cycle().take(200);
        rows.position(|&e| {
            evidence.take(e, false);
            evidence.is_certain(20.0, 1.0)
        })
    }

    #[test]
    fn a_steady_shift_is_certain_after_eight_rows_and_long_queues_not_before_chance_is_excluded() {
        assert_eq!(rows_until_certain(&[505.0, 520.0, 535.0, 510.0]), Some(7));
        assert_eq!(rows_until_certain(&[605.0, 640.0, 690.0, 780.0]), Some(7));
        // Queues of 150 µs on average: by likelihood never, as a run after 14·2/0.5 rows, less
        // what the share of rows that are not late has fallen by.
        let queues = [10.0, 60.0, 130.0, 220.0, 330.0];
        assert!(rows_until_certain(&queues).is_some_and(|n| n > 56));
    }

    #[test]
    fn a_row_in_time_ends_a_run() {
        let mut evidence = RouteEvidence::default();
        for k in 0..400 {
            evidence.take(500.0, k % 6 == 5);
            assert!(!evidence.is_certain(20.0, 1.0));
        }
    }
}
