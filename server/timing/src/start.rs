//! The first sixteen rows: a line through them, and a first guess of the noise.

use serde::{Deserialize, Serialize};

use crate::noise::{Burst, Noise};
use crate::normal::{Z95, t975};

/// Rows gathered before the filter begins.
pub(crate) const START_ROWS: usize = 16;

/// The first rows of a phase link, one value for each direction.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Start {
    rows: Vec<StartRow>,
    prior_var: f64,
}

/// Time (s) and clock minus reference (µs) of one early row; one-way links repeat the value.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct StartRow {
    pub(crate) t_s: f64,
    pub(crate) z: [f64; 2],
}

impl StartRow {
    fn mid(&self) -> f64 {
        0.5 * (self.z[0] + self.z[1])
    }
}

/// A straight line through the early rows, with variances: drift in ppm, phase in µs.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Line {
    pub(crate) t_s: f64,
    pub(crate) x: f64,
    pub(crate) xx: f64,
    pub(crate) xy: f64,
    pub(crate) y: f64,
    pub(crate) yy: f64,
    /// Phase at the first row.
    pub(crate) first_phase: PhaseAt,
}

/// A phase, µs, with its variance, µs².
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct PhaseAt {
    pub(crate) x: f64,
    pub(crate) xx: f64,
}

/// What the first rows say of one direction.
#[derive(Clone, Copy, Debug)]
pub(crate) struct FirstGuess {
    pub(crate) noise: Noise,
    /// Offset of the direction from the middle of both, µs.
    pub(crate) offset: f64,
}

impl Start {
    /// Nothing gathered; the drift's prior variance in ppm².
    pub(crate) fn new(prior_var: f64) -> Self {
        Start {
            rows: Vec::with_capacity(START_ROWS),
            prior_var,
        }
    }

    /// Rows gathered so far, oldest first.
    pub(crate) fn rows(&self) -> &[StartRow] {
        &self.rows
    }

    /// Keeps a row; true when there are enough to begin.
    pub(crate) fn push(&mut self, row: StartRow) -> bool {
        self.rows.push(row);
        self.rows.len() >= START_ROWS
    }

    /// Directions that measure: one when both values of every row are the same.
    fn directions(&self) -> usize {
        if self.rows.iter().all(|row| row.z[0] == row.z[1]) {
            1
        } else {
            2
        }
    }

    /// Least-squares line with the prior weighed in, its variance widened by Student's
    /// quantile for the few rows.
    pub(crate) fn line(&self, least_noise_us: f64) -> Line {
        let n = self.rows.len();
        let last = self.rows.last().map_or(0.0, |row| row.t_s);
        let count = n.max(1) as f64;
        let mean_t = self.rows.iter().map(|row| row.t_s).sum::<f64>() / count;
        let mean_z = self.rows.iter().map(StartRow::mid).sum::<f64>() / count;
        if n < 3 {
            return Line {
                t_s: last,
                x: mean_z,
                xx: 1e10,
                xy: 0.0,
                y: 0.0,
                yy: self.prior_var,
                first_phase: PhaseAt {
                    x: mean_z,
                    xx: 1e10,
                },
            };
        }
        let (slope, slope_var, row_var) = self.slope(mean_t, least_noise_us);
        let y = slope * self.prior_var / (self.prior_var + slope_var);
        let yy = slope_var * self.prior_var / (self.prior_var + slope_var);
        let ahead = last - mean_t;
        let before = self.rows[0].t_s - mean_t;
        let middle_var = row_var / count;
        Line {
            t_s: last,
            x: mean_z + y * ahead,
            xx: middle_var + yy * ahead * ahead,
            xy: yy * ahead,
            y,
            yy,
            first_phase: PhaseAt {
                x: mean_z + y * before,
                xx: middle_var + yy * before * before,
            },
        }
    }

    /// Slope, its variance and that of a row. Each direction's slope counts by its own
    /// residuals. What that choice flatters itself by is added back (Meier 1953, to first order
    /// in 1/ν), and where the directions disagree by more than they claim, their variances are
    /// stretched until they do not (Birge's ratio); both as remembered, without the papers.
    fn slope(&self, mean_t: f64, least_noise_us: f64) -> (f64, f64, f64) {
        let degrees = (self.rows.len() - 2) as f64;
        let widen = t975(degrees) / Z95;
        let least = least_noise_us * least_noise_us;
        let (mut weight, mut mean, mut spread, mut squares) = (0.0, 0.0, 0.0, 0.0);
        let mut row_var = f64::INFINITY;
        for c in 0..self.directions() {
            let (slope, residual_var, time_spread) = self.fit(c, mean_t);
            let own = residual_var.max(least) * widen * widen;
            let information = time_spread / own;
            let off = slope - mean;
            let whole = weight + information;
            spread += off * off * weight * information / whole;
            mean += off * information / whole;
            squares += information * information;
            weight = whole;
            row_var = row_var.min(own);
        }
        let flattered = 4.0 * (1.0 - squares / (weight * weight)) / degrees;
        (mean, (spread.max(1.0) + flattered) / weight, row_var)
    }

