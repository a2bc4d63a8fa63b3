//! What the filter has to do, and the stages that do it.

use clap::Args;
use num_rational::Ratio;
use ratewright_ratio::stages::{Chain, FilterSpec, StageError, front};
use ratewright_ratio::{Fraction, filter_coefficients};

use crate::failure::Failure;

/// The published estimate behind every length: A in dB, the transition Δω in radians a sample.
/// For each of K stages A is 20·log₁₀ K dB more than was asked for.
pub(crate) const ESTIMATE: &str = "Kaiser (1974), N = (A - 7.95) / (2.285 Δω) + 1";

/// Attenuation where none is given, dB: that of the page's planner.
const COMMON_DB: f64 = 100.0;

/// Wishes that make stages of the best ratio; they need both rates.
#[derive(Debug, Args)]
#[command(next_help_heading = "Filter and stages")]
pub(crate) struct FilterWish {
    /// Band to be passed, from 0 to this rate, such as 20k; shows the stages L/M can be made of
    #[arg(long, value_name = "RATE", value_parser = super::rate)]
    pub(crate) passband: Option<Ratio<u64>>,
    /// Attenuation from half the smaller rate on, dB [default: 100]
    #[arg(long, value_name = "DB", requires = "passband")]
    pub(crate) attenuation: Option<f64>,
}

/// A filter that was asked for.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Filter {
    pub(crate) passband: Ratio<u64>,
    pub(crate) spec: FilterSpec,
    /// The transition, as a part of the band below half the smaller rate.
    relative_width: f64,
}

impl FilterWish {
    /// The filter, if there is a wish, for a source and a sink rate.
    pub(crate) fn filter(&self, rates: Option<(Ratio<u64>, Ratio<u64>)>) -> Option<Filter> {
        let (passband, (source, sink)) = self.passband.zip(rates)?;
        let stopband_db = self.attenuation.unwrap_or(COMMON_DB);
        let edge_hz = hertz(source.min(sink)) / 2.0;
        let passband_hz = hertz(passband);
        let spec = FilterSpec {
            source_rate_hz: hertz(source),
            passband_hz,
            stopband_db,
        };
        Some(Filter {
            passband,
            spec,
            relative_width: 1.0 - passband_hz / edge_hz,
        })
    }
}

impl Filter {
    /// The chains of stages of a ratio that no other chain beats.
    pub(crate) fn chains(&self, ratio: &Fraction) -> Result<Vec<Chain>, Failure> {
        front(ratio.reduced(), &self.spec).map_err(|error| {
            Failure::Usage(match error {
                StageError::Part { field, value } => format!(
                    "stages are offered for L and M of the best ratio up to 65536, and {} is {value}; \
                     accepted is a smaller --max-{field}",
                    field.to_uppercase(),
                ),
                StageError::Passband { value, limit } => format!(
                    "--passband is {value} Hz; accepted are values above 0 and below {limit} Hz, \
                     half the smaller rate"
                ),
                StageError::Stopband { value } => {
                    format!("--attenuation is {value}; accepted are 21 to 240 dB")
                }
                other => other.to_string(),
            })
        })
    }

    /// Coefficients of one filter for the whole of L/M.
    pub(crate) fn coefficients(&self, ratio: &Fraction) -> u64 {
        let ratio = ratio.reduced();
        let (l, m) = (*ratio.numer(), *ratio.denom());
        filter_coefficients(l, m, self.spec.stopband_db, self.relative_width)
    }
}

fn hertz(rate: Ratio<u64>) -> f64 {
    *rate.numer() as f64 / *rate.denom() as f64
}
