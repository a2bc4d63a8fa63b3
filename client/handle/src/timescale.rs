//! Where the sink's count of samples stands in house time.

use thiserror::Error;

use crate::cells::Words;

/// Words of a timescale.
pub(crate) const TIMESCALE_WORDS: usize = 5;

/// The sink's count of samples against house time: at `house_ns` it stood at `sample`, and it goes
/// on at `rate_hz`.
///
/// # Examples
/// ```
/// use ratewright_handle::Timescale;
/// let timescale = Timescale {
///     counter_epoch: 0,
///     sample: 1_000,
///     house_ns: 5_000_000_000,
///     rate_hz: 48_000.0,
///     deviation_ns: 0.0,
/// };
/// assert_eq!(timescale.sample_at(5_000_000_000), 1_000);
/// // One sample is 20 833.3 ns: the first sample at or after the instant.
/// assert_eq!(timescale.sample_at(5_000_000_001), 1_001);
/// assert_eq!(timescale.house_ns_at(1_048), 5_001_000_000);
/// ```
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Timescale {
    /// Which run of the counter: it grows when the sink began to count anew.
    pub counter_epoch: u64,
    /// The count of samples at `house_ns`.
    pub sample: u64,
    /// House time, ns.
    pub house_ns: i64,
    /// Samples a second of house time, above 0.
    pub rate_hz: f64,
    /// Standard deviation of `house_ns`, ns, at least 0.
    pub deviation_ns: f64,
}

/// Why a timescale was refused. The one before stays.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum TimescaleError {
    /// A rate that no sink has.
    #[error("rate_hz is {0}; accepted is above 0 and finite")]
    Rate(f64),
    /// A deviation that is none.
    #[error("deviation_ns is {0}; accepted is at least 0 and finite")]
    Deviation(f64),
    /// The counter epoch fell.
    #[error("counter_epoch is {given}; accepted is at least {newest}")]
    CounterEpoch {
        /// The refused epoch.
        given: u64,
        /// The newest so far.
        newest: u64,
    },
}

impl Timescale {
    /// The first sample at or after a house time; 0 and the largest stand for what is beyond them.
    pub fn sample_at(&self, house_ns: i64) -> u64 {
        let ahead = house_ns.saturating_sub(self.house_ns) as f64 * self.rate_hz / 1e9;
        // Saturates, which is what is wanted.
        let ahead = ahead.ceil() as i128;
        let sample = i128::from(self.sample).saturating_add(ahead);
        sample.clamp(0, u64::MAX.into()) as u64
    }

    /// The house time of a sample, ns.
    pub fn house_ns_at(&self, sample: u64) -> i64 {
        let ahead = i128::from(sample) - i128::from(self.sample);
        let ahead_ns = (ahead as f64 / self.rate_hz * 1e9).round() as i64;
        self.house_ns.saturating_add(ahead_ns)
    }

    pub(crate) fn check(&self, newest_epoch: Option<u64>) -> Result<(), TimescaleError> {
        if !(self.rate_hz.is_finite() && self.rate_hz > 0.0) {
            return Err(TimescaleError::Rate(self.rate_hz));
        }
        if !(self.deviation_ns.is_finite() && self.deviation_ns >= 0.0) {
            return Err(TimescaleError::Deviation(self.deviation_ns));
        }
        match newest_epoch {
            Some(newest) if newest > self.counter_epoch => Err(TimescaleError::CounterEpoch {
                given: self.counter_epoch,
                newest,
            }),
            _ => Ok(()),
        }
    }
}

impl Words<TIMESCALE_WORDS> for Timescale {
    fn to_words(&self) -> [u64; TIMESCALE_WORDS] {
        [
            self.counter_epoch,
            self.sample,
            self.house_ns.cast_unsigned(),
            self.rate_hz.to_bits(),
            self.deviation_ns.to_bits(),
        ]
    }

    fn from_words([epoch, sample, house, rate, deviation]: [u64; TIMESCALE_WORDS]) -> Self {
        Self {
            counter_epoch: epoch,
            sample,
            house_ns: house.cast_signed(),
            rate_hz: f64::from_bits(rate),
            deviation_ns: f64::from_bits(deviation),
        }
    }
}

#[cfg(all(test, not(loom)))]
mod tests {
    use super::*;

    const TIMESCALE: Timescale = Timescale {
        counter_epoch: 3,
        sample: 1 << 40,
        house_ns: 1_800_000_000_000_000_000,
        rate_hz: 44_100.3,
        deviation_ns: 5_000.0,
    };

    #[test]
    fn a_sample_is_the_first_at_or_after_its_own_house_time() {
        assert_eq!(Timescale::from_words(TIMESCALE.to_words()), TIMESCALE);
        for ahead in [0, 1, 2, 441, 1 << 30, 1 << 35] {
            for sample in [(1 << 40) + ahead, (1 << 40) - ahead] {
                let house_ns = TIMESCALE.house_ns_at(sample);
                // The house time is a whole number of ns, up to half of one late.
                let found = TIMESCALE.sample_at(house_ns - 1);
                assert_eq!(found, sample, "{ahead}");
            }
        }
    }

    #[test]
    fn what_is_out_of_range_is_held_at_the_ends() {
        assert_eq!(TIMESCALE.sample_at(i64::MIN), 0);
        let late = Timescale {
            sample: u64::MAX - 5,
            ..TIMESCALE
        };
        assert_eq!(late.sample_at(i64::MAX), u64::MAX);
        assert_eq!(TIMESCALE.house_ns_at(u64::MAX), i64::MAX);
    }

    #[test]
    fn nonsense_is_refused_by_name() {
        let with = |rate_hz, deviation_ns| Timescale {
            rate_hz,
            deviation_ns,
            ..TIMESCALE
        };
        for (bad, field) in [
            (with(0.0, 1.0), "rate_hz"),
            (with(f64::NAN, 1.0), "rate_hz"),
            (with(48e3, -1.0), "deviation_ns"),
            (with(48e3, f64::INFINITY), "deviation_ns"),
        ] {
            let error = bad.check(None).expect_err("nonsense").to_string();
            assert!(error.starts_with(field), "{error}");
        }
        assert_eq!(TIMESCALE.check(Some(3)), Ok(()));
        assert!(TIMESCALE.check(Some(4)).is_err());
    }
}
