//! The target of a crossing with its 95 % interval.

use num_rational::Ratio;
use ratewright_ratio::{Exact, target_from_f64, target_from_rates};

use crate::clocks::Traced;
use crate::signs::{target, true_rate};

/// True sink rate over true source rate.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Target {
    /// The nearest double.
    pub(crate) value: f64,
    /// The same as an exact fraction: of the nominal rates if both drifts are 0 for certain,
    /// else that of the double.
    pub(crate) exact: Exact,
    /// The ratio of the nominal rates.
    pub(crate) nominal: Exact,
    /// True if both clocks are exact.
    pub(crate) certain: bool,
    /// Ends of the 95 % interval.
    pub(crate) low: f64,
    pub(crate) high: f64,
    /// Nominal sink rate, Hz.
    pub(crate) nominal_sink_hz: f64,
}

impl Target {
    /// The target between two clocks of nominal rates, Hz. The relative deviations of the two
    /// drifts are independent, so their half-widths add in quadrature.
    pub(crate) fn new(source: (Ratio<u64>, &Traced), sink: (Ratio<u64>, &Traced)) -> Self {
        let hz = |rate: &Ratio<u64>| *rate.numer() as f64 / *rate.denom() as f64;
        let (source_hz, sink_hz) = (hz(&source.0), hz(&sink.0));
        let (s, k) = (&source.1.estimate, &sink.1.estimate);
        let value = target(true_rate(source_hz, s.drift), true_rate(sink_hz, k.drift));
        let (ws, wk) = (s.half_width(), k.half_width());
        let half_width = (ws * ws + wk * wk).sqrt();
        let certain = half_width == 0.0 && s.drift == 0.0 && k.drift == 0.0;
        let nominal = target_from_rates(source.0, sink.0).expect("rates of 0 Hz are refused");
        let exact = if certain {
            nominal
        } else {
            target_from_f64(value).expect("rates within a factor 2^20, drifts within a half")
        };
        Target {
            value,
            exact,
            nominal,
            certain,
            low: value * (1.0 - half_width),
            high: value * (1.0 + half_width),
            nominal_sink_hz: sink_hz,
        }
    }
}
