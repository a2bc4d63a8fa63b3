//! Growth of the drift's variance since the last reading, as a function of the lag.

use serde::{Deserialize, Serialize};

/// Lags of the structure function, s: 60·4^k.
pub(crate) const LAGS_S: [f64; 6] = [60.0, 240.0, 960.0, 3840.0, 15360.0, 61440.0];

/// ln 4: how far one lag is from the next.
const LN_4: f64 = 2.0 * core::f64::consts::LN_2;
/// 2π per day, rad/s.
pub(crate) const DAILY: f64 = core::f64::consts::TAU / 86_400.0;

/// Variance D(h) of the error that a drift gains when it is extrapolated over a lag h.
///
/// Up to the longest lag seen often enough it is a measured table with the prior's shape
/// between the lags, beyond it the scaled prior; never less than `floor`·`own(h)`.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Growth {
    /// Factor on the prior at each lag of [`LAGS_S`].
    pub(crate) factors: [f64; 6],
    /// Factor on the prior beyond the last lag.
    pub(crate) tail: f64,
    /// Own growth of the filter: random walk of the drift, ppm²/s.
    pub(crate) walk: f64,
}

/// Prior of D(h) for a plain crystal, ppm²: random walk, daily temperature and slope. A day
/// later much of the temperature has come back; a fifth of its variance has not.
pub(crate) fn prior(lag_s: f64) -> f64 {
    let walk = 1e-7 * lag_s;
    if lag_s > 43_200.0 {
        return walk + 1.28 * (0.2 + 0.4 * (1.0 - libm::cos(DAILY * lag_s)));
    }
    let (sine, cosine) = libm::sincos(DAILY * lag_s);
    let swing = 1.0 - cosine;
    let slope = 3e-5 * sine / DAILY;
    walk + 0.32 * swing * swing + slope * slope
}

impl Growth {
    /// D(h), ppm².
    pub(crate) fn variance(&self, lag_s: f64) -> f64 {
        if lag_s <= 0.0 {
            return 0.0;
        }
        (self.factor(lag_s) * prior(lag_s)).max(self.walk * lag_s)
    }

    fn factor(&self, lag_s: f64) -> f64 {
        if lag_s <= LAGS_S[0] {
            return self.factors[0];
        }
        let Some(above) = LAGS_S.iter().position(|&lag| lag > lag_s) else {
            return self.tail;
        };
        let position = libm::log(lag_s / LAGS_S[above - 1]) / LN_4;
        self.factors[above - 1] + position * (self.factors[above] - self.factors[above - 1])
    }
}
