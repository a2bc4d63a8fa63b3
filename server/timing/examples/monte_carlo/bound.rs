//! The least deviation that any estimator of the drift could have: the covariance of the
//! two-state filter that knows wander and noise, with the noise's Fisher information.

use ratewright_timing::sim::Delay;

/// Covariance of phase (s) and drift, run along with the readings.
pub(crate) struct Bound {
    xx: f64,
    xy: f64,
    yy: f64,
    white_fm: f64,
    walk_fm: f64,
    last_ns: i64,
}

impl Bound {
    pub(crate) fn new(white_fm: f64, walk_fm: f64) -> Self {
        Bound {
            xx: 1.0,
            xy: 0.0,
            yy: 3.6e-9,
            white_fm,
            walk_fm,
            last_ns: 0,
        }
    }

    /// Covariance at a time.
    pub(crate) fn advance(&mut self, at_ns: i64) {
        let dt = (at_ns - self.last_ns).max(0) as f64 * 1e-9;
        self.last_ns = at_ns;
        self.xx += dt * (2.0 * self.xy + dt * self.yy) + self.white_fm * dt;
        self.xx += self.walk_fm * dt * dt * dt / 3.0;
        self.xy += dt * self.yy + 0.5 * self.walk_fm * dt * dt;
        self.yy += self.walk_fm * dt;
    }

    /// A phase reading of the given information, 1/s².
    pub(crate) fn read_phase(&mut self, information: f64) {
        let gain = information / (1.0 + information * self.xx);
        let (kx, ky) = (self.xx, self.xy);
        self.xx = kx / (1.0 + information * kx);
        self.xy -= kx * ky * gain;
        self.yy -= ky * ky * gain;
    }

    /// A drift reading of the given deviation.
    pub(crate) fn read_drift(&mut self, deviation: f64) {
        let gain = 1.0 / (self.yy + deviation * deviation);
        let (kx, ky) = (self.xy, self.yy);
        self.xx -= kx * kx * gain;
        self.xy -= kx * ky * gain;
        self.yy -= ky * ky * gain;
    }

    pub(crate) fn drift_variance(&self) -> f64 {
        self.yy
    }
}

/// Fisher information of the location of a delay, 1/s², by convolution of the queue's density
/// with the normal part on a grid. `tick_s` adds the variance of truncation to it.
pub(crate) fn information(delay: &Delay, tick_s: f64) -> f64 {
    let widen = |deviation: f64| (deviation * deviation + tick_s * tick_s / 12.0).sqrt();
    match *delay {
        Delay::None => 0.0,
        Delay::Normal { deviation_s } => 1.0 / (widen(deviation_s) * widen(deviation_s)),
        Delay::Tailed {
            deviation_s,
            share,
            tail_s,
            outliers,
        } => {
            let queue = |v: f64| share / tail_s * libm::exp(-v / tail_s);
            let normal = 1.0 - share;
            (1.0 - outliers) * convolved(queue, normal, widen(deviation_s), 12.0 * tail_s)
        }
        Delay::Gamma {
            shape,
            scale_s,
            deviation_s,
        } => {
            let norm = libm::tgamma(shape) * scale_s;
            let queue =
                |v: f64| libm::pow(v / scale_s, shape - 1.0) * libm::exp(-v / scale_s) / norm;
            convolved(queue, 0.0, widen(deviation_s), 20.0 * scale_s)
        }
        Delay::LogNormal {
            median_s,
            spread,
            deviation_s,
        } => {
            let queue = |v: f64| {
                let u = libm::log(v / median_s) / spread;
                libm::exp(-0.5 * u * u) / (v * spread * 2.506_628_274_631)
            };
            convolved(
                queue,
                0.0,
                widen(deviation_s),
                median_s * libm::exp(3.0 * spread),
            )
        }
        Delay::Lomax {
            scale_s,
            exponent,
            deviation_s,
            ..
        } => {
            let queue = |v: f64| exponent / scale_s * libm::pow(1.0 + v / scale_s, -exponent - 1.0);
            convolved(queue, 0.0, widen(deviation_s), 30.0 * scale_s)
        }
    }
}

fn convolved(queue: impl Fn(f64) -> f64, normal: f64, deviation: f64, reach: f64) -> f64 {
    let step = deviation / 4.0;
    let taps: Vec<(f64, f64)> = (-24..=24)
        .map(|k| {
            let u = f64::from(k) / 4.0;
            let g = libm::exp(-0.5 * u * u) / 2.506_628_274_631 / 4.0;
            (g, -u / deviation * g)
        })
        .collect();
    let count = (reach / step) as i64;
    let queue: Vec<f64> = (0..count).map(|i| queue((i as f64 + 0.5) * step)).collect();
    let mut total = 0.0;
    for i in -24..count {
        let (mut f, mut slope) = (0.0, 0.0);
        for (k, &(g, dg)) in taps.iter().enumerate() {
            let at = i - (k as i64 - 24);
            if (0..count).contains(&at) {
                f += queue[at as usize] * g;
                slope += queue[at as usize] * dg;
            }
        }
        let e = (i as f64 + 0.5) * step;
        let u = e / deviation;
        let g = normal * libm::exp(-0.5 * u * u) / (2.506_628_274_631 * deviation);
        f += g;
        slope -= g * u / deviation;
        if f > 1e-12 / deviation {
            total += slope * slope / f * step;
        }
    }
    total
}
