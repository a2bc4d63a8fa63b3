//! Linear motion of a mode's state: phase x (µs), drift y (ppm), and for some its slope d (ppm/s).

use serde::{Deserialize, Serialize};

use crate::growth::DAILY;

/// Random walk of phase and drift: state and covariance.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Walk {
    pub(crate) x: f64,
    pub(crate) y: f64,
    pub(crate) xx: f64,
    pub(crate) xy: f64,
    pub(crate) yy: f64,
}

/// A walk whose drift has a slope that swings with the day and fades.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Slope {
    pub(crate) walk: Walk,
    pub(crate) d: f64,
    pub(crate) xd: f64,
    pub(crate) yd: f64,
    pub(crate) dd: f64,
}

/// Process noise of a walk: of phase in µs²/s, of drift in ppm²/s.
#[derive(Clone, Copy, Debug)]
pub(crate) struct WalkNoise {
    pub(crate) q1: f64,
    pub(crate) q2: f64,
}

/// Process noise of a slope: ppm²/s³, and the deviation it tends to, ppm/s.
#[derive(Clone, Copy, Debug)]
pub(crate) struct SlopeNoise {
    pub(crate) walk: WalkNoise,
    pub(crate) q3: f64,
    pub(crate) d_deviation: f64,
}

/// One step of time.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Step {
    /// Its length Δ, s.
    pub(crate) dt: f64,
    /// What a slope adds to the drift over it: sin(ωΔ)/ω, none beyond 12 h.
    pub(crate) reach: f64,
    /// Least random walk of the drift over it, ppm²/s.
    pub(crate) least_q2: f64,
}

/// sin(ωΔ)/ω with ω = 2π/day, nought beyond 12 h: the time over which a slope acts.
pub(crate) fn slope_reach(dt: f64) -> f64 {
    if dt > 43_200.0 {
        return 0.0;
    }
    let a = DAILY * dt;
    if a < 0.05 {
        let a2 = a * a;
        return dt * (1.0 - a2 / 6.0 * (1.0 - a2 / 20.0));
    }
    libm::sin(a) / DAILY
}

const THIRD: f64 = 1.0 / 3.0;

/// Curvature of a score as far as it leaves a variance `xx` above nought.
#[inline]
fn possible(curve: f64, xx: f64) -> f64 {
    if curve * xx < -1.0 { -1.0 / xx } else { curve }
}

fn decay(a: f64) -> f64 {
    if a < 1e-3 {
        return 1.0 - a * (1.0 - a * (0.5 - a / 6.0));
    }
    libm::exp(-a)
}

impl Step {
    pub(crate) fn new(dt: f64, least_q2: f64) -> Self {
        Step {
            dt,
            reach: slope_reach(dt),
            least_q2,
        }
    }
}

impl Walk {
    /// Moves the state on by a step.
    #[inline]
    pub(crate) fn advance(&mut self, step: &Step, noise: WalkNoise) {
        let dt = step.dt;
        let q2 = noise.q2.max(step.least_q2);
        self.x += dt * self.y;
        self.xx += dt * (2.0 * self.xy + dt * self.yy) + dt * (noise.q1 + THIRD * q2 * dt * dt);
        self.xy += dt * self.yy + 0.5 * q2 * dt * dt;
        self.yy += q2 * dt;
    }

    /// Corrects by a phase score: `pull` = −s·ℓ′/λ and `curve` = ℓ″/λ, along P's x-column.
    #[inline]
    pub(crate) fn correct(&mut self, pull: f64, curve: f64) {
        let c = possible(curve, self.xx);
        let (kx, ky) = (self.xx, self.xy);
        self.x += kx * pull;
        self.y += ky * pull;
        self.xx = (kx + kx * kx * c).max(kx * 1e-12);
        self.xy += kx * ky * c;
        self.yy += ky * ky * c;
    }

    /// Corrects by a drift reading of variance `r`: `pull` is the innovation, clipped, over its
    /// variance. What would cancel is multiplied instead, and the variances kept possible.
    pub(crate) fn correct_drift(&mut self, pull: f64, r: f64) {
        let s2 = self.yy + r;
        let (kx, ky) = (self.xy, self.yy);
        self.x += kx * pull;
        self.y += ky * pull;
        self.xy = kx * r / s2;
        self.yy = ky * r / s2;
        let least = 1.000_001 * self.xy * self.xy / self.yy;
        self.xx = (self.xx - kx * kx / s2).max(least);
    }
}

impl Slope {
    /// Moves the state on by a step.
    #[inline]
    pub(crate) fn advance(&mut self, step: &Step, noise: SlopeNoise) {
        let (a, c) = (step.dt, step.reach);
        let b = 0.5 * a * c;
        let settled = noise.d_deviation * noise.d_deviation;
        let fade = decay(0.5 * noise.q3 * a / settled);
        let q2 = noise.walk.q2.max(step.least_q2);
        let w = &mut self.walk;
        w.x += a * w.y + b * self.d;
        w.y += c * self.d;
        let rx0 = w.xx + a * w.xy + b * self.xd;
        let rx1 = w.xy + a * w.yy + b * self.yd;
        let rx2 = self.xd + a * self.yd + b * self.dd;
        let ry1 = w.yy + c * self.yd;
        let ry2 = self.yd + c * self.dd;
        let q3 = if a < 3600.0 { noise.q3 } else { 0.0 };
        let a2 = a * a;
        w.xx = rx0 + a * rx1 + b * rx2 + a * (noise.walk.q1 + a2 * (THIRD * q2 + 0.05 * q3 * a2));
        w.xy = rx1 + c * rx2 + a2 * (0.5 * q2 + q3 * a2 / 8.0);
        w.yy = ry1 + c * ry2 + a * (q2 + THIRD * q3 * a2);
        self.xd = fade * rx2 + 0.165 * q3 * a2 * a;
        self.yd = fade * ry2 + 0.495 * q3 * a2;
        self.dd = fade * fade * self.dd + (1.0 - fade * fade) * settled;
        self.d *= fade;
    }

