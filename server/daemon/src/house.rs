//! House time: where the facility's one timescale comes from.
//!
//! At start it is the system's UTC plus TAI − UTC; from then on the system's monotonic clock
//! carries it, so that neither a step of the system clock nor a leap second is ever seen.

use std::time::{Duration, Instant, SystemTime, UNIX_EPOCH};

use ratewright_control::HouseNs;

/// TAI − UTC in seconds since 2017-01-01 (IERS Bulletin C 52).
pub const TAI_MINUS_UTC_S: i64 = 37;

/// House time, in ns since 1970-01-01 on a TAI-like scale. Never goes back.
///
/// A copy tells the same time as the original.
#[derive(Clone, Copy, Debug)]
pub struct HouseClock {
    origin: Instant,
    origin_ns: HouseNs,
    pace: f64,
}

impl HouseClock {
    /// Starts house time now.
    ///
    /// `floor_ns` is the last time that was written down: house time starts above it even if the
    /// system clock was set back meanwhile. `pace` is house seconds for a real second: 1, but for
    /// the accelerated sample facility.
    pub fn start(tai_minus_utc_s: i64, floor_ns: HouseNs, pace: f64) -> Self {
        let wall_ns = system_utc_ns() + tai_minus_utc_s * 1_000_000_000;
        if wall_ns <= floor_ns && pace == 1.0 {
            tracing::warn!(
                behind_s = (floor_ns - wall_ns) as f64 * 1e-9,
                "the system clock is behind the last house time in the store; house time goes on from there"
            );
        }
        Self {
            origin: Instant::now(),
            origin_ns: wall_ns.max(floor_ns + 1),
            pace,
        }
    }

    /// House time now.
    pub fn now(&self) -> HouseNs {
        let elapsed = self.origin.elapsed().as_nanos();
        // A plain integer at pace 1: 2^53 ns of a double would be only 104 days.
        let house = if self.pace == 1.0 {
            elapsed as i64
        } else {
            (elapsed as f64 * self.pace) as i64
        };
        self.origin_ns + house
    }

    /// Real time from now until `due_ns` of house time; zero if that has passed.
    pub fn until(&self, due_ns: HouseNs) -> Duration {
        let left_ns = due_ns.saturating_sub(self.now()).max(0);
        Duration::from_nanos((left_ns as f64 / self.pace) as u64)
    }

    /// House seconds for a real second.
    pub fn pace(&self) -> f64 {
        self.pace
    }
}

fn system_utc_ns() -> i64 {
    let since_epoch = SystemTime::now()
        .duration_since(UNIX_EPOCH)
        .unwrap_or_default();
    since_epoch.as_nanos() as i64
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn starts_at_the_system_clock_plus_the_offset() {
        let before = system_utc_ns();
        let house = HouseClock::start(TAI_MINUS_UTC_S, 0, 1.0).now();
        let after = system_utc_ns();
        let offset_ns = 37_000_000_000;
        assert!((before + offset_ns..=after + offset_ns).contains(&house));
    }

    #[test]
    fn never_starts_at_or_below_what_was_written_down() {
        let future = system_utc_ns() + 3_600_000_000_000;
        let clock = HouseClock::start(TAI_MINUS_UTC_S, future, 1.0);
        let first = clock.now();
        assert!(first > future);
        assert!(clock.now() >= first);
    }

    #[test]
    fn pace_makes_house_seconds_short() {
        let clock = HouseClock::start(TAI_MINUS_UTC_S, 0, 1000.0);
        let started = clock.now();
        std::thread::sleep(Duration::from_millis(5));
        assert!(clock.now() - started >= 5_000_000_000);
        let wait = clock.until(clock.now() + 10_000_000_000);
        assert!(wait <= Duration::from_millis(10), "{wait:?}");
    }
}
