//! The statistics of an endless stream, at octave intervals, in bounded memory.

use serde::{Deserialize, Serialize};

/// Octaves kept: intervals of 1, 2, 4, … 2^14 samples.
const OCTAVES: usize = 15;
/// Samples of an interval in its ring: windows begin at every half of the interval.
const PER_INTERVAL: usize = 2;
const RING: usize = 3 * PER_INTERVAL + 1;

/// Streaming stability statistics of phase samples spaced by τ₀, in 4 KiB.
///
/// Octaves up to 2·τ₀ take every window; longer ones begin a window every half of their
/// interval, which costs confidence only where the phase noise is white. MTIE over
/// longer intervals sees every sample, but windows at those beginnings only: it lies between
/// the exact MTIE of the interval and that of half the interval.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Stability {
    tau0_s: f64,
    samples: u64,
    octaves: Vec<Octave>,
}

/// One octave: a ring of points and of means between them.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Octave {
    /// Samples from one ring entry to the next.
    stride: u64,
    /// Entries an interval spans.
    span: usize,
    entries: u64,
    ring: [Entry; RING],
    /// The entry under way.
    pending: Pending,
    sums: Sums,
}

/// Phase at an entry's first sample; mean, least and largest of its stride of samples.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Entry {
    point: f64,
    mean: f64,
}

#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Pending {
    point: f64,
    sum: f64,
    low: f64,
    high: f64,
    count: u64,
    /// Extremes of the last entries, newest last.
    lows: [f64; PER_INTERVAL],
    highs: [f64; PER_INTERVAL],
}

#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Sums {
    allan: f64,
    modified: f64,
    hadamard: f64,
    gained: f64,
    gained_terms: u64,
    mtie: f64,
}

/// Figures of one octave; what was not seen often enough is absent.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct OctaveFigures {
    /// Interval, s.
    pub tau_s: f64,
    /// Overlapping Allan deviation.
    pub allan: Option<f64>,
    /// Modified Allan deviation.
    pub modified_allan: Option<f64>,
    /// Overlapping Hadamard deviation.
    pub hadamard: Option<f64>,
    /// Time deviation, s.
    pub time_s: Option<f64>,
    /// MTIE, s.
    pub mtie_s: Option<f64>,
    /// TIErms, s.
    pub tie_rms_s: Option<f64>,
}

impl Stability {
    /// Nothing seen yet; `tau0_s` above zero is the spacing of samples, s.
    pub fn new(tau0_s: f64) -> Self {
        let octaves = (0..OCTAVES).map(|k| {
            let interval = 1_u64 << k;
            let span = (interval as usize).min(PER_INTERVAL);
            Octave {
                stride: interval / span as u64,
                span,
                ..Octave::default()
            }
        });
        Stability {
            tau0_s,
            samples: 0,
            octaves: octaves.collect(),
        }
    }

    /// Takes the next phase sample, s. A value that is not finite is left out.
    pub fn push(&mut self, phase_s: f64) {
        if !phase_s.is_finite() {
            return;
        }
        self.samples += 1;
        for octave in &mut self.octaves {
            octave.push(phase_s);
        }
    }

    /// Samples taken.
    pub fn samples(&self) -> u64 {
        self.samples
    }

    /// Figures of every octave that has any, in rising order of the interval.
    pub fn figures(&self) -> impl Iterator<Item = OctaveFigures> {
        let tau0_s = self.tau0_s;
        self.octaves
            .iter()
            .enumerate()
            .filter(|(_, o)| o.sums.gained_terms > 0)
            .map(move |(k, o)| {
                let tau_s = tau0_s * (1_u64 << k) as f64;
                let root = |sum: f64, terms: u64, divisor: f64| {
                    (terms > 0).then(|| (sum / (terms as f64 * divisor)).sqrt())
                };
                let s = &o.sums;
                let modified_allan = root(
                    s.modified,
                    (o.entries + 1).saturating_sub(3 * o.span as u64),
                    2.0 * tau_s * tau_s,
                );
                OctaveFigures {
                    tau_s,
                    allan: root(s.allan, o.terms(2), 2.0 * tau_s * tau_s),
                    modified_allan,
                    hadamard: root(s.hadamard, o.terms(3), 6.0 * tau_s * tau_s),
                    time_s: modified_allan.map(|m| m * tau_s / 3.0_f64.sqrt()),
                    mtie_s: Some(s.mtie),
                    tie_rms_s: root(s.gained, s.gained_terms, 1.0),
                }
            })
    }
}

impl Octave {
    fn push(&mut self, x: f64) {
        let p = &mut self.pending;
        if p.count == 0 {
            (p.point, p.sum, p.low, p.high) = (x, 0.0, x, x);
            let (point, window) = (x, self.entries);
            self.close_window(point, window);
        }
        let p = &mut self.pending;
        p.sum += x;
        p.low = p.low.min(x);
        p.high = p.high.max(x);
        p.count += 1;
        if p.count == self.stride {
            self.finish();
        }
    }

