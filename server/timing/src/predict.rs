//! From the filter's state to an interval of the drift at any later time.

use crate::bank::MODES;
use crate::exponential::exp;
use crate::filter::Filter;
use crate::growth::Growth;
use crate::mode::slope_reach;
use crate::normal::{Z95, cdf};
use crate::start::PhaseAt;

/// Widening of the interval for what a noise learned from `rows` rows does not know of itself,
/// whose own relative error falls with the root of their number.
pub(crate) fn widening(rows: u16) -> f64 {
    1.0 + 2.0 / f64::from(rows.max(1)).sqrt()
}
/// Time over which a slope wanders; after it, the day has it come back, s.
const SLOPE_WANDERS_S: f64 = 3600.0;
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
    /// Covariance of phase and drift.
    pub(crate) xy: f64,
    pub(crate) first_phase: PhaseAt,
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
            xy: 0.0,
            first_phase: self.first_phase,
            white_fm: 0.0,
            growth,
        };
        let mut phases = [(0.0, 0.0, 0.0); MODES];
        let mut total = 0.0;
        for (j, weight) in self.bank.weights().into_iter().enumerate() {
            if weight < LEAST_WEIGHT {
                continue;
            }
            let walk = self.bank.walk(j);
            let noise = self.bank.noise(j);
            let slope_s = ahead_s.min(SLOPE_WANDERS_S);
            let (mut own, mut y) = (noise.walk.q2 * ahead_s, walk.y);
            let mut x = walk.x + ahead_s * walk.y;
            if let Some(s) = self.bank.slope(j) {
                own += reach * (2.0 * s.yd + reach * s.dd)
                    + noise.q3 * slope_s * slope_s * slope_s / 3.0;
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
            let xy = walk.xy + ahead_s * (walk.yy + 0.5 * grown);
            phases[j] = (x, x_var, xy);
            total += weight;
            p.y += weight * y;
            p.x += weight * x;
            p.white_fm += weight * noise.walk.q1;
        }
        for value in [&mut p.y, &mut p.x, &mut p.slope, &mut p.white_fm] {
            *value /= total;
        }
        for (part, (x, x_var, xy)) in parts.iter_mut().zip(phases) {
            part.weight /= total;
            let (dy, dx) = (part.y - p.y, x - p.x);
            p.variance += part.weight * (part.deviation * part.deviation + dy * dy);
            p.x_variance += part.weight * (x_var + dx * dx);
            p.xy += part.weight * (xy + dx * dy);
        }
        p.half_width = widening(self.rows()) * half_width(&parts, p.y, p.variance.sqrt());
        p
    }
}

/// Half-width around `mean` that holds 95 % of a mixture of normals: Newton's method from the
/// normal's, kept within a bracket.
fn half_width(parts: &[Component], mean: f64, deviation: f64) -> f64 {
    let (mut low, mut high) = (0.0, 4.5 * deviation);
    let mut h = Z95 * deviation;
    for _ in 0..12 {
        let (held, density) = held_within(parts, mean, h);
        if held < 0.95 {
            low = h
        } else {
            high = h
        }
        let newton = h - (held - 0.95) / density;
        let next = if low < newton && newton < high {
            newton
        } else {
            0.5 * (low + high)
        };
        if (next - h).abs() <= 1e-6 * deviation {
            return next;
        }
        h = next;
    }
    high
}

/// Share of a mixture within ±h of `mean`, and how it grows with h.
fn held_within(parts: &[Component], mean: f64, h: f64) -> (f64, f64) {
    let (mut held, mut density) = (0.0, 0.0);
    for part in parts.iter().filter(|part| part.weight > 0.0) {
        let s = part.deviation.max(1e-15);
        let (above, below) = ((mean + h - part.y) / s, (mean - h - part.y) / s);
        held += part.weight * (cdf(above) - cdf(below));
        density += part.weight / s * (density_of(above) + density_of(below));
    }
    (held, density)
}

fn density_of(u: f64) -> f64 {
    0.398_942_280_401_432_7 * exp(-0.5 * u * u)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_half_width_holds_95_percent() {
        let part = |weight, y, deviation| Component {
            weight,
            y,
            deviation,
        };
        for parts in [
            vec![part(1.0, 0.0, 2.0)],
            vec![part(0.5, -1.0, 0.1), part(0.5, 1.0, 0.1)],
            vec![part(0.9, 0.0, 0.01), part(0.1, 0.0, 5.0)],
            vec![part(0.96, 0.0, 0.01), part(0.04, 3.0, 1.0)],
        ] {
            let mean: f64 = parts.iter().map(|p| p.weight * p.y).sum();
            let square = |p: &Component| p.deviation * p.deviation + (p.y - mean) * (p.y - mean);
            let variance: f64 = parts.iter().map(|p| p.weight * square(p)).sum();
            let h = half_width(&parts, mean, variance.sqrt());
            let (held, _) = held_within(&parts, mean, h);
            assert!((held - 0.95).abs() < 1e-4, "{held} within {h}");
        }
    }
}
