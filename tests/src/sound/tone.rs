//! What became of a tone: its frequency in house time, and what else is in its spectrum.

use std::f64::consts::TAU;

use realfft::{RealFftPlanner, num_complex::Complex};
use windowfunctions::{Symmetry, WindowFunction, window};

use super::world::Instant;

/// Kaiser's β of the windows here: side lobes below −160 dB.
const BETA: f32 = 22.0;

/// Bins to either side of a tone that are its own main lobe: √(1 + (β/π)²) = 7.1.
const LOBE_BINS: usize = 8;

fn kaiser(length: usize) -> Vec<f64> {
    let kaiser = WindowFunction::Kaiser { beta: BETA };
    window::<f64>(length, kaiser, Symmetry::Periodic).collect()
}

/// How far a tone was ahead of one of exactly `hz` in house time, in turns within ±1/2: `samples`
/// with the instants at which they are played.
pub fn turns_ahead(samples: &[f64], played: &[Instant], hz: f64) -> f64 {
    let weights = kaiser(samples.len());
    let (mut re, mut im) = (0.0, 0.0);
    for ((sample, at), weight) in samples.iter().zip(played).zip(&weights) {
        let angle = TAU * at.turns(hz);
        re += weight * sample * libm::cos(angle);
        im -= weight * sample * libm::sin(angle);
    }
    libm::atan2(im, re) / TAU
}

/// How far a tone was ahead at a time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Ahead {
    /// Seconds of house time.
    pub at_s: f64,
    /// Turns.
    pub turns: f64,
}

/// A frequency measured in house time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Frequency {
    /// Nominal, Hz.
    pub hz: f64,
    /// Over how long it is averaged, s.
    pub over_s: f64,
    /// From the first and the last phase: measured over nominal, minus 1, 10⁻⁹.
    pub end_to_end_ppb: f64,
    /// From a straight line through all phases, 10⁻⁹.
    pub fitted_ppb: f64,
}

/// The frequency of a tone from its phases, which must differ by less than half a turn.
///
/// # Panics
/// With fewer than two phases.
pub fn frequency(hz: f64, phases: &[Ahead]) -> Frequency {
    let first = phases.first().expect("there are phases");
    let from_first = |ahead: &Ahead| {
        let turns = ahead.turns - first.turns;
        (ahead.at_s - first.at_s, turns - libm::round(turns))
    };
    let points: Vec<_> = phases.iter().map(from_first).collect();
    let (over_s, gained) = *points.last().expect("there is a last");
    assert!(over_s > 0.0, "one phase tells no frequency");
    let n = points.len() as f64;
    let (sum_t, sum_y) = points
        .iter()
        .fold((0.0, 0.0), |(a, b), (t, y)| (a + t, b + y));
    let (mean_t, mean_y) = (sum_t / n, sum_y / n);
    let (mut ty, mut tt) = (0.0, 0.0);
    for (t, y) in points {
        ty += (t - mean_t) * (y - mean_y);
        tt += (t - mean_t) * (t - mean_t);
    }
    Frequency {
        hz,
        over_s,
        end_to_end_ppb: gained / over_s / hz * 1e9,
        fitted_ppb: ty / tt / hz * 1e9,
    }
}

/// A spectrum, in dB relative to its tone.
#[derive(Clone, Debug, PartialEq)]
pub struct Spectrum {
    /// Width of a bin, Hz.
    pub bin_hz: f64,
    /// Level of each bin from 0 Hz on, dB of the tone, not of its highest bin: that is up to 0.8 dB
    /// less, as a tone falls between two bins.
    pub level_db: Vec<f64>,
    /// Bin of the tone.
    pub tone: usize,
}

/// The greatest of what should not be there.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Spur {
    /// Level, dB relative to the tone.
    pub level_db: f64,
    /// Where, Hz from the tone.
    pub offset_hz: f64,
}

/// The spectrum of samples at a rate, under a Kaiser window with β = 22.
///
/// # Panics
/// With fewer than two samples.
pub fn spectrum(samples: &[f64], rate_hz: f64) -> Spectrum {
    let mut windowed: Vec<f64> = samples
        .iter()
        .zip(kaiser(samples.len()))
        .map(|(x, w)| x * w)
        .collect();
    let fft = RealFftPlanner::<f64>::new().plan_fft_forward(samples.len());
    let mut bins = fft.make_output_vec();
    fft.process(&mut windowed, &mut bins)
        .expect("both lengths come from the plan");
    // Far below what double precision resolves.
    let level = |bin: &Complex<f64>| 10.0 * libm::log10(bin.norm_sqr().max(1e-30));
    let mut level_db: Vec<f64> = bins.iter().map(level).collect();
    let by_level = |a: &usize, b: &usize| level_db[*a].total_cmp(&level_db[*b]);
    let tone = (0..level_db.len())
        .max_by(by_level)
        .expect("there are bins");
    let tone_db = top_db(&level_db, tone);
    for level in &mut level_db {
        *level -= tone_db;
    }
    Spectrum {
        bin_hz: rate_hz / samples.len() as f64,
        level_db,
        tone,
    }
}

