//! The timescale of a sink from readings of its counter.

use std::collections::VecDeque;

use crate::Timescale;

/// Readings that the line is drawn through.
const READINGS: usize = 64;

/// How far a sink's rate may be from nominal before anything was measured, as a standard deviation.
const RATE_DEVIATION: f64 = 100e-6;

/// A straight line through the newest 64 readings of a sink's counter, least squares.
///
/// The rate is held near nominal as by a measurement of ±100 ppm, so that the first readings, which
/// lie close together, don't throw it about.
///
/// # Examples
/// ```
/// use ratewright_handle::SinkLine;
/// let mut line = SinkLine::new(48_000.0);
/// for second in 0..60 {
///     // 10 ppm fast, read with an error of a few µs.
///     let error_ns = [0, 4_000, -3_000][second as usize % 3];
///     line.read(0, (second as f64 * 48_000.48).round() as u64, second * 1_000_000_000 + error_ns, 5_000.0);
/// }
/// let timescale = line.timescale().expect("it was read");
/// assert!((timescale.rate_hz - 48_000.48).abs() < 0.005);
/// ```
#[derive(Clone, Debug)]
pub struct SinkLine {
    nominal_hz: f64,
    counter_epoch: u64,
    readings: VecDeque<Reading>,
}

#[derive(Clone, Copy, Debug)]
struct Reading {
    sample: u64,
    house_ns: i64,
    deviation_ns: f64,
}

impl SinkLine {
    /// A line for a sink of this nominal rate, above 0.
    pub fn new(nominal_hz: f64) -> Self {
        Self {
            nominal_hz,
            counter_epoch: 0,
            readings: VecDeque::with_capacity(READINGS),
        }
    }

    /// Takes a reading: at `house_ns`, known to `deviation_ns` (a standard deviation; at least 1 is
    /// assumed), the counter stood at `sample`. Another counter epoch, or a count that fell, begins
    /// the line anew.
    pub fn read(&mut self, counter_epoch: u64, sample: u64, house_ns: i64, deviation_ns: f64) {
        let fell = self
            .readings
            .back()
            .is_some_and(|last| sample < last.sample);
        if counter_epoch != self.counter_epoch || fell {
            self.readings.clear();
            self.counter_epoch = counter_epoch;
        }
        if self.readings.len() == READINGS {
            self.readings.pop_front();
        }
        self.readings.push_back(Reading {
            sample,
            house_ns,
            deviation_ns: deviation_ns.max(1.0),
        });
    }

    /// The line at the newest reading; `None` before the first.
    pub fn timescale(&self) -> Option<Timescale> {
        let last = *self.readings.back()?;
        // From the newest reading: how far the house is ahead of the nominal line, over nominal ns.
        let points = self.readings.iter().map(|reading| {
            let nominal_ns = -((last.sample - reading.sample) as f64) / self.nominal_hz * 1e9;
            let house_ns = reading.house_ns.saturating_sub(last.house_ns) as f64;
            let weight = 1.0 / (reading.deviation_ns * reading.deviation_ns);
            (nominal_ns, house_ns - nominal_ns, weight)
        });
        let (mut s, mut sx, mut sy, mut sxx, mut sxy) = (0.0, 0.0, 0.0, 0.0, 0.0);
        for (x, y, weight) in points {
            s += weight;
            sx += weight * x;
            sy += weight * y;
            sxx += weight * x * x;
            sxy += weight * x * y;
        }
        // The prior: a slope of 0 with the rate's deviation.
        sxx += 1.0 / (RATE_DEVIATION * RATE_DEVIATION);
        let determinant = s * sxx - sx * sx;
        let slope = (s * sxy - sx * sy) / determinant;
        let offset_ns = (sxx * sy - sx * sxy) / determinant;
        let variance = sxx / determinant;
        Some(Timescale {
            counter_epoch: self.counter_epoch,
            sample: last.sample,
            house_ns: last.house_ns.saturating_add(offset_ns.round() as i64),
            rate_hz: self.nominal_hz / (1.0 + slope),
            deviation_ns: variance.sqrt(),
        })
    }
}

#[cfg(all(test, not(loom)))]
mod tests {
    use super::*;

    const RATE_HZ: f64 = 44_100.0 * (1.0 - 37e-6);
    const BEGAN_NS: i64 = 1_800_000_000_000_000_000;

    /// Errors that a careful reading has: an even draw from ±30 µs.
    fn errors() -> impl Iterator<Item = f64> {
        let mut seed = 7u64;
        std::iter::from_fn(move || {
            seed = seed.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
            Some(((seed >> 11) as f64 / (1u64 << 53) as f64 - 0.5) * 60_000.0)
        })
    }

    #[test]
    fn its_error_is_within_what_it_says_from_the_first_reading_on() {
        let deviation_ns = 30_000.0 / 3f64.sqrt();
        let (mut squares, mut count) = (0.0, 0.0);
        let mut line = SinkLine::new(44_100.0);
        assert_eq!(line.timescale(), None);
        for (index, error_ns) in errors().take(2_000).enumerate() {
            let sample = index as u64 * 22_050;
            let true_ns = sample as f64 / RATE_HZ * 1e9;
            line.read(
                0,
                sample,
                BEGAN_NS + (true_ns + error_ns) as i64,
                deviation_ns,
            );
            let timescale = line.timescale().expect("it was read");
            let off_ns = (timescale.house_ns - BEGAN_NS) as f64 - true_ns;
            assert!(
                off_ns.abs() < 5.0 * timescale.deviation_ns,
                "{index}: {off_ns}"
            );
            squares += (off_ns / timescale.deviation_ns).powi(2);
            count += 1.0;
        }
        let spread: f64 = (squares / count).sqrt();
        assert!((0.7..1.3).contains(&spread), "{spread}");
        let timescale = line.timescale().expect("it was read");
        assert!((timescale.rate_hz / RATE_HZ - 1.0).abs() < 1e-6);
    }

    #[test]
    fn a_counter_that_began_anew_begins_the_line_anew() {
        let mut line = SinkLine::new(48_000.0);
        for second in 0..10 {
            line.read(
                0,
                1_000_000 + second * 48_000,
                second as i64 * 1_000_000_000,
                1e3,
            );
        }
        line.read(1, 7, 20_000_000_000, 1e3);
        let timescale = line.timescale().expect("it was read");
        assert_eq!(
            (
                timescale.counter_epoch,
                timescale.sample,
                timescale.house_ns
            ),
            (1, 7, 20_000_000_000)
        );
        assert_eq!(timescale.rate_hz, 48_000.0);
    }
}
