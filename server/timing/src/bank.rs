//! The bank of modes: each a hypothesis of how the clock wanders, weighed by how well it
//! foretells the readings. States of different modes are never mixed.

use serde::{Deserialize, Serialize};

use crate::exponential::exp;
use crate::mode::{Slope, SlopeNoise, Step, Walk, WalkNoise};
use crate::noise::{Detail, Noise, Score};

/// Number of random walks, the jump mode last.
pub(crate) const WALKS: usize = 4;
/// Number of modes with a slope.
pub(crate) const SLOPES: usize = 3;
/// Number of modes.
pub(crate) const MODES: usize = WALKS + SLOPES;
/// Index of the jump mode.
pub(crate) const JUMP: usize = WALKS - 1;

const WALK_NOISE: [WalkNoise; WALKS] = [
    WalkNoise { q1: 1e-7, q2: 3e-9 },
    WalkNoise { q1: 1e-6, q2: 5e-8 },
    WalkNoise { q1: 1e-6, q2: 1e-6 },
    WalkNoise { q1: 1e-6, q2: 1e-2 },
];
const SLOPE_NOISE: [SlopeNoise; SLOPES] = [
    SlopeNoise {
        walk: WalkNoise { q1: 1e-6, q2: 1e-8 },
        q3: 1e-12,
        d_deviation: 1.5e-4,
    },
    SlopeNoise {
        walk: WalkNoise { q1: 1e-6, q2: 3e-8 },
        q3: 3e-11,
        d_deviation: 1e-3,
    },
    SlopeNoise {
        walk: WalkNoise { q1: 1e-6, q2: 1e-7 },
        q3: 5e-9,
        d_deviation: 8e-3,
    },
];
/// Weights before any evidence: walks, jump, slopes.
pub(crate) const PRIOR: [f64; MODES] = [0.20, 0.25, 0.13, 1e-6, 0.10, 0.08, 0.24];
/// The same for a clock just heard of: it may have been switched on just now, and a warming one
/// must be held by the interval before its slope shows.
pub(crate) const START: [f64; MODES] = [0.14, 0.18, 0.09, 1e-6, 0.08, 0.06, 0.45];
const FLOOR: f64 = 1e-4;
const JUMP_FLOOR: f64 = 1e-6;
/// Time over which weights fade to their prior, s.
const MEMORY_S: f64 = 14_400.0;
/// Weights fade in steps of at least this, s.
const FADE_STEP_S: f32 = 30.0;

/// States and weights of all modes.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Bank {
    walks: [Walk; WALKS],
    slopes: [Slope; SLOPES],
    weights: [f32; MODES],
    faded_s: f32,
    /// Factor on the wander of every mode but the jump.
    scale: f32,
}

/// Mean and variance over the modes.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Mixture {
    pub(crate) x: f64,
    pub(crate) y: f64,
    pub(crate) d: f64,
    pub(crate) xx: f64,
    pub(crate) yy: f64,
}

/// One phase measurement as the bank sees it.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Sight<'a> {
    /// z − b, µs.
    pub(crate) value: f64,
    /// s in e = s(z − b − x).
    pub(crate) sign: f64,
    /// Density of e.
    pub(crate) noise: &'a Noise,
    /// Factor by which correlation thins the information.
    pub(crate) thinning: f64,
}

impl Bank {
    /// All modes at phase `x` with deviations as given, no drift known but the prior's.
    pub(crate) fn new(x: f64, phase_var: f64, drift_var: f64, scale: f64) -> Self {
        let walk = Walk {
            x,
            y: 0.0,
            xx: phase_var,
            xy: 0.0,
            yy: drift_var,
        };
        let slope = |noise: &SlopeNoise| Slope {
            walk,
            d: 0.0,
            xd: 0.0,
            yd: 0.0,
            dd: noise.d_deviation * noise.d_deviation * scale,
        };
        Bank {
            walks: [walk; WALKS],
            slopes: SLOPE_NOISE.each_ref().map(slope),
            weights: START.map(|w| w as f32),
            faded_s: 0.0,
            scale: scale as f32,
        }
    }

    /// Weights of the modes, in the order of [`PRIOR`].
    pub(crate) fn weights(&self) -> [f64; MODES] {
        self.weights.map(f64::from)
    }

    fn scale(&self) -> f64 {
        f64::from(self.scale)
    }

    /// Phase and drift part of mode `j`.
    pub(crate) fn walk(&self, j: usize) -> &Walk {
        if j < WALKS {
            &self.walks[j]
        } else {
            &self.slopes[j - WALKS].walk
        }
    }