/// Level of a line whose highest bin this is, which lies up to half a bin beside it: that of the
/// parabola through three levels. The main lobe of a Kaiser window with β = 22 differs from one by
/// less than 0.01 dB there: in nepers it is √(β² − x²) − ln(β² − x²)/2 + const, x = π times the bins
/// from its middle, whose term in x⁴ is (1/4 − β/8) (x/β)⁴.
fn top_db(level_db: &[f64], bin: usize) -> f64 {
    let at = level_db[bin];
    let (Some(below), Some(above)) = (
        bin.checked_sub(1).map(|i| level_db[i]),
        level_db.get(bin + 1),
    ) else {
        return at;
    };
    let (slope, bend) = ((above - below) / 2.0, above - 2.0 * at + below);
    // No top between its neighbours: the side of something else.
    if at < below || at < *above || bend >= 0.0 {
        return at;
    }
    at - slope * slope / (2.0 * bend)
}

impl Spectrum {
    /// The worst spur at least so far from the tone, and outside of its main lobe.
    ///
    /// # Panics
    /// If there is nothing outside of it.
    pub fn worst_spur(&self, from_hz: f64) -> Spur {
        let outside = |bin: &usize| {
            let bins = bin.abs_diff(self.tone);
            bins > LOBE_BINS && bins as f64 * self.bin_hz >= from_hz
        };
        let worst = (0..self.level_db.len())
            .filter(outside)
            .max_by(|a, b| self.level_db[*a].total_cmp(&self.level_db[*b]))
            .expect("a spectrum is longer than a main lobe");
        Spur {
            level_db: top_db(&self.level_db, worst),
            offset_hz: (worst as f64 - self.tone as f64) * self.bin_hz,
        }
    }

    /// How near to the tone a spur is still told from it, Hz.
    pub fn resolution_hz(&self) -> f64 {
        LOBE_BINS as f64 * self.bin_hz
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const RATE: f64 = 48_000.0;

    fn instants(length: usize) -> Vec<Instant> {
        let at = |n: usize| Instant {
            slot: 0,
            into_s: n as f64 / RATE,
        };
        (0..length).map(at).collect()
    }

    #[test]
    fn a_phase_is_found_as_it_was_made() {
        let played = instants(8_192);
        for turns in [-0.4, -0.1, 0.0, 0.25, 0.49] {
            let sample = |at: &Instant| libm::cos(TAU * (19_000.0 * at.into_s + turns));
            let samples: Vec<f64> = played.iter().map(sample).collect();
            let found = turns_ahead(&samples, &played, 19_000.0);
            assert!((found - turns).abs() < 1e-9, "{turns}: {found}");
        }
    }

    #[test]
    fn a_frequency_that_is_off_by_a_part_in_a_billion_is_seen() {
        let phases: Vec<_> = (0..100)
            .map(|i| f64::from(i) * 100.0)
            .map(|at_s| Ahead {
                at_s,
                turns: 0.3 + 19_000.0 * 1e-9 * at_s,
            })
            .collect();
        let found = frequency(19_000.0, &phases);
        assert!((found.end_to_end_ppb - 1.0).abs() < 1e-9, "{found:?}");
        assert!((found.fitted_ppb - 1.0).abs() < 1e-9, "{found:?}");
    }

    /// Phase modulation by ±a radians makes two lines of a/2: 20 log10(0.001/2) = −66.02 dB, whether
    /// tone and lines fall on bins or between them.
    #[test]
    fn a_known_modulation_makes_the_spur_that_theory_says() {
        for (hz, by_hz) in [(19_000.0, 300.0), (19_000.3, 299.7), (1_000.1, 250.25)] {
            let sample = |n: usize| {
                let t = n as f64 / RATE;
                libm::sin(TAU * hz * t + 0.001 * libm::sin(TAU * by_hz * t))
            };
            let samples: Vec<f64> = (0..1 << 16).map(sample).collect();
            let spur = spectrum(&samples, RATE).worst_spur(0.0);
            assert!((spur.level_db + 66.0206).abs() < 0.01, "{hz} Hz: {spur:?}");
            assert!(
                (spur.offset_hz.abs() - by_hz).abs() < 1.0,
                "{hz} Hz: {spur:?}"
            );
        }
        let clean: Vec<f64> = (0..1 << 16)
            .map(|n| libm::sin(TAU * 1_000.0 * n as f64 / RATE))
            .collect();
        let floor = spectrum(&clean, RATE).worst_spur(0.0);
        assert!(floor.level_db < -160.0, "{floor:?}");
    }
}
