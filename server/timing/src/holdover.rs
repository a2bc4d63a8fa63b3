//! How far the drift strays from its own extrapolation: a structure function, measured.

use serde::{Deserialize, Serialize};

use crate::bank::{Bank, Mixture};
use crate::growth::{Growth, LAGS_S, prior};
use crate::mode::slope_reach;

const PRIOR_COUNT: f64 = 2.0;
const MEMORY: f64 = 16.0;

/// What the drift was thought to be at one time.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Belief {
    pub(crate) t_s: f64,
    /// Drift, ppm, its slope, ppm/s, and their variances, ppm² and ppm²/s².
    pub(crate) y: f64,
    pub(crate) d: f64,
    pub(crate) yy: f64,
    pub(crate) dd: f64,
}

impl Belief {
    /// What a bank believes, whose mean is `mixture`.
    pub(crate) fn of(t_s: f64, bank: &Bank, mixture: &Mixture) -> Self {
        Belief {
            t_s,
            y: mixture.y,
            d: mixture.d,
            yy: mixture.yy,
            dd: bank.slope_variance(mixture),
        }
    }
}

/// Mean square of the extrapolation error at each lag of [`LAGS_S`].
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Structure {
    /// When there is something to do again, s; nought as long as a comparison is to begin.
    due_s: f64,
    scale: f64,
    since: [Option<Belief>; 6],
    means: [f64; 6],
    counts: [f64; 6],
}

impl Structure {
    /// Nothing measured; `scale` is the oscillator's factor on the prior.
    pub(crate) fn new(scale: f64) -> Self {
        Structure {
            due_s: 0.0,
            scale,
            since: [None; 6],
            means: [0.0; 6],
            counts: [0.0; 6],
        }
    }

    /// Takes what is believed now; compares it with what was believed a lag ago.
    pub(crate) fn take(&mut self, t_s: f64, bank: &Bank, mixture: &Mixture) {
        if t_s < self.due_s {
            return;
        }
        let now = Belief::of(t_s, bank, mixture);
        for (k, lag) in LAGS_S.into_iter().enumerate() {
            let Some(past) = self.since[k] else {
                self.begin(k, now);
                continue;
            };
            let elapsed = now.t_s - past.t_s;
            if elapsed < lag {
                continue;
            }
            if elapsed < 2.0 * lag {
                let error = now.y - past.y - past.d * slope_reach(elapsed);
                let square = (error * error - now.yy - past.yy).max(0.0);
                let at_lag = square * prior(lag) / prior(elapsed);
                self.counts[k] = (self.counts[k] + 1.0).min(MEMORY);
                self.means[k] += (at_lag - self.means[k]) / self.counts[k];
            }
            self.since[k] = None;
            self.begin(k, now);
        }
        self.due_s = self.next_due();
    }

    fn next_due(&self) -> f64 {
        let due = self
            .since
            .iter()
            .zip(LAGS_S)
            .map(|(since, lag)| since.as_ref().map_or(0.0, |past| past.t_s + lag));
        due.fold(f64::INFINITY, f64::min)
    }

    /// Beliefs worse than what they are to measure would only measure themselves.
    fn begin(&mut self, k: usize, now: Belief) {
        let reach = slope_reach(LAGS_S[k]);
        let worst = now.yy.max(reach * reach * now.dd);
        if worst < 4.0 * self.scale * prior(LAGS_S[k]) {
            self.since[k] = Some(now);
        }
    }

    /// Forgets pending comparisons, as after a jump of the drift.
    pub(crate) fn interrupt(&mut self) {
        self.since = [None; 6];
        self.due_s = 0.0;
    }

    /// Factor on the prior at lag `k`, measured and prior counts together.
    fn factor(&self, k: usize) -> f64 {
        let prior_part = PRIOR_COUNT * self.beyond();
        (prior_part + self.counts[k] * self.means[k] / prior(LAGS_S[k]))
            / (PRIOR_COUNT + self.counts[k])
    }

    /// Factor on the prior where nothing was measured: what the longest seen lag showed.
    fn beyond(&self) -> f64 {
        let Some(k) = (0..6).rev().find(|&k| self.counts[k] > 0.0) else {
            return self.scale;
        };
        let n = self.counts[k];
        let seen = self.means[k] / (self.scale * prior(LAGS_S[k]));
        self.scale * ((PRIOR_COUNT + n * seen) / (PRIOR_COUNT + n)).clamp(0.25, 16.0)
    }

    /// D(h) as it stands; `walk` is the filter's own random walk, ppm²/s.
    pub(crate) fn growth(&self, walk: f64) -> Growth {
        let factors = core::array::from_fn(|k| {
            let n = self.counts[k];
            let few = if n > 0.0 {
                1.0 + 2.0 / (PRIOR_COUNT + n)
            } else {
                1.0
            };
            self.factor(k) * few
        });
        Growth {
            factors,
            tail: self.beyond(),
            walk,
        }
    }

    /// Whether a lag near `lag_s` was seen at least three times.
    pub(crate) fn knows(&self, lag_s: f64) -> bool {
        let k = LAGS_S
            .iter()
            .position(|&lag| lag > 0.7 * lag_s)
            .unwrap_or(5);
        self.counts[k] >= 3.0
    }
}
