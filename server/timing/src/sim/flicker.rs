//! Flicker frequency noise as a sum of first-order Gauss–Markov processes.
//!
//! Processes of equal deviation σ whose time constants rise by a factor r have, between the shortest and
//! the longest, the one-sided spectrum Σ 4σ²τ/(1 + (2πfτ)²) ≈ σ²/(ln r · f). Flicker of level h/f has the
//! Allan deviation √(2 ln 2 · h) at every averaging time (Barnes et al., 1971). With r = 4 the two give
//! σ itself: every process has the Allan deviation that is asked for.

use serde::{Deserialize, Serialize};

use super::random::Random;

/// Time constants are 4, 16, ... 4^10 s (twelve days).
const PROCESSES: usize = 10;

/// The processes at a whole second.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Flicker {
    drifts: [f64; PROCESSES],
}

impl Flicker {
    /// What they add to the drift.
    pub(super) fn drift(&self) -> f64 {
        self.drifts.iter().sum()
    }

    /// One second on. A clock without flicker draws nothing.
    pub(super) fn following(&self, allan_deviation: f64, random: &mut Random) -> Self {
        let mut next = *self;
        if allan_deviation > 0.0 {
            let mut time_s = 1.0;
            for drift in &mut next.drifts {
                time_s *= 4.0;
                let keep = libm::exp(-1.0 / time_s);
                *drift =
                    keep * *drift + allan_deviation * (1.0 - keep * keep).sqrt() * random.normal();
            }
        }
        next
    }
}

#[cfg(test)]
mod tests {
    use crate::sim::{Clock, ClockModel};

    /// The Allan deviation by its definition, over 16 clocks of two days, is flat and what was asked for.
    /// (The scatter of such an estimate is some per cent; the sum of processes ripples by as much.)
    #[test]
    fn its_allan_deviation_is_the_one_asked_for() {
        const ASKED: f64 = 1e-9;
        const S: i64 = 1_000_000_000;
        let model = ClockModel {
            white_fm: 0.0,
            walk_fm: 0.0,
            flicker_fm: ASKED,
            ..ClockModel::crystal()
        };
        let phases: Vec<Vec<f64>> = (0..16)
            .map(|seed| {
                let mut clock = Clock::new(model.clone(), seed);
                (0..172_800 / 16)
                    .map(|i| clock.phase_s(i * 16 * S))
                    .collect()
            })
            .collect();
        for steps in [4, 32, 256] {
            let tau_s = 16.0 * steps as f64;
            let squares = phases.iter().flat_map(|x| {
                x.windows(2 * steps + 1)
                    .map(|w| (w[0] - 2.0 * w[steps] + w[2 * steps]).powi(2))
            });
            let (sum, count) = squares.fold((0.0, 0_u32), |(sum, n), square| (sum + square, n + 1));
            let deviation = (sum / f64::from(count) / 2.0).sqrt() / tau_s;
            assert!(
                (0.85..1.15).contains(&(deviation / ASKED)),
                "{deviation} at {tau_s} s"
            );
        }
    }
}
