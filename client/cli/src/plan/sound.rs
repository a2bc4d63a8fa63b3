//! What averaging costs in sound.

use ratewright_ratio::{Exact, residual, sideband::level_db};

use super::findings::Findings;
use super::question::Question;

/// Tones for which sidebands are told, Hz.
pub(crate) const TONES_HZ: [f64; 2] = [1_000.0, 20_000.0];

/// An error in time that comes and goes.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Jitter {
    /// Its peak, s.
    pub(crate) peak_s: f64,
    /// The sidebands it makes on each of [`TONES_HZ`], dB of the tone.
    pub(crate) sidebands_db: [f64; 2],
}

/// What a bound of an error in output samples means in time; `None` if no rate is known.
pub(crate) fn jitter(question: &Question, error_bound: &Exact) -> Option<Jitter> {
    let peak_s = question.seconds_of(error_bound)?;
    Some(Jitter {
        peak_s,
        sidebands_db: TONES_HZ.map(|tone_hz| level_db(peak_s, tone_hz)),
    })
}

/// By how much the pitch changes from one ratio of the cadence to the other, dimensionless.
pub(crate) fn pitch_step(findings: &Findings) -> Option<f64> {
    let cadence = findings.lazy.as_ref()?.cadence();
    Some(residual(&cadence.high(), cadence.wanted()) - residual(&cadence.low(), cadence.wanted()))
}
