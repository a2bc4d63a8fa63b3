//! The filter of a phase link once it has begun: rows in, bank and noise moved on.

use serde::{Deserialize, Serialize};

use crate::bank::{Bank, JUMP, MODES, Mixture, PRIOR, Sight};
use crate::direction::{Direction, Verdict};
use crate::growth::Growth;
use crate::holdover::Structure;
use crate::mode::{Step, Walk};
use crate::outcome::{Event, Outcome};
use crate::start::{FirstGuess, PhaseAt, Start, StartRow};

/// Rows before a jump of the drift is believed.
const JUMP_ROWS: u16 = 24;
/// Rows for which the jump mode must explain nearly everything.
const JUMP_HOLD: u8 = 8;
/// Memory of the average weights that a jump returns to, s.
const WEIGHT_MEMORY_S: f32 = 900.0;
/// Weights are averaged in steps of at least this, s.
const AVERAGE_STEP_S: f32 = 30.0;
/// A mode of next to no weight begins anew this often, s.
const RESEED_S: f32 = 1200.0;

/// What of the configuration the filter needs.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Setup {
    /// Variance of the drift before anything is measured, ppm².
    pub(crate) prior_var: f64,
    /// Factor of the oscillator on wander and temperature.
    pub(crate) scale: f64,
    /// Least deviation of the noise, µs.
    pub(crate) least_sigma: f64,
    /// Sign of one-way errors.
    pub(crate) one_way_sign: f64,
}

/// Bank, noise of each direction and everything learned besides.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Filter {
    pub(crate) bank: Bank,
    pub(crate) directions: [Direction; 2],
    pub(crate) latest: Latest,
    pace: Pace,
    pub(crate) structure: Structure,
    average_weights: [f32; MODES],
    pub(crate) first_phase: PhaseAt,
}

/// The filter after its last row.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Latest {
    /// Time of the row, s.
    pub(crate) t_s: f64,
    /// Drift, ppm, and its variance, ppm².
    pub(crate) y: f64,
    pub(crate) yy: f64,
}

/// What is counted from row to row.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Pace {
    mean_step_s: f32,
    least_sigma: f32,
    outlier_share: f32,
    since_average_s: f32,
    since_reseed_s: f32,
    rows_since_event: u16,
    jump_held: u8,
    two_way: bool,
}

/// Going out, lateness makes z smaller; coming back, larger.
const TWO_WAY_SIGNS: [f64; 2] = [-1.0, 1.0];

/// Whether both directions show the same move of the clock: late in one, early in the other.
fn contrary([out, back]: [f64; 2]) -> bool {
    out * back < 0.0 && (out + back).abs() < 0.5 * out.abs().max(back.abs())
}

fn signs(two_way: bool, setup: &Setup) -> [f64; 2] {
    if two_way {
        TWO_WAY_SIGNS
    } else {
        [setup.one_way_sign; 2]
    }
}

impl Filter {
    /// Bytes besides bank and directions that every row reads or writes: also the time at
    /// which the structure function has something to do again.
    pub(crate) const PACE_BYTES: usize = size_of::<Latest>() + size_of::<Pace>() + size_of::<f64>();

    /// Begins from the rows gathered, and takes them one after another.
    pub(crate) fn begin(start: &Start, two_way: bool, setup: &Setup) -> Self {
        let guesses = start.guess(signs(two_way, setup), setup.least_sigma);
        let begun = Filter::through(start.rows().iter().copied(), guesses, two_way, setup);
        begun.smoothed(start.rows(), setup)
    }

    /// The same from all the `rows` taken so far, with the noise learned from them.
    pub(crate) fn begun_again(&self, rows: &[StartRow], setup: &Setup) -> Self {
        let two_way = self.pace.two_way;
        let begun = Filter::through(rows.iter().copied(), self.learned(), two_way, setup);
        begun.smoothed(rows, setup)
    }

    fn learned(&self) -> [FirstGuess; 2] {
        self.directions.each_ref().map(Direction::learned)
    }