    /// Least squares of direction `c`: slope, variance of the residuals, Σ(t − mean)².
    fn fit(&self, c: usize, mean_t: f64) -> (f64, f64, f64) {
        let n = self.rows.len() as f64;
        let mean_z = self.rows.iter().map(|row| row.z[c]).sum::<f64>() / n;
        let (mut tt, mut tz, mut zz) = (0.0, 0.0, 0.0);
        for row in &self.rows {
            let (dt, dz) = (row.t_s - mean_t, row.z[c] - mean_z);
            tt += dt * dt;
            tz += dt * dz;
            zz += dz * dz;
        }
        (tz / tt, (zz - tz * tz / tt).max(0.0) / (n - 2.0), tt)
    }

    /// Slope by Theil and Sen, ppm: the median of the slopes of all pairs, of the direction
    /// whose pairs agree best.
    fn median_slope(&self) -> f64 {
        let mut best = (0.0, f64::INFINITY);
        for c in 0..self.directions() {
            let mut slopes = [0.0; START_ROWS * (START_ROWS - 1) / 2];
            let mut n = 0;
            for (i, a) in self.rows.iter().enumerate() {
                for b in &self.rows[..i] {
                    slopes[n] = (a.z[c] - b.z[c]) / (a.t_s - b.t_s);
                    n += 1;
                }
            }
            let median = quantile(&mut slopes[..n], 0.5);
            let spread = quantile(&mut slopes[..n], 0.75) - quantile(&mut slopes[..n], 0.25);
            if spread < best.1 {
                best = (median, spread);
            }
        }
        best.0
    }

    /// First guess of either direction's noise, from the quantiles of the residuals.
    pub(crate) fn guess(&self, signs: [f64; 2], least_noise_us: f64) -> [FirstGuess; 2] {
        let slope = self.median_slope();
        let first = self.rows[0].t_s;
        let mut mids = [0.0; START_ROWS];
        for (mid, row) in mids.iter_mut().zip(&self.rows) {
            *mid = row.mid() - slope * (row.t_s - first);
        }
        let middle = quantile(&mut mids[..self.rows.len()], 0.5);
        [0, 1].map(|c| {
            let mut residuals = [0.0; START_ROWS];
            for (residual, row) in residuals.iter_mut().zip(&self.rows) {
                *residual = signs[c] * (row.z[c] - slope * (row.t_s - first));
            }
            let residuals = &mut residuals[..self.rows.len()];
            let centre = quantile(residuals, 0.5);
            let low = centre - quantile(residuals, 0.16);
            let high = quantile(residuals, 0.84) - centre;
            let noise = first_noise(low, high, least_noise_us);
            FirstGuess {
                noise,
                offset: signs[c] * centre - middle,
            }
        })
    }
}

/// Noise guessed from the distances of the 16 % and 84 % quantiles to the median.
pub(crate) fn first_noise(low: f64, high: f64, least_us: f64) -> Noise {
    let (least, most) = (low.min(high), low.max(high));
    let sigma = (0.8 * least).max(0.35 * most).max(least_us);
    let tau = (0.8 * most).max(0.3 * sigma);
    Noise {
        sigma,
        tau: [tau, (5.0 * tau).max(3.0 * sigma)],
        weights: [0.5, 0.37, 0.12],
        flat: 0.01,
        burst: Burst::NONE,
    }
}

/// Quantile by sorting in place, interpolated between ranks.
pub(crate) fn quantile(values: &mut [f64], share: f64) -> f64 {
    values.sort_unstable_by(f64::total_cmp);
    let rank = share * (values.len() - 1) as f64;
    let below = rank as usize;
    let above = (below + 1).min(values.len() - 1);
    values[below] + (rank - below as f64) * (values[above] - values[below])
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_straight_line_is_found_whatever_one_row_says() {
        let mut start = Start::new(3600.0);
        for i in 0..START_ROWS {
            let z = 3.0 + 7.0 * i as f64 + if i == 5 { 9000.0 } else { (i % 3) as f64 * 0.1 };
            start.push(StartRow {
                t_s: i as f64,
                z: [z, z],
            });
        }
        assert!((start.median_slope() - 7.0).abs() < 0.1);
        let line = start.line(1e-3);
        assert!((line.y - 7.0).abs() < 2.5 * line.yy.sqrt());
    }
}