    /// A sample `span` entries after an earlier one closes the window between them.
    fn close_window(&mut self, x: f64, window: u64) {
        if window < self.span as u64 {
            return;
        }
        let p = &self.pending;
        let within = PER_INTERVAL - self.span..PER_INTERVAL;
        let low = p.lows[within.clone()].iter().fold(x, |a, &b| a.min(b));
        let high = p.highs[within].iter().fold(x, |a, &b| a.max(b));
        let gained = x - self.at(window - self.span as u64).point;
        self.sums.mtie = self.sums.mtie.max(high - low);
        self.sums.gained += gained * gained;
        self.sums.gained_terms += 1;
    }

    fn at(&self, entry: u64) -> Entry {
        self.ring[(entry % RING as u64) as usize]
    }

    /// Mean phase over the interval that begins at an entry.
    fn mean(&self, from: u64) -> f64 {
        let span = self.span as u64;
        (from..from + span)
            .map(|entry| self.at(entry).mean)
            .sum::<f64>()
            / span as f64
    }

    /// Terms summed of a statistic that needs so many intervals before its first term.
    fn terms(&self, intervals: u64) -> u64 {
        self.entries.saturating_sub(intervals * self.span as u64)
    }

    fn finish(&mut self) {
        let p = &mut self.pending;
        let entry = Entry {
            point: p.point,
            mean: p.sum / p.count as f64,
        };
        p.lows.rotate_left(1);
        p.highs.rotate_left(1);
        (p.lows[PER_INTERVAL - 1], p.highs[PER_INTERVAL - 1]) = (p.low, p.high);
        p.count = 0;
        let now = self.entries;
        self.ring[(now % RING as u64) as usize] = entry;
        self.entries += 1;
        let span = self.span as u64;
        // Entries not there yet read as the ring's zeros; they are not summed.
        let [one, two, three] = [1, 2, 3].map(|k| self.at(now.wrapping_sub(k * span)).point);
        if now >= 2 * span {
            let second = entry.point - 2.0 * one + two;
            self.sums.allan += second * second;
        }
        if now >= 3 * span {
            let third = entry.point - 3.0 * (one - two) - three;
            self.sums.hadamard += third * third;
        }
        if now + 1 >= 3 * span {
            let first = now + 1 - 3 * span;
            let second =
                self.mean(first + 2 * span) - 2.0 * self.mean(first + span) + self.mean(first);
            self.sums.modified += second * second;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::sim::Random;
    use crate::stability::{Kind, deviation, mtie, tie_rms};

    /// Octaves that take every window.
    const FINE: usize = 2;

    fn noisy_phase(count: usize) -> Vec<f64> {
        let mut random = Random::new(4);
        let (mut drift, mut phase) = (0.0, 0.0);
        (0..count)
            .map(|_| {
                drift += 1e-11 * random.normal();
                phase += drift + 1e-9 * random.normal();
                phase + 5e-9 * random.normal()
            })
            .collect()
    }

    #[test]
    fn a_stream_agrees_with_the_whole_record() {
        let phase = noisy_phase(20_000);
        let mut stability = Stability::new(1.0);
        phase.iter().for_each(|&x| stability.push(x));
        let figures: Vec<_> = stability.figures().collect();
        for (k, f) in figures.iter().enumerate().take(11) {
            let m = 1 << k;
            let exact = |kind| deviation(kind, &phase, 1.0, m).unwrap().value;
            // Fewer windows, so three deviations of an rms of as many independent terms.
            let terms = (phase.len() * 2 / m) as f64;
            let tolerance = if k < FINE {
                1e-6
            } else {
                3.0 / (2.0 * terms).sqrt()
            };
            let near = |a: Option<f64>, b: f64| {
                let a = a.expect("seen");
                assert!(
                    (a - b).abs() <= tolerance * b,
                    "octave {k}: {a} against {b}"
                );
            };
            near(f.allan, exact(Kind::Allan));
            near(f.modified_allan, exact(Kind::ModifiedAllan));
            near(f.hadamard, exact(Kind::Hadamard));
            near(f.time_s, exact(Kind::Time));
            near(f.tie_rms_s, tie_rms(&phase, m).unwrap());
            let streamed = f.mtie_s.unwrap();
            assert!(streamed <= mtie(&phase, m).unwrap(), "octave {k}");
            assert!(
                streamed >= mtie(&phase, (m / 2).max(1)).unwrap(),
                "octave {k}"
            );
        }
    }

    #[test]
    fn memory_is_within_four_kibibytes() {
        let bytes = size_of::<Stability>() + OCTAVES * size_of::<Octave>();
        assert!(bytes <= 4 * 1024, "{bytes}");
    }
}