    fn walk_mut(&mut self, j: usize) -> &mut Walk {
        if j < WALKS {
            &mut self.walks[j]
        } else {
            &mut self.slopes[j - WALKS].walk
        }
    }

    /// Slope part of mode `j`, if it has one.
    pub(crate) fn slope(&self, j: usize) -> Option<&Slope> {
        j.checked_sub(WALKS).map(|k| &self.slopes[k])
    }

    /// Process noise of mode `j`: phase, drift and slope.
    pub(crate) fn noise(&self, j: usize) -> SlopeNoise {
        match j.checked_sub(WALKS) {
            Some(k) => scaled_slope(SLOPE_NOISE[k], self.scale()),
            None => SlopeNoise {
                walk: self.walk_noise(j),
                q3: 0.0,
                d_deviation: 0.0,
            },
        }
    }

    fn walk_noise(&self, j: usize) -> WalkNoise {
        if j == JUMP {
            WALK_NOISE[j]
        } else {
            scaled_walk(WALK_NOISE[j], self.scale())
        }
    }

    /// Moves all modes on by a step.
    pub(crate) fn advance(&mut self, step: &Step) {
        let scale = self.scale();
        for j in 0..WALKS {
            let noise = self.walk_noise(j);
            self.walks[j].advance(step, noise);
        }
        for (slope, noise) in self.slopes.iter_mut().zip(SLOPE_NOISE) {
            slope.advance(step, scaled_slope(noise, scale));
        }
        self.faded_s += step.dt as f32;
        if self.faded_s >= FADE_STEP_S {
            self.fade();
        }
    }

    /// ln w ← α ln w + (1 − α) ln π with α = exp(−Δ/memory).
    fn fade(&mut self) {
        let keep = exp(-f64::from(self.faded_s) / MEMORY_S);
        self.faded_s = 0.0;
        let mut weights = self.weights();
        for (weight, prior) in weights.iter_mut().zip(PRIOR) {
            *weight *= exp((1.0 - keep) * (libm::log(prior) - libm::log(*weight)));
        }
        self.set_weights(&weights);
    }

    /// Takes weights that need not sum to one.
    fn set_weights(&mut self, weights: &[f64; MODES]) {
        let share = 1.0 / weights.iter().sum::<f64>();
        for (j, weight) in weights.iter().enumerate() {
            let floor = if j == JUMP { JUMP_FLOOR } else { FLOOR };
            self.weights[j] = (weight * share).max(floor) as f32;
        }
    }

    /// Mean and variance of phase, drift and slope over the modes.
    pub(crate) fn mixture(&self) -> Mixture {
        let mut m = Mixture {
            x: 0.0,
            y: 0.0,
            d: 0.0,
            xx: 0.0,
            yy: 0.0,
        };
        let mut shares = self.weights();
        let whole = 1.0 / shares.iter().sum::<f64>();
        for (j, share) in shares.iter_mut().enumerate() {
            *share *= whole;
            let walk = self.walk(j);
            m.x += *share * walk.x;
            m.y += *share * walk.y;
        }
        for (j, share) in shares.iter().enumerate() {
            let walk = self.walk(j);
            let (dx, dy) = (walk.x - m.x, walk.y - m.y);
            m.xx += share * (walk.xx + dx * dx);
            m.yy += share * (walk.yy + dy * dy);
        }
        for (slope, share) in self.slopes.iter().zip(&shares[WALKS..]) {
            m.d += share * slope.d;
        }
        m
    }

    /// Covariance of phase and drift over the modes.
    pub(crate) fn covariance(&self, m: &Mixture) -> f64 {
        let (mut total, mut xy) = (0.0, 0.0);
        for (j, w) in self.weights().into_iter().enumerate() {
            let walk = self.walk(j);
            xy += w * (walk.xy + (walk.x - m.x) * (walk.y - m.y));
            total += w;
        }
        xy / total
    }

    /// Variance of the slope over the modes; those without one have none.
    pub(crate) fn slope_variance(&self, m: &Mixture) -> f64 {
        let weights = self.weights();
        let square = |(slope, w): (&Slope, &f64)| w * (slope.dd + slope.d * slope.d);
        let sum: f64 = self.slopes.iter().zip(&weights[WALKS..]).map(square).sum();
        sum / weights.iter().sum::<f64>() - m.d * m.d
    }

