//! From the filter's state to an interval of the drift at any later time.

use crate::bank::MODES;
use crate::filter::Filter;
use crate::growth::Growth;
use crate::mode::slope_reach;
use crate::normal::cdf;

/// Widening of the interval for what the noise model does not know of itself.
pub(crate) const WIDEN: f64 = 1.05;
/// Modes of less weight do not count for the interval.
const LEAST_WEIGHT: f64 = 1e-3;

/// Drift and phase at a time, in ppm and µs.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Prediction {
    pub(crate) y: f64,
    pub(crate) variance: f64,
    /// Half-width of the 95 % interval.
    pub(crate) half_width: f64,
    /// ppm/s.
    pub(crate) slope: f64,
    pub(crate) x: f64,
    pub(crate) x_variance: f64,
    pub(crate) white_fm: f64,
    pub(crate) growth: Growth,
}

#[derive(Clone, Copy, Default)]
struct Component {
    weight: f64,
    y: f64,
    deviation: f64,
}

impl Filter {
    /// What is foretold `ahead_s` after the last row.
    pub(crate) fn predict(&self, ahead_s: f64, in_gap: bool) -> Prediction {
        let growth = self.growth();
        let reach = slope_reach(ahead_s);
        let known = self.structure.knows(ahead_s);
        let stray = growth.variance(ahead_s);
        let mut parts = [Component::default(); MODES];
        let mut p = Prediction {
            y: 0.0,
            variance: 0.0,
            half_width: 0.0,
            slope: 0.0,
            x: 0.0,
            x_variance: 0.0,
            white_fm: 0.0,
            growth,
        };
        let mut xs = [(0.0, 0.0); MODES];
        let mut total = 0.0;
        for j in 0..MODES {
            let weight = self.bank.weights()[j];
            if weight < LEAST_WEIGHT {
                continue;
            }
            let walk = self.bank.walk(j);
            let noise = self.bank.noise(j);
            let q3 = if ahead_s < 3600.0 { noise.q3 } else { 0.0 };
            let (mut own, mut y) = (noise.walk.q2 * ahead_s, walk.y);
            let mut x = walk.x + ahead_s * walk.y;
            if let Some(s) = self.bank.slope(j) {
                own += reach * (2.0 * s.yd + reach * s.dd) + q3 * ahead_s * ahead_s * ahead_s / 3.0;
                y += reach * s.d;
                x += 0.5 * ahead_s * reach * s.d;
                p.slope += weight * s.d;
            }
            let grown = if !in_gap {
                own
            } else if known {
                stray.max(0.2 * own.min(9.0 * stray))
            } else {
                stray.max(own.min(9.0 * stray))
            };
            let variance = walk.yy + grown;
            let x_var = walk.xx
                + ahead_s * (2.0 * walk.xy + ahead_s * walk.yy + noise.walk.q1)
                + ahead_s * ahead_s * grown / 3.0;
            parts[j] = Component {
                weight,
                y,
                deviation: variance.max(0.0).sqrt(),
            };
            xs[j] = (x, x_var);
            total += weight;
            p.y += weight * y;
            p.x += weight * x;
            p.white_fm += weight * noise.walk.q1;
        }
        for value in [&mut p.y, &mut p.x, &mut p.slope, &mut p.white_fm] {
            *value /= total;
        }
        for (part, (x, x_var)) in parts.iter_mut().zip(xs) {
            part.weight /= total;
            let (dy, dx) = (part.y - p.y, x - p.x);
            p.variance += part.weight * (part.deviation * part.deviation + dy * dy);
            p.x_variance += part.weight * (x_var + dx * dx);
        }
        p.half_width = WIDEN * half_width(&parts, p.y, p.variance.sqrt());
        p
    }
}

/// Half-width around `mean` that holds 95 % of a mixture of normals: by bisection.
fn half_width(parts: &[Component], mean: f64, deviation: f64) -> f64 {
    let held = |h: f64| -> f64 {
        let share = |p: &Component| {
            if p.weight == 0.0 {
                return 0.0;
            }
            let s = p.deviation.max(1e-15);
            p.weight * (cdf((mean + h - p.y) / s) - cdf((mean - h - p.y) / s))
        };
        parts.iter().map(share).sum()
    };
    let (mut low, mut high) = (0.0, 4.5 * deviation);
    for _ in 0..24 {
        let middle = 0.5 * (low + high);
        if held(middle) < 0.95 {
            low = middle
        } else {
            high = middle
        }
    }
    high
}