    /// With the phase at the time of the first reading as all `rows` show it: a filter goes
    /// through them backwards, which makes every drift its opposite and leaves phases alone.
    fn smoothed(mut self, rows: &[StartRow], setup: &Setup) -> Self {
        let mirrored = rows.iter().rev().map(|row| StartRow {
            t_s: -row.t_s,
            z: row.z,
        });
        let back = Filter::through(mirrored, self.learned(), self.pace.two_way, setup);
        let at_first = back.predict(rows[0].t_s, false);
        self.first_phase = PhaseAt {
            x: at_first.x,
            xx: at_first.x_variance,
        };
        self
    }

    /// A new filter after all of the rows.
    fn through(
        rows: impl Iterator<Item = StartRow> + Clone,
        guesses: [FirstGuess; 2],
        two_way: bool,
        setup: &Setup,
    ) -> Self {
        let signs = signs(two_way, setup);
        let directions = [0, 1].map(|c| Direction::new(signs[c], &guesses[c]));
        let first = rows.clone().next().expect("a filter begins from some rows");
        let spread = guesses[0].noise.sigma + guesses[0].noise.tau[0];
        let phase_var = (1e6 * spread * spread).min(1e10);
        let x = if two_way {
            0.5 * (first.z[0] + first.z[1])
        } else {
            first.z[0] - directions[0].offset
        };
        let bank = Bank::new(x, phase_var, setup.prior_var, setup.scale);
        let mut filter = Filter {
            bank,
            directions,
            latest: Latest {
                t_s: first.t_s,
                y: 0.0,
                yy: setup.prior_var,
            },
            pace: Pace {
                mean_step_s: 0.0,
                least_sigma: setup.least_sigma as f32,
                outlier_share: 0.0,
                since_average_s: 0.0,
                since_reseed_s: 0.0,
                rows_since_event: 0,
                jump_held: 0,
                two_way,
            },
            structure: Structure::new(setup.scale),
            average_weights: PRIOR.map(|w| w as f32),
            first_phase: PhaseAt { x, xx: phase_var },
        };
        for row in rows {
            filter.take(&row, false);
        }
        filter
    }

    /// Takes a row; `in_gap` says that it ends a gap.
    pub(crate) fn take(&mut self, row: &StartRow, in_gap: bool) -> Outcome {
        let dt = (row.t_s - self.latest.t_s).max(0.0);
        self.advance(dt, in_gap);
        let count = if self.pace.two_way { 2 } else { 1 };
        let mut verdicts = [Verdict::Ordinary; 2];
        let mut errors = [0.0; 2];
        let mut newton = [None; 2];
        for c in 0..count {
            (verdicts[c], errors[c], newton[c]) = self.look(c, row.z[c]);
        }
        if let ([Verdict::Ordinary, Verdict::Ordinary], [Some(out), Some(back)]) =
            (verdicts, newton)
        {
            self.split_offsets([out, back]);
        }
        let pace = &mut self.pace;
        pace.rows_since_event = pace.rows_since_event.saturating_add(1);
        let outlying = verdicts[..count].contains(&Verdict::Outlier);
        pace.outlier_share += (f32::from(u8::from(outlying)) - pace.outlier_share) / 32.0;
        let outcome = self.conclude(&verdicts[..count], errors);
        let mixture = self.note_latest();
        self.watch_drift(&mixture, dt);
        if self.jumped() {
            self.note_latest();
            return Outcome::Event(Event::FrequencyJump);
        }
        outcome
    }

    fn note_latest(&mut self) -> Mixture {
        let mixture = self.bank.mixture();
        (self.latest.y, self.latest.yy) = (mixture.y, mixture.yy);
        mixture
    }

    /// Rows that the noise was learned from, as far as they are counted.
    pub(crate) fn rows(&self) -> u16 {
        self.directions[0].rows()
    }

    /// Usual step from row to row, s; nought before there is one.
    pub(crate) fn mean_step_s(&self) -> f64 {
        f64::from(self.pace.mean_step_s)
    }

