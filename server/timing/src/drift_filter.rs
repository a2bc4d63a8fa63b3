//! The filter of a link whose readings are drifts.

use serde::{Deserialize, Serialize};

use crate::bank::Bank;
use crate::diagnosis::{Diagnosis, DriftDiagnosis, Wander};
use crate::estimate::normal_half_width;
use crate::filter::Setup;
use crate::holdover::Structure;
use crate::mode::{Step, slope_reach};
use crate::outcome::Outcome;
use crate::predict::Prediction;
use crate::start::PhaseAt;

/// A reading pulls no harder than this many deviations.
const CLIP: f64 = 2.5;

/// Bank and noise of drift readings.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct DriftFilter {
    bank: Bank,
    structure: Structure,
    t_s: f64,
    /// Measured variance of the readings over the claimed one.
    claim: f64,
    /// Claimed variance of the latest reading, ppm².
    latest_claim: f64,
    mean_step_s: f64,
    far_in_a_row: u32,
}

impl DriftFilter {
    pub(crate) fn new(t_s: f64, setup: &Setup) -> Self {
        DriftFilter {
            bank: Bank::new(0.0, 1.0, setup.prior_var, setup.scale),
            structure: Structure::new(setup.scale),
            t_s,
            claim: 1.0,
            latest_claim: 0.0,
            mean_step_s: 0.0,
            far_in_a_row: 0,
        }
    }

    pub(crate) fn bank(&self) -> &Bank {
        &self.bank
    }

    /// Variance of a reading as it shows itself, ppm².
    pub(crate) fn reading_variance(&self) -> f64 {
        self.claim * self.latest_claim
    }

    /// Usual step from reading to reading, s; nought before there is one.
    pub(crate) fn mean_step_s(&self) -> f64 {
        self.mean_step_s
    }

    /// What the readings show of themselves and of the clock, for people.
    pub(crate) fn diagnosis(&self) -> Diagnosis {
        Diagnosis {
            directions: Vec::new(),
            drift_readings: Some(DriftDiagnosis {
                deviation: 1e-6 * self.reading_variance().sqrt(),
                claimed: 1e-6 * self.latest_claim.sqrt(),
            }),
            wander: Wander::of(&self.bank),
        }
    }

    /// Time since the last reading, s.
    pub(crate) fn age_s(&self, now_s: f64) -> f64 {
        (now_s - self.t_s).max(0.0)
    }

    /// Takes a reading of drift `y` (ppm) and claimed variance `r` (ppm²).
    ///
    /// One far off counts as an outlier until the third in a row.
    pub(crate) fn take(&mut self, t_s: f64, y: f64, r: f64, in_gap: bool) -> Outcome {
        let dt = t_s - self.t_s;
        if dt > 0.0 {
            let growth = self.growth();
            let least_q2 = if in_gap {
                growth.variance(dt) / dt
            } else {
                0.0
            };
            self.bank.advance(&Step::new(dt, least_q2));
            self.t_s = t_s;
            if !in_gap {
                let gain = if self.mean_step_s > 0.0 { 0.06 } else { 1.0 };
                self.mean_step_s += gain * (dt - self.mean_step_s);
            }
        }
        self.latest_claim = r;
        let m = self.bank.mixture();
        let variance = m.yy + self.claim * r;
        let off = (y - m.y) * (y - m.y) / variance;
        if off > 16.0 {
            self.far_in_a_row += 1;
            if self.far_in_a_row < 3 {
                return Outcome::Outlier;
            }
        } else {
            self.far_in_a_row = 0;
            let excess = ((y - m.y) * (y - m.y) - m.yy) / r;
            self.claim = (self.claim + (excess.clamp(0.0, 9.0 * self.claim) - self.claim) / 64.0)
                .clamp(0.25, 25.0);
        }
        self.bank.correct_drift(y, self.claim * r, CLIP);
        let m = self.bank.mixture();
        self.structure.take(t_s, &self.bank, &m);
        Outcome::Used
    }

    fn growth(&self) -> crate::growth::Growth {
        let walk = self.bank.weights().into_iter().enumerate();
        self.structure
            .growth(walk.map(|(j, w)| w * self.bank.noise(j).walk.q2).sum())
    }

    /// What is foretold at a time.
    pub(crate) fn predict(&self, now_s: f64, in_gap: bool) -> Prediction {
        let ahead = self.age_s(now_s);
        let growth = self.growth();
        let m = self.bank.mixture();
        let stray = if in_gap {
            growth.variance(ahead)
        } else {
            growth.walk * ahead
        };
        let variance = m.yy + stray;
        let xy = self.bank.covariance(&m);
        Prediction {
            y: m.y + slope_reach(ahead) * m.d,
            variance,
            half_width: normal_half_width(variance.sqrt()),
            slope: m.d,
            x: m.x + ahead * m.y,
            x_variance: m.xx + ahead * (2.0 * xy + ahead * variance),
            xy: xy + ahead * variance,
            // Where the integral of the drift begins.
            first_phase: PhaseAt { x: 0.0, xx: 0.0 },
            white_fm: 1e-6,
            growth,
        }
    }
}
