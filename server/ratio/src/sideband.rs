//! What the error of a cadence or a stepping costs in sound: the sidebands it makes on a tone.
//!
//! **Theorem** (narrowband phase modulation). A tone of f Hz that is sampled with a time error of τ·sin has the
//! phase 2πft + β·sin with β = 2πfτ. Its first sidebands are J₁(β) of the tone, and J₁(β) ≤ β/2 = πfτ, so they lie
//! at 20·log₁₀(πfτ) dB of it or below. Of another shape with the same peak a sideband may be 4/π (2 dB) higher, the
//! fundamental of a square wave; the errors here are nearer to a sawtooth, whose is 2/π (4 dB lower).
//!
//! **Corner cases.** A level above the tone says no more than that the tone is broken up; it is returned as 0 dB.

/// The level of the first sidebands that a time error of `peak_s` seconds makes on a tone of `tone_hz`, in dB of
/// the tone, at most 0.
///
/// # Examples
/// A picosecond at 20 kHz:
/// ```
/// let level_db = ratewright_ratio::sideband::level_db(1e-12, 20_000.0);
/// assert!((level_db - 20.0 * (std::f64::consts::PI * 2e-8).log10()).abs() < 1e-9);
/// assert!((level_db + 144.04).abs() < 0.01);
/// ```
pub fn level_db(peak_s: f64, tone_hz: f64) -> f64 {
    let half_beta = core::f64::consts::PI * tone_hz * peak_s.abs();
    (20.0 * libm::log10(half_beta)).min(0.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The spectrum of a tone whose phase is swung, by a discrete transform over whole periods.
    #[test]
    fn a_swung_tone_has_the_sidebands_that_are_told() {
        const N: usize = 4096;
        let (tone, swing) = (512.0, 16.0);
        let turn = core::f64::consts::TAU / N as f64;
        for beta in [1e-4, 1e-2, 0.3] {
            let at = |bin: f64| {
                let (mut real, mut imaginary) = (0.0, 0.0);
                for n in 0..N {
                    let n = n as f64;
                    let x = libm::sin(turn * tone * n + beta * libm::sin(turn * swing * n));
                    real += x * libm::cos(turn * bin * n);
                    imaginary += x * libm::sin(turn * bin * n);
                }
                libm::sqrt(real * real + imaginary * imaginary)
            };
            let measured_db = 20.0 * libm::log10(at(tone + swing) / at(tone));
            // β = 2πfτ of a tone of 1 Hz.
            let told_db = level_db(beta / core::f64::consts::TAU, 1.0);
            assert!(measured_db < told_db + 0.15, "{beta}: {measured_db}");
            assert!(measured_db > told_db - 0.15, "{beta}: {measured_db}");
        }
        assert_eq!(level_db(1.0, 20_000.0), 0.0);
    }
}