    /// Corrects all modes by one sight; `centre` is its detail at the mixture's mean.
    pub(crate) fn correct(&mut self, sight: &Sight, mixture: &Mixture, centre: &Detail) {
        let share = 1.0 / sight.thinning;
        let centre_error = sight.sign * (sight.value - mixture.x);
        let mut gains = [0.0; MODES];
        for (j, gain) in gains.iter_mut().enumerate() {
            let walk = self.walk(j);
            let e = sight.sign * (sight.value - walk.x);
            let score = near(sight.noise, centre, e - centre_error, walk.xx - mixture.xx)
                .unwrap_or_else(|| sight.noise.score(e, walk.xx));
            let pull = -sight.sign * score.first * share;
            let curve = score.second * share;
            match j.checked_sub(WALKS) {
                None => self.walks[j].correct(pull, curve),
                Some(k) => self.slopes[k].correct(pull, curve),
            }
            *gain = (score.log - centre.score.log) * share;
        }
        self.weigh(&gains);
    }

    /// Corrects all modes by a drift reading of variance `r`, ppm².
    pub(crate) fn correct_drift(&mut self, drift: f64, r: f64, clip: f64) {
        let mut gains = [0.0; MODES];
        for (j, gain) in gains.iter_mut().enumerate() {
            let walk = self.walk_mut(j);
            let s2 = walk.yy + r;
            let u = (drift - walk.y) / s2.sqrt();
            let pull = u.clamp(-clip, clip) / s2.sqrt();
            match j.checked_sub(WALKS) {
                None => self.walks[j].correct_drift(pull, r),
                Some(k) => self.slopes[k].correct_drift(pull, r),
            }
            let loss = if u.abs() <= clip {
                0.5 * u * u
            } else {
                clip * (u.abs() - 0.5 * clip)
            };
            *gain = -loss - 0.5 * libm::log(s2);
        }
        let best = gains.iter().fold(f64::NEG_INFINITY, |a, &b| a.max(b));
        self.weigh(&gains.map(|g| g - best));
    }

    fn weigh(&mut self, gains: &[f64; MODES]) {
        let mut weights = self.weights();
        for (weight, &gain) in weights.iter_mut().zip(gains) {
            *weight *= exp_near_nought(gain);
        }
        self.set_weights(&weights);
    }

    /// After a step of the phase: every mode less sure of phase and drift.
    pub(crate) fn loosen(&mut self, phase_var: f64, drift_var: f64) {
        for j in 0..MODES {
            let walk = self.walk_mut(j);
            walk.xx += phase_var;
            walk.yy += drift_var;
        }
    }

    /// After a jump of the drift: every mode begins from where the jump mode is.
    pub(crate) fn follow_jump(&mut self, weights: [f64; MODES]) {
        let jump = self.walks[JUMP];
        for j in 0..MODES {
            self.reseed(j, jump);
        }
        self.set_weights(&weights);
    }

    /// Begins mode `j` anew from the given state, its slope unknown.
    pub(crate) fn reseed(&mut self, j: usize, state: Walk) {
        *self.walk_mut(j) = state;
        if let Some(k) = j.checked_sub(WALKS) {
            let settled = SLOPE_NOISE[k].d_deviation * SLOPE_NOISE[k].d_deviation * self.scale();
            let slope = &mut self.slopes[k];
            (slope.d, slope.xd, slope.yd, slope.dd) = (0.0, 0.0, 0.0, settled);
        }
    }
}

/// exp(a), by its series where that is exact to 1e-11; a is kept within ±600.
#[inline]
fn exp_near_nought(a: f64) -> f64 {
    if a.abs() < 0.02 {
        return 1.0 + a * (1.0 + a * (0.5 + a * (1.0 / 6.0 + a * (1.0 / 24.0))));
    }
    exp(a.clamp(-600.0, 600.0))
}

fn scaled_walk(noise: WalkNoise, scale: f64) -> WalkNoise {
    WalkNoise {
        q1: noise.q1 * scale,
        q2: noise.q2 * scale,
    }
}

fn scaled_slope(noise: SlopeNoise, scale: f64) -> SlopeNoise {
    SlopeNoise {
        walk: scaled_walk(noise.walk, scale),
        q3: noise.q3 * scale,
        d_deviation: noise.d_deviation * scale.sqrt(),
    }
}

/// Score a little off a known one, by its expansion to second order; the variance counts
/// through the heat equation: ∂g/∂P = ½g″.
#[inline]
fn near(noise: &Noise, centre: &Detail, delta: f64, delta_p: f64) -> Option<Score> {
    let sigma2 = noise.sigma * noise.sigma;
    if delta * delta > 0.0625 * sigma2 || delta_p.abs() > 0.15 * sigma2 {
        return None;
    }
    let c = centre.score;
    Some(Score {
        log: c.log
            + delta * (c.first + 0.5 * c.second * delta)
            + 0.5 * (c.second + c.first * c.first) * delta_p,
        first: c.first + c.second * delta,
        second: c.second,
    })
}
