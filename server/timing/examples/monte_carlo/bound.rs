//! The least deviation that any estimator of the drift could have: the covariance of the
//! filter that knows how the clock wanders, its warming and its day, and the noise's Fisher
//! information. Weather is random: it is known by its deviation and time alone.

use ratewright_timing::sim::{ClockModel, Delay, Weather};

const STATES: usize = 4;
/// The simulated clock follows its weather in an eighth of the weather's own time.
const LAG: f64 = 8.0;

/// Covariance of phase (s), drift without weather, weather's drift and what that follows, run
/// along with the readings.
pub(crate) struct Bound {
    p: [[f64; STATES]; STATES],
    white_fm: f64,
    walk_fm: f64,
    weather: Weather,
    last_ns: i64,
}

impl Bound {
    pub(crate) fn new(model: &ClockModel) -> Self {
        let weather = model.weather.unwrap_or(Weather {
            deviation: 0.0,
            time_s: 1e3,
        });
        let mut p = [[0.0; STATES]; STATES];
        (p[0][0], p[1][1]) = (1.0, 3.6e-9);
        p[3][3] = weather.deviation * weather.deviation;
        Bound {
            p,
            white_fm: model.white_fm,
            walk_fm: model.walk_fm,
            weather,
            last_ns: 0,
        }
    }

    /// Covariance at a time: P ← FPFᵀ + Q, steps being short against the weather's time τ. Of
    /// weather, u′ = −u/τ + noise and w′ = 8(u − w)/τ.
    pub(crate) fn advance(&mut self, at_ns: i64) {
        let dt = (at_ns - self.last_ns).max(0) as f64 * 1e-9;
        self.last_ns = at_ns;
        let tau = self.weather.time_s;
        let keep = libm::exp(-dt / tau);
        let follow = LAG / tau;
        let lagging = libm::exp(-dt * follow);
        let (area, lagged) = (tau * (1.0 - keep), (1.0 - lagging) / follow);
        let share = LAG / (LAG - 1.0);
        let f = [
            [1.0, dt, lagged, share * (area - lagged)],
            [0.0, 1.0, 0.0, 0.0],
            [0.0, 0.0, lagging, share * (keep - lagging)],
            [0.0, 0.0, 0.0, keep],
        ];
        let old = self.p;
        let entry = |i: usize, j: usize| -> f64 {
            let row = |a: usize| (0..STATES).map(|b| old[a][b] * f[j][b]).sum::<f64>();
            (0..STATES).map(|a| f[i][a] * row(a)).sum()
        };
        self.p = core::array::from_fn(|i| core::array::from_fn(|j| entry(i, j)));
        let stationary = self.weather.deviation * self.weather.deviation;
        let gust = 2.0 * stationary / tau;
        self.add(0, 0, self.white_fm * dt + self.walk_fm * dt * dt * dt / 3.0);
        self.add(0, 1, 0.5 * self.walk_fm * dt * dt);
        self.add(1, 1, self.walk_fm * dt);
        self.add(2, 2, gust * follow * follow * dt * dt * dt / 3.0);
        self.add(2, 3, 0.5 * gust * follow * dt * dt);
        self.add(3, 3, stationary * (1.0 - keep * keep));
    }

    fn add(&mut self, i: usize, j: usize, noise: f64) {
        self.p[i][j] += noise;
        self.p[j][i] = self.p[i][j];
    }

    /// A phase reading of the given information, 1/s².
    pub(crate) fn read_phase(&mut self, information: f64) {
        self.read([1.0, 0.0, 0.0, 0.0], information);
    }

    /// A drift reading of the given deviation.
    pub(crate) fn read_drift(&mut self, deviation: f64) {
        self.read([0.0, 1.0, 1.0, 0.0], 1.0 / (deviation * deviation));
    }

    fn read(&mut self, h: [f64; STATES], information: f64) {
        let k: [f64; STATES] = self.p.map(|row| (0..STATES).map(|j| row[j] * h[j]).sum());
        let seen: f64 = (0..STATES).map(|i| h[i] * k[i]).sum();
        let gain = information / (1.0 + information * seen);
        let old = self.p;
        self.p = core::array::from_fn(|i| core::array::from_fn(|j| old[i][j] - k[i] * k[j] * gain));
        if h[1] == 0.0 {
            // What would cancel is divided instead.
            self.p[0][0] = old[0][0] / (1.0 + information * old[0][0]);
        }
    }

    pub(crate) fn drift_variance(&self) -> f64 {
        self.p[1][1] + 2.0 * self.p[1][2] + self.p[2][2]
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
