//! What a user would pick instead: two points, sliding least squares, exponentially weighted.

use std::collections::VecDeque;

/// Drift estimates of the three, from clock minus reference at reference times, s.
#[derive(Default)]
pub(crate) struct Rivals {
    first: Option<(f64, f64)>,
    last: (f64, f64),
    window: VecDeque<(f64, f64)>,
    sums: Sums,
    weighted: Sums,
}

/// Sums of a straight-line fit about the latest reading.
#[derive(Default, Clone, Copy)]
struct Sums {
    n: f64,
    t: f64,
    z: f64,
    tt: f64,
    tz: f64,
}

const WINDOW_S: f64 = 300.0;

impl Sums {
    fn add(&mut self, t: f64, z: f64, weight: f64) {
        self.n += weight;
        self.t += weight * t;
        self.z += weight * z;
        self.tt += weight * t * t;
        self.tz += weight * t * z;
    }

    fn fade(&mut self, keep: f64) {
        for sum in [
            &mut self.n,
            &mut self.t,
            &mut self.z,
            &mut self.tt,
            &mut self.tz,
        ] {
            *sum *= keep;
        }
    }

    fn slope(&self) -> Option<f64> {
        let spread = self.n * self.tt - self.t * self.t;
        (spread > 0.0).then(|| (self.n * self.tz - self.t * self.z) / spread)
    }
}

impl Rivals {
    pub(crate) fn read(&mut self, t: f64, z: f64) {
        let (t0, z0) = *self.first.get_or_insert((t, z));
        self.weighted.fade(libm::exp(-(t - self.last.0) / WINDOW_S));
        self.last = (t, z);
        let (t, z) = (t - t0, z - z0);
        self.window.push_back((t, z));
        self.sums.add(t, z, 1.0);
        while let Some(&(old_t, old_z)) = self.window.front()
            && t - old_t > WINDOW_S
        {
            self.sums.add(old_t, old_z, -1.0);
            self.window.pop_front();
        }
        self.weighted.add(t, z, 1.0);
    }

    /// Two-point difference over the last 300 s, sliding and weighted least squares.
    pub(crate) fn drifts(&self) -> [Option<f64>; 3] {
        let two_point = self
            .window
            .front()
            .zip(self.window.back())
            .and_then(|(a, b)| (b.0 > a.0).then(|| (b.1 - a.1) / (b.0 - a.0)));
        [two_point, self.sums.slope(), self.weighted.slope()]
    }
}