    /// Whether nothing fits any more and the link should begin anew.
    pub(crate) fn lost(&self) -> bool {
        self.pace.outlier_share > 0.7
    }

    /// The directions that measure: one, or both of a two-way path.
    pub(crate) fn measuring(&self) -> impl Iterator<Item = &Direction> {
        self.directions[..if self.pace.two_way { 2 } else { 1 }].iter()
    }

    /// Whether every direction holds a row after a gap for impossible.
    pub(crate) fn disbelieves(&self, t_s: f64, z: [f64; 2]) -> bool {
        let p = self.predict((t_s - self.latest.t_s).max(0.0), true);
        let mut seen = self.measuring().zip(z);
        seen.all(|(direction, z)| direction.disbelieves(z, p.x, p.x_variance))
    }

    /// D(h) as far as it is known.
    pub(crate) fn growth(&self) -> Growth {
        let walk = self.bank.weights().into_iter().enumerate();
        let walk = walk.map(|(j, w)| w * self.bank.noise(j).walk.q2);
        self.structure.growth(walk.sum())
    }

    fn advance(&mut self, dt: f64, in_gap: bool) {
        if dt <= 0.0 {
            return;
        }
        let least_q2 = if in_gap {
            self.growth().variance(dt) / dt
        } else {
            0.0
        };
        self.bank.advance(&Step::new(dt, least_q2));
        self.latest.t_s += dt;
        if !in_gap {
            let mean = &mut self.pace.mean_step_s;
            *mean += (dt as f32 - *mean) * if *mean > 0.0 { 0.06 } else { 1.0 };
        }
    }

    /// Weighs one direction's value into the bank; its verdict, its error, and its Newton
    /// residual, µs, unless it only sought its offset.
    fn look(&mut self, c: usize, z: f64) -> (Verdict, f64, Option<f64>) {
        let direction = &mut self.directions[c];
        let mixture = self.bank.mixture();
        let value = z - direction.offset;
        let e = direction.sign() * (value - mixture.x);
        let noise = if self.pace.two_way {
            direction.expected_noise()
        } else {
            direction.noise()
        };
        let detail = noise.detail(e, mixture.xx);
        if direction.seek_offset(&detail) {
            return (Verdict::Ordinary, e, None);
        }
        let sight = Sight {
            value,
            sign: direction.sign(),
            noise: &noise,
            thinning: direction.thinning(),
        };
        self.bank.correct(&sight, &mixture, &detail);
        let residual = direction.sign() * direction.newton_step(&detail);
        let verdict = direction.judge(e, &detail, mixture.xx);
        let moved = direction.learn(&detail, mixture.xx, f64::from(self.pace.least_sigma));
        self.bank.loosen(0.5 * moved * moved, 0.0);
        (verdict, e, Some(residual))
    }

    /// The offsets of the directions are known only by their difference: it is learned from
    /// the pair's residuals, the younger offset moving first, and otherwise shared so that the
    /// weighed mean of the offsets stays.
    fn split_offsets(&mut self, residuals: [f64; 2]) {
        let [out, back] = &mut self.directions;
        let gains = [out.offset_gain(), back.offset_gain()];
        let shares = [gains[0] / out.information(), gains[1] / back.information()];
        let gain = gains[0].max(gains[1]);
        let difference = gain * (residuals[1] - residuals[0]) / (shares[0] + shares[1]);
        back.offset += difference * shares[1];
        out.offset -= difference * shares[0];
    }

