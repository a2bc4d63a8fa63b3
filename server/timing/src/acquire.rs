//! When an estimate that is still too wide should lock.

use crate::bank::{Bank, JUMP};
use crate::drift_filter::DriftFilter;
use crate::filter::Filter;
use crate::lock::{ENTER, LOCK_ROWS};
use crate::mode::{Step, Walk, WalkNoise};
use crate::normal::Z95;
use crate::start::{Line, Start};

/// Farther than this nothing is foreseen, s.
const HORIZON_S: f64 = 86_400.0;

/// Deviation at which the lock's threshold is entered, ppm.
fn wanted_ppm(lock_half_width: f64) -> f64 {
    1e6 * lock_half_width * ENTER / Z95
}

/// The same from the first rows alone: white noise narrows the drift's variance as T⁻³.
pub(crate) fn lock_expected_from_start(
    start: &Start,
    line: &Line,
    lock_half_width: f64,
) -> Option<f64> {
    let rows = start.rows();
    if rows.len() < 3 {
        return None;
    }
    let since_s = line.t_s - rows[0].t_s;
    let wanted = wanted_ppm(lock_half_width);
    let whole_s = since_s * libm::cbrt(line.yy / (wanted * wanted));
    let step_s = since_s / (rows.len() - 1) as f64;
    let rows_missing = (usize::from(LOCK_ROWS).saturating_sub(rows.len())) as f64;
    let expected_s = (whole_s - since_s).max(rows_missing * step_s);
    (expected_s < HORIZON_S).then_some(expected_s)
}

/// Seconds until the half-width should be within the threshold, if rows go on as they do.
pub(crate) fn lock_expected_in_s(filter: &Filter, lock_half_width: f64, rows: u16) -> Option<f64> {
    let information: f64 = filter
        .measuring()
        .map(|d| d.information() / d.thinning())
        .sum();
    let pace = RowPace {
        step_s: filter.mean_step_s(),
        rows,
    };
    pace.foreseen(&filter.bank, wanted_ppm(lock_half_width), |walk, count| {
        let information = information * count;
        walk.correct(0.0, -information / (1.0 + information * walk.xx));
    })
}

/// The same for drift readings.
pub(crate) fn lock_expected_from_drifts(
    filter: &DriftFilter,
    lock_half_width: f64,
    rows: u16,
) -> Option<f64> {
    let pace = RowPace {
        step_s: filter.mean_step_s(),
        rows,
    };
    let variance = filter.reading_variance();
    pace.foreseen(filter.bank(), wanted_ppm(lock_half_width), |walk, count| {
        walk.correct_drift(0.0, variance / count)
    })
}

/// How rows come, and how many there were.
struct RowPace {
    step_s: f64,
    rows: u16,
}

impl RowPace {
    /// Runs the covariance of an average mode forward, in strides that grow by a tenth; `learn`
    /// corrects it by as many rows as come in a stride.
    fn foreseen(&self, bank: &Bank, wanted: f64, learn: impl Fn(&mut Walk, f64)) -> Option<f64> {
        if self.step_s <= 0.0 {
            return None;
        }
        let (mut walk, noise) = average(bank);
        let mut ahead = 0.0;
        let mut stride = self.step_s;
        while ahead < HORIZON_S {
            if walk.yy <= wanted * wanted {
                let rows_missing = f64::from(LOCK_ROWS.saturating_sub(self.rows));
                return Some(ahead.max(rows_missing * self.step_s));
            }
            walk.advance(&Step::new(stride, 0.0), noise);
            learn(&mut walk, stride / self.step_s);
            ahead += stride;
            stride = stride.max(0.1 * ahead);
        }
        None
    }
}

/// Covariance and process noise averaged over the modes.
fn average(bank: &Bank) -> (Walk, WalkNoise) {
    let m = bank.mixture();
    let mut noise = WalkNoise { q1: 0.0, q2: 0.0 };
    let mut xy = 0.0;
    let weights = bank.weights().into_iter().enumerate();
    for (j, weight) in weights.filter(|&(j, _)| j != JUMP) {
        let own = bank.noise(j).walk;
        noise.q1 += weight * own.q1;
        noise.q2 += weight * own.q2;
        xy += weight * bank.walk(j).xy;
    }
    (
        Walk {
            x: m.x,
            y: m.y,
            xx: m.xx,
            xy,
            yy: m.yy,
        },
        noise,
    )
}
