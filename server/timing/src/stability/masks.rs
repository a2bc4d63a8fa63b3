//! Published limits of wander, to compare a clock with.

/// A limit as a function of the interval: `constant_ns` + `factor_ns`·τ^`exponent`, for τ in s
/// above `from_s` up to `to_s`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Segment {
    /// Interval above which it holds, s.
    pub from_s: f64,
    /// Interval up to which it holds, s.
    pub to_s: f64,
    /// Constant part, ns.
    pub constant_ns: f64,
    /// Factor, ns.
    pub factor_ns: f64,
    /// Exponent of τ in s.
    pub exponent: f64,
}

/// A published mask.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Mask {
    /// What it limits.
    pub name: &'static str,
    /// Where it is published.
    pub source: &'static str,
    /// Whether it limits TDEV; else MTIE.
    pub limits_tdev: bool,
    /// Segments in rising order of τ.
    pub segments: &'static [Segment],
}

const fn segment(
    from_s: f64,
    to_s: f64,
    constant_ns: f64,
    factor_ns: f64,
    exponent: f64,
) -> Segment {
    Segment {
        from_s,
        to_s,
        constant_ns,
        factor_ns,
        exponent,
    }
}

/// The masks known here. The Recommendations themselves were not read: the figures are those
/// of a published transcription, and agree with what is remembered of them.
pub const MASKS: [Mask; 3] = [
    Mask {
        name: "EEC option 1, MTIE wander generation at constant temperature",
        source: "ITU-T G.8262 (07/2010) clause 8.1, as transcribed, not re-read",
        limits_tdev: false,
        segments: &[
            segment(0.1, 1.0, 0.0, 40.0, 0.0),
            segment(1.0, 100.0, 0.0, 40.0, 0.1),
            segment(100.0, 1000.0, 0.0, 25.25, 0.2),
        ],
    },
    Mask {
        name: "EEC option 1, TDEV wander generation at constant temperature",
        source: "ITU-T G.8262 (07/2010) clause 8.1, as transcribed, not re-read",
        limits_tdev: true,
        segments: &[
            segment(0.1, 25.0, 3.2, 0.0, 0.0),
            segment(25.0, 100.0, 0.0, 0.64, 0.5),
            segment(100.0, 1000.0, 6.4, 0.0, 0.0),
        ],
    },
    // What follows beyond 2000 s is left out: the transcription has 433τ^0.2 + 0.01τ, of which
    // the second term, as remembered from G.823 (0.01τ in µs), should be a thousand times more.
    Mask {
        name: "EEC network limit, MTIE (option 1)",
        source: "ITU-T G.8261 clause 9.2, as transcribed, not re-read",
        limits_tdev: false,
        segments: &[
            segment(0.1, 2.5, 250.0, 0.0, 0.0),
            segment(2.5, 20.0, 0.0, 100.0, 1.0),
            segment(20.0, 2000.0, 2000.0, 0.0, 0.0),
        ],
    },
];

impl Mask {
    /// Limit at an interval, ns; none where the mask says nothing.
    ///
    /// ```
    /// use ratewright_timing::stability::MASKS;
    /// assert_eq!(MASKS[2].limit_ns(10.0), Some(1000.0));
    /// assert_eq!(MASKS[2].limit_ns(0.01), None);
    /// ```
    pub fn limit_ns(&self, tau_s: f64) -> Option<f64> {
        let segment = self
            .segments
            .iter()
            .find(|s| s.from_s < tau_s && tau_s <= s.to_s)?;
        Some(segment.constant_ns + segment.factor_ns * libm::pow(tau_s, segment.exponent))
    }

    /// Measured value over the limit at an interval; above 1 it fails.
    pub fn share_of_limit(&self, tau_s: f64, value_s: f64) -> Option<f64> {
        Some(value_s * 1e9 / self.limit_ns(tau_s)?)
    }
}