    /// Corrects by a phase score, as [`Walk::correct`].
    #[inline]
    pub(crate) fn correct(&mut self, pull: f64, curve: f64) {
        let c = possible(curve, self.walk.xx);
        let (kx, ky, kd) = (self.walk.xx, self.walk.xy, self.xd);
        self.walk.correct(pull, c);
        self.d += kd * pull;
        self.xd += kx * kd * c;
        self.yd += ky * kd * c;
        self.dd += kd * kd * c;
    }

    /// Corrects by a drift reading, as [`Walk::correct_drift`].
    pub(crate) fn correct_drift(&mut self, pull: f64, r: f64) {
        let s2 = self.walk.yy + r;
        let (kx, kd) = (self.walk.xy, self.yd);
        self.walk.correct_drift(pull, r);
        self.d += kd * pull;
        self.yd = kd * r / s2;
        self.xd -= kx * kd / s2;
        let least = 1.000_001 * self.yd * self.yd / self.walk.yy;
        self.dd = (self.dd - kd * kd / s2).max(least);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn numbers(table: &'static str) -> impl Iterator<Item = Vec<f64>> {
        table
            .lines()
            .skip(1)
            .map(|line| line.split(',').map(|v| v.parse().unwrap()).collect())
    }

    fn assert_near(value: f64, expected: f64, relative: f64) {
        assert!(
            (value - expected).abs() <= relative * expected.abs(),
            "{value} {expected}"
        );
    }

    /// Steady states of the discrete Riccati equation: `tests/tables/README.md`.
    #[test]
    fn covariance_settles_where_the_riccati_equation_says() {
        for row in numbers(include_str!("../tests/tables/riccati.csv")) {
            let [q1, q2, r, tau, steady_xx, steady_xy, steady_yy] = row[..] else {
                panic!("{row:?}")
            };
            // Begun near the steady state of continuous time, to be there soon.
            let xy = (q2 * r * tau).sqrt();
            let pace = (q1 + 2.0 * xy).sqrt();
            let xx = 3.0 * (r * tau).sqrt() * pace;
            let mut walk = Walk {
                x: 0.0,
                y: 0.0,
                xx,
                xy,
                yy: 3.0 * q2.sqrt() * pace,
            };
            let step = Step::new(tau, 0.0);
            for _ in 0..3_000_000 {
                let before = walk;
                walk.correct(0.0, -1.0 / (walk.xx + r));
                walk.advance(&step, WalkNoise { q1, q2 });
                if walk == before {
                    break;
                }
            }
            assert_near(walk.xx, steady_xx, 1e-9);
            assert_near(walk.xy, steady_xy, 1e-9);
            assert_near(walk.yy, steady_yy, 1e-9);
        }
    }

    /// Cramér–Rao bound of a slope: `tests/tables/README.md`. The prior is as wide as keeps
    /// twelve digits of the small numbers, hence the tolerance.
    #[test]
    fn without_wander_the_drift_is_as_good_as_the_cramer_rao_bound() {
        for row in numbers(include_str!("../tests/tables/crlb.csv")) {
            let [sigma, interval, readings, variance] = row[..] else {
                panic!("{row:?}")
            };
            if readings > 100_000.0 {
                continue;
            }
            let r = sigma * sigma;
            let wide = 1e6 * r;
            let mut walk = Walk {
                x: 0.0,
                y: 0.0,
                xx: wide,
                xy: 0.0,
                yy: wide / (interval * interval),
            };
            let step = Step::new(interval, 0.0);
            for i in 0..readings as u64 {
                if i > 0 {
                    walk.advance(&step, WalkNoise { q1: 0.0, q2: 0.0 });
                }
                walk.correct(0.0, -1.0 / (walk.xx + r));
            }
            assert_near(walk.yy, variance, 1e-4);
        }
    }

    /// A slope mode without slope is a walk.
    #[test]
    fn a_slope_of_nought_is_a_walk() {
        let walk = Walk {
            x: 1.0,
            y: 2.0,
            xx: 3.0,
            xy: 0.5,
            yy: 4.0,
        };
        let mut slope = Slope {
            walk,
            d: 0.0,
            xd: 0.0,
            yd: 0.0,
            dd: 0.0,
        };
        let noise = WalkNoise { q1: 0.1, q2: 0.01 };
        let mut plain = walk;
        let step = Step::new(7.0, 0.0);
        plain.advance(&step, noise);
        slope.advance(
            &step,
            SlopeNoise {
                walk: noise,
                q3: 0.0,
                d_deviation: 1e-3,
            },
        );
        assert_eq!((slope.walk.x, slope.walk.y), (plain.x, plain.y));
        assert_near(slope.walk.xx, plain.xx, 1e-14);
    }
}
