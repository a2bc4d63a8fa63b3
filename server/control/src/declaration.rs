//! What an operator declares: clocks and crossings.

use num_rational::Ratio;
use ratewright_ratio::Bounds;
use ratewright_timing::LinkConfig;
use serde::{Deserialize, Serialize};

use crate::{Id, Refusal};

/// Longest display name, bytes.
const MAX_DISPLAY_NAME: usize = 128;
/// Largest headroom, sink samples.
const MAX_HEADROOM_SAMPLES: f64 = 1e9;
/// Longest lead, ns (10 minutes).
const MAX_LEAD_NS: i64 = 600_000_000_000;
/// Shortest and longest review horizon, ns (10 s, 30 days).
const REVIEW_HORIZON_NS: (i64, i64) = (10_000_000_000, 30 * 86_400_000_000_000);
/// Largest nominal ratio of a crossing, and its inverse the smallest.
const MAX_NOMINAL_RATIO: f64 = 1_048_576.0;

/// A clock: anything that ticks at a nominal rate.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ClockDeclaration {
    /// Its name.
    pub id: Id,
    /// What people call it; at most 128 bytes.
    pub display_name: String,
    /// Nominal rate, Hz, exact.
    pub nominal_hz: Ratio<u64>,
    /// True if it is house time itself: its drift is 0 by definition and nobody measures it.
    pub exact: bool,
    /// Bound of the drift that its maker or standard states, ppm; 0 if none is declared.
    pub tolerance_ppm: f64,
}

/// What the resampler of a crossing can do.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Realisation {
    /// It runs at one ratio until it is told another.
    Single,
    /// It can alternate between two ratios at block ends by itself.
    Cadence,
}

/// A place where a stream passes from a source clock to a sink clock.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CrossingDeclaration {
    /// Its name.
    pub id: Id,
    /// What people call it; at most 128 bytes.
    pub display_name: String,
    /// Clock of the samples that enter the resampler.
    pub source: Id,
    /// Clock of the samples that leave it.
    pub sink: Id,
    /// Bounds of L and M.
    pub bounds: Bounds,
    /// Hard limit of the phase error's magnitude, sink samples, above 0 and at most 1e9.
    pub headroom_samples: f64,
    /// What the resampler can do.
    pub realisation: Realisation,
    /// Crossings of one group get settings with the same effect instant.
    pub group: Option<Id>,
    /// From decision to effect, ns: covers delivery and a block; 0 to 10 minutes.
    pub lead_ns: i64,
    /// A setting is confirmed or replaced after this time at the latest, ns; 10 s to 30 days.
    pub review_horizon_ns: i64,
}

impl ClockDeclaration {
    /// The declaration as the estimator wants it.
    pub(crate) fn link_config(&self) -> LinkConfig {
        let config = LinkConfig::new(self.nominal_hz);
        if self.tolerance_ppm > 0.0 {
            config.with_tolerance_ppm(self.tolerance_ppm)
        } else {
            config
        }
    }

    pub(crate) fn check(&self) -> Result<(), Refusal> {
        check_display_name(&self.display_name)?;
        let tolerance = self.tolerance_ppm;
        if !(tolerance == 0.0 || (tolerance > 0.0 && tolerance <= 100_000.0)) {
            return Err(Refusal::invalid(
                "tolerance_ppm",
                tolerance,
                "0 for none, or above 0 to 100000",
            ));
        }
        ratewright_timing::Link::new(self.link_config())
            .map(|_| ())
            .map_err(|e| Refusal::invalid(e.field, e.value, e.accepted))
    }

    /// Nominal rate, Hz, as the nearest double.
    pub(crate) fn hz(&self) -> f64 {
        *self.nominal_hz.numer() as f64 / *self.nominal_hz.denom() as f64
    }
}

impl CrossingDeclaration {
    /// Checks what can be checked without looking at the clocks.
    pub(crate) fn check(&self) -> Result<(), Refusal> {
        check_display_name(&self.display_name)?;
        if self.source == self.sink {
            return Err(Refusal::invalid(
                "sink",
                &self.sink,
                "another clock than the source",
            ));
        }
        let headroom = self.headroom_samples;
        if !(headroom > 0.0 && headroom <= MAX_HEADROOM_SAMPLES) {
            let accepted = format!("above 0, at most {MAX_HEADROOM_SAMPLES} sink samples");
            return Err(Refusal::invalid("headroom_samples", headroom, accepted));
        }
        if !(0..=MAX_LEAD_NS).contains(&self.lead_ns) {
            return Err(Refusal::invalid(
                "lead_ns",
                self.lead_ns,
                format!("0 to {MAX_LEAD_NS} ns"),
            ));
        }
        let (least, most) = REVIEW_HORIZON_NS;
        if !(least..=most).contains(&self.review_horizon_ns) {
            let accepted = format!("{least} to {most} ns");
            return Err(Refusal::invalid(
                "review_horizon_ns",
                self.review_horizon_ns,
                accepted,
            ));
        }
        Ok(())
    }

    /// Checks the ratio of the nominal rates; `field` is what to blame.
    pub(crate) fn check_rates(
        field: &str,
        source: &ClockDeclaration,
        sink: &ClockDeclaration,
    ) -> Result<(), Refusal> {
        let ratio = sink.hz() / source.hz();
        if (1.0 / MAX_NOMINAL_RATIO..=MAX_NOMINAL_RATIO).contains(&ratio) {
            return Ok(());
        }
        let value = format!("{} Hz for {} Hz", sink.nominal_hz, source.nominal_hz);
        let accepted = format!("rates within a factor of {MAX_NOMINAL_RATIO} of each other");
        Err(Refusal::invalid(field, value, accepted))
    }
}

fn check_display_name(name: &str) -> Result<(), Refusal> {
    if name.len() <= MAX_DISPLAY_NAME {
        return Ok(());
    }
    let accepted = format!("at most {MAX_DISPLAY_NAME} bytes");
    Err(Refusal::invalid(
        "display_name",
        format!("{} bytes", name.len()),
        accepted,
    ))
}