    /// What the row's verdicts amount to; after a step of the clock itself the bank is loosened.
    fn conclude(&mut self, verdicts: &[Verdict], errors: [f64; 2]) -> Outcome {
        let changed = |v: &Verdict| matches!(v, Verdict::Stepped | Verdict::Rerouted);
        let outlying = verdicts.contains(&Verdict::Outlier);
        if !verdicts.iter().any(changed) {
            return if outlying {
                Outcome::Outlier
            } else {
                Outcome::Used
            };
        }
        let everywhere = verdicts.iter().all(changed);
        // The two directions of a stepped clock may be found out a row or a few apart, and a
        // clock whose drift has jumped leaves them contrary to each other.
        let awaited = verdicts.contains(&Verdict::Stepped)
            && self.directions.iter().any(Direction::suspects_step);
        if self.pace.two_way && (awaited || (!everywhere && contrary(errors))) {
            return Outcome::Outlier;
        }
        let just_changed =
            self.pace.two_way && self.directions.iter().any(Direction::has_just_changed);
        let stepped = verdicts.contains(&Verdict::Stepped);
        for (direction, verdict) in self.directions.iter_mut().zip(verdicts) {
            direction.follow(*verdict);
        }
        if (everywhere || just_changed) && stepped {
            self.directions
                .iter_mut()
                .for_each(Direction::stop_settling);
            let agreement = self.directions[0].agreement(self.bank.mixture().xx);
            self.bank.loosen(0.25 * agreement * agreement, 0.05 * 0.05);
            return Outcome::Event(Event::PhaseStep);
        }
        self.settle_changed(verdicts.iter().map(changed));
        Outcome::Event(Event::RouteChange)
    }

    /// Where the other direction still measures the clock, the changed one finds its offset.
    fn settle_changed(&mut self, changed: impl Iterator<Item = bool>) {
        if self.pace.two_way {
            let lone = self
                .directions
                .iter_mut()
                .zip(changed)
                .filter(|(_, changed)| *changed);
            lone.for_each(|(direction, _)| direction.settle());
        }
    }

    /// Upkeep that looks at the drift: structure function, average weights, dead modes.
    fn watch_drift(&mut self, mixture: &Mixture, dt: f64) {
        self.structure.take(self.latest.t_s, &self.bank, mixture);
        self.pace.since_average_s += dt as f32;
        if self.pace.since_average_s >= AVERAGE_STEP_S {
            self.average_weights();
        }
        self.pace.since_reseed_s += dt as f32;
        let idle = self.pace.since_reseed_s >= RESEED_S;
        if idle {
            self.pace.since_reseed_s = 0.0;
        }
        self.reseed(mixture, idle);
    }

    fn average_weights(&mut self) {
        let gain = (self.pace.since_average_s / WEIGHT_MEMORY_S).min(1.0);
        self.pace.since_average_s = 0.0;
        for (average, weight) in self.average_weights.iter_mut().zip(self.bank.weights()) {
            *average += gain * (weight as f32 - *average);
        }
    }

    /// A mode of no weight that has strayed, or has been idle long, begins from the mixture.
    fn reseed(&mut self, mixture: &Mixture, idle: bool) {
        for (j, weight) in self.bank.weights().into_iter().enumerate() {
            if j == JUMP || weight >= 1e-3 {
                continue;
            }
            let walk = self.bank.walk(j);
            let off = walk.y - mixture.y;
            let strayed = off * off > 9.0 * (walk.yy + mixture.yy);
            if strayed || (idle && weight < 3e-4) {
                let xy = self.bank.covariance(mixture);
                let state = Walk {
                    x: mixture.x,
                    y: mixture.y,
                    xx: mixture.xx,
                    xy,
                    yy: mixture.yy,
                };
                self.bank.reseed(j, state);
            }
        }
    }

    /// Follows a jump of the drift once the jump mode explains nearly everything.
    fn jumped(&mut self) -> bool {
        if self.pace.rows_since_event < JUMP_ROWS || self.bank.weights()[JUMP] <= 0.9 {
            self.pace.jump_held = 0;
            return false;
        }
        self.pace.jump_held += 1;
        if self.pace.jump_held < JUMP_HOLD {
            return false;
        }
        self.pace.jump_held = 0;
        let mut weights = PRIOR;
        for (weight, average) in weights.iter_mut().zip(self.average_weights) {
            *weight = 0.3 * *weight + 0.7 * f64::from(average);
        }
        weights[JUMP] = PRIOR[JUMP];
        self.bank.follow_jump(weights);
        self.average_weights = weights.map(|w| w as f32);
        self.structure.interrupt();
        self.pace.rows_since_event = 0;
        true
    }
}
