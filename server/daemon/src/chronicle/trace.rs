//! How a figure went: the last minutes finely, the last day coarsely, in bounded memory.

use std::collections::VecDeque;

use ratewright_control::HouseNs;

const S: HouseNs = 1_000_000_000;

/// Points kept of each span.
const KEPT: usize = 120;

/// How far back a trace is looked at.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Span {
    /// The last ten minutes, a point every five seconds.
    Minutes,
    /// The last two hours, a point every minute.
    #[default]
    Hours,
    /// The last day, a point every twelve minutes.
    Day,
}

impl Span {
    /// All of them, the finest first.
    pub const ALL: [Self; 3] = [Self::Minutes, Self::Hours, Self::Day];

    /// From one point to the next, ns of house time.
    pub fn spacing_ns(self) -> HouseNs {
        match self {
            Self::Minutes => 5 * S,
            Self::Hours => 60 * S,
            Self::Day => 720 * S,
        }
    }

    /// All of it, ns of house time.
    pub fn length_ns(self) -> HouseNs {
        self.spacing_ns() * KEPT as HouseNs
    }
}

/// A figure with its 95 % band, over one spacing of a span.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Point {
    /// House time of the middle of the spacing.
    pub at_ns: HouseNs,
    /// The last value in it.
    pub value: f64,
    /// Lowest end of the band in it.
    pub low: f64,
    /// Highest end of the band in it.
    pub high: f64,
}

/// A figure and its band over each [`Span`], at most 6 KiB.
#[derive(Clone, Debug, Default)]
pub struct Trace([VecDeque<Kept>; 3]);

/// A point in half the memory: single precision is a tenth of a part per trillion of a drift.
#[derive(Clone, Copy, Debug)]
struct Kept {
    /// House time over the spacing; 32 bits of five seconds last until the year 2650.
    slot: u32,
    value: f32,
    low: f32,
    high: f32,
}

impl Trace {
    /// Notes the figure at a house time; times before the newest count as that.
    pub fn push(&mut self, at_ns: HouseNs, value: f64, low: f64, high: f64) {
        let (value, low, high) = (value as f32, low as f32, high as f32);
        for (span, points) in Span::ALL.into_iter().zip(&mut self.0) {
            let slot = (at_ns / span.spacing_ns()).clamp(0, i64::from(u32::MAX)) as u32;
            match points.back_mut() {
                Some(newest) if newest.slot >= slot => {
                    newest.value = value;
                    newest.low = newest.low.min(low);
                    newest.high = newest.high.max(high);
                }
                _ => {
                    if points.len() == KEPT {
                        points.pop_front();
                    }
                    points.push_back(Kept {
                        slot,
                        value,
                        low,
                        high,
                    });
                }
            }
        }
    }

    /// The points of a span up to `now_ns`, oldest first. Where nothing was noted there is none.
    pub fn points(&self, span: Span, now_ns: HouseNs) -> Vec<Point> {
        let spacing_ns = span.spacing_ns();
        let from_ns = now_ns - span.length_ns();
        let points = self.0[span as usize].iter().map(|kept| Point {
            at_ns: HouseNs::from(kept.slot) * spacing_ns + spacing_ns / 2,
            value: kept.value.into(),
            low: kept.low.into(),
            high: kept.high.into(),
        });
        points.filter(|point| point.at_ns >= from_ns).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn each_span_keeps_its_length_and_the_whole_band() {
        let mut trace = Trace::default();
        for second in 0..100_000 {
            let value = second as f64;
            trace.push(second * S, value, value - 1.0, value + 1.0);
        }
        let now = 99_999 * S;
        for span in Span::ALL {
            let points = trace.points(span, now);
            assert!((KEPT - 1..=KEPT).contains(&points.len()), "{span:?}");
            let seconds = (span.spacing_ns() / S) as f64;
            let gaps = points.windows(2).map(|pair| pair[1].at_ns - pair[0].at_ns);
            assert!(gaps.into_iter().all(|gap| gap == span.spacing_ns()));
            let middle = points[KEPT / 2];
            assert_eq!(middle.high - middle.low, seconds - 1.0 + 2.0, "{span:?}");
            assert_eq!(middle.high, middle.value + 1.0);
        }
    }

    #[test]
    fn a_silence_is_a_gap_and_old_points_are_not_shown() {
        let mut trace = Trace::default();
        for second in (0..60).chain(400..430) {
            trace.push(second * S, 1.0, 0.0, 2.0);
        }
        let times = |now: i64| -> Vec<i64> {
            let points = trace.points(Span::Minutes, now * S);
            points.iter().map(|point| point.at_ns / S).collect()
        };
        assert_eq!(times(430).len(), 12 + 6);
        assert_eq!((times(430)[11], times(430)[12]), (57, 402));
        assert_eq!(
            times(700).len(),
            6,
            "what is older than ten minutes is left out"
        );
    }

    #[test]
    fn memory_is_within_six_kibibytes() {
        let mut trace = Trace::default();
        (0..100_000).for_each(|second| trace.push(second * S, 0.0, 0.0, 0.0));
        let bytes: usize = trace
            .0
            .iter()
            .map(|points| points.capacity() * size_of::<Kept>())
            .sum();
        assert!(bytes + size_of::<Trace>() <= 6 * 1024 + 256, "{bytes}");
    }
}
