//! One direction of a path: its offset, its noise, and evidence of steps and route changes.

use serde::{Deserialize, Serialize};

use crate::learner::Learner;
use crate::noise::{Burst, Detail, Noise, PackedNoise};
use crate::route::RouteEvidence;
use crate::start::FirstGuess;

/// One direction of a path. One-way links have one, two-way links two.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Direction {
    /// s in e = s(z − b − x): −1 when lateness makes z smaller, +1 when larger.
    sign: i8,
    /// Rows for which the offset is sought before the direction measures the clock again.
    settling: u8,
    /// Outliers in a row that agree with each other.
    agreeing: u8,
    /// Rows since the offset was set anew.
    age: u16,
    /// Average information of a row, 1/µs².
    information: f32,
    /// b, µs.
    pub(crate) offset: f64,
    noise: PackedNoise,
    learner: Learner,
    correlation: Correlation,
    /// The least of the agreeing outliers, µs: after a reset as large as a counter's range.
    least_outlier: f64,
    route: RouteEvidence,
    /// Probability that the next row falls into a burst of queueing.
    burst: f32,
}

/// Agreeing outliers that are a step.
const STEP_ROWS: u8 = 5;
/// Rows that find the offset of a changed route: until it is known well, what it is wrong by
/// would move the clock.
const SETTLING_ROWS: u8 = 32;
/// Of these, rows within which the other direction of a stepped clock is found out too.
const SAME_STEP_ROWS: u8 = 8;
/// Rows for which an offset found anew is in doubt.
const TENTATIVE_ROWS: u16 = 128;
/// Chance that a row begins a burst, and that a row ends one.
const BURST_BEGINS: f64 = 1.0 / 500.0;
const BURST_ENDS: f64 = 1.0 / 40.0;
/// Mean lateness in a burst against that outside.
const BURST_SCALE: f64 = 6.0;

/// What a row tells about events in its direction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Verdict {
    /// An ordinary row.
    Ordinary,
    /// An outlier, not (yet) explained.
    Outlier,
    /// The fifth agreeing outlier, or one more: the phase of this direction has stepped.
    Stepped,
    /// So many late rows in a row that the least latency must have grown.
    Rerouted,
}

/// Lag-one autocorrelation of the scores.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Correlation {
    mean: f32,
    variance: f32,
    lagged: f32,
    last: f32,
}

impl Correlation {
    /// Takes the score of row number `row`.
    fn take(&mut self, first: f64, row: u16) {
        let gain = (1.0 / f32::from(row)).max(1.0 / 256.0);
        let deviation = first as f32 - self.mean;
        self.mean += gain * deviation;
        self.variance += gain * (deviation * deviation - self.variance);
        self.lagged += gain * (deviation * self.last - self.lagged);
        self.last = deviation;
    }

    /// λ = (1 + ρ)/(1 − ρ) within 1..20, once a hundred rows have spoken.
    fn thinning(&self, rows: u16) -> f64 {
        if rows < 100 || self.variance <= 0.0 {
            return 1.0;
        }
        let rho = (f64::from(self.lagged / self.variance) - 0.08).clamp(0.0, 0.95);
        ((1.0 + rho) / (1.0 - rho)).min(20.0)
    }
}

impl Direction {
    pub(crate) fn new(sign: f64, guess: &FirstGuess) -> Self {
        Direction {
            sign: if sign < 0.0 { -1 } else { 1 },
            offset: guess.offset,
            noise: PackedNoise::from(&guess.noise),
            learner: Learner::new(&guess.noise),
            correlation: Correlation::default(),
            information: (1.0 / (guess.noise.sigma * guess.noise.sigma)) as f32,
            agreeing: 0,
            least_outlier: 0.0,
            route: RouteEvidence::default(),
            age: 0,
            settling: 0,
            burst: BURST_BEGINS as f32,
        }
    }

    /// What is known of the direction by now, to begin anew with.
    pub(crate) fn learned(&self) -> FirstGuess {
        FirstGuess {
            noise: self.noise(),
            offset: self.offset,
        }
    }

    /// Rows learned from, as far as they are counted.
    pub(crate) fn rows(&self) -> u16 {
        self.learner.rows()
    }

    /// s, −1 or +1.
    pub(crate) fn sign(&self) -> f64 {
        f64::from(self.sign)
    }

    /// The density of the error, on average.
    pub(crate) fn noise(&self) -> Noise {
        self.noise.unpacked()
    }

    /// The density to expect of the next row: queues come in bursts, in which late rows are no
    /// evidence of anything else, and an offset found anew is not sure yet.
    pub(crate) fn expected_noise(&self) -> Noise {
        let noise = self.noise();
        let sigma = libm::hypot(noise.sigma, self.offset_doubt(&noise));
        let burst = Burst {
            weight: self.burst(),
            tau: BURST_SCALE * noise.mean_lateness(),
        };
        Noise { sigma, ..noise }.with_burst(burst)
    }

    /// Deviation of an offset found anew by so many rows, µs; nought when it is as good as any.
    fn offset_doubt(&self, noise: &Noise) -> f64 {
        if !self.is_tentative() {
            return 0.0;
        }
        let scale = 1.0 + (BURST_SCALE - 1.0) * self.burst();
        scale * noise.mean_lateness() / (f64::from(self.age) + 1.0).sqrt()
    }

    /// Whether the offset was found anew not long ago.
    fn is_tentative(&self) -> bool {
        self.age < TENTATIVE_ROWS && self.rows() > self.age + TENTATIVE_ROWS
    }

    /// Average information of a row, 1/µs².
    pub(crate) fn information(&self) -> f64 {
        f64::from(self.information)
    }

    /// Two-state hidden Markov filter: calm, or a burst. Outliers come in either.
    fn follow_burst(&mut self, detail: &Detail) {
        let outlying = detail.shares[3] + detail.shares[4];
        let within = detail.shares[5] + outlying * self.burst();
        let next = within * (1.0 - BURST_ENDS) + (1.0 - within) * BURST_BEGINS;
        self.burst = next as f32;
    }

    /// λ: the number of rows that speak as one, for they agree with each other.
    pub(crate) fn thinning(&self) -> f64 {
        self.correlation.thinning(self.learner.rows())
    }

    /// Distance to where the row would have the error's location, µs: a Newton step of its
    /// score, by the row's own variance while that is mostly the offset's.
    pub(crate) fn newton_step(&self, detail: &Detail) -> f64 {
        let spread = 3.0 * detail.variance.sqrt();
        let information = if self.is_tentative() {
            1.0 / detail.variance
        } else {
            self.information()
        };
        (-detail.score.first / information).clamp(-spread, spread)
    }

    /// The route of this direction alone has changed: its offset is to be found anew, from the
    /// clock as the other direction sees it.
    pub(crate) fn settle(&mut self) {
        self.age = 0;
        self.settling = SETTLING_ROWS;
    }

    /// Probability that the next row falls into a burst of queueing.
    pub(crate) fn burst(&self) -> f64 {
        f64::from(self.burst)
    }

    /// Whether the offset has only just begun to be sought.
    pub(crate) fn has_just_changed(&self) -> bool {
        self.settling > SETTLING_ROWS - SAME_STEP_ROWS
    }

    /// It was the clock that stepped: the offset stands as it is.
    pub(crate) fn stop_settling(&mut self) {
        self.settling = 0;
        self.age = 0;
    }

    /// Takes a row to find the offset by, while that is sought; true when it was.
    pub(crate) fn seek_offset(&mut self, detail: &Detail) -> bool {
        if self.settling == 0 {
            return false;
        }
        self.settling -= 1;
        self.age += 1;
        self.offset += self.sign() * self.newton_step(detail) / f64::from(self.age);
        true
    }

    /// Gain of a correction to the offset, falling with its age.
    pub(crate) fn offset_gain(&mut self) -> f64 {
        self.age = self.age.saturating_add(1);
        (1.0 / (f64::from(self.age) + 16.0)).max(1.0 / 8192.0)
    }

    /// Learns from a row of error `e` seen at phase variance `p`. Where the offset must move
    /// because the density now settles elsewhere, that is done, and the distance returned.
    pub(crate) fn learn(&mut self, detail: &Detail, p: f64, least_sigma: f64) -> f64 {
        let noise = self.noise();
        let row = self.learner.rows().saturating_add(1);
        self.correlation.take(detail.score.first, row);
        self.follow_burst(detail);
        let least = 0.02 / detail.variance;
        let old = self.information();
        let curved = old + (-detail.score.second - old) / 64.0;
        self.information = curved.max(least) as f32;
        if !self.learner.learn(&noise, detail) {
            return 0.0;
        }
        let learned = self.learner.refresh(least_sigma);
        let moved = noise.displacement(&learned, p);
        self.noise = PackedNoise::from(&learned);
        self.offset += self.sign() * moved;
        moved
    }

    /// Weighs a row of error `e` as evidence of events.
    pub(crate) fn judge(&mut self, e: f64, detail: &Detail, p: f64) -> Verdict {
        let early = if e < 0.0 { detail.shares[3] } else { 0.0 };
        if detail.shares[4] + early > 0.5 {
            return self.outlying(e, p);
        }
        // Late rows in between do not speak against early ones.
        self.agreeing = if self.least_outlier < 0.0 {
            self.agreeing.saturating_sub(1)
        } else {
            0
        };
        self.late(e)
    }

    /// Whether only the flat part of the density explains a value, where phase `x` is foretold
    /// with variance `p`.
    pub(crate) fn disbelieves(&self, value: f64, x: f64, p: f64) -> bool {
        let e = self.sign() * (value - self.offset - x);
        self.noise().detail(e, p).shares[4] > 0.5
    }

    /// Distance within which outliers agree, µs.
    pub(crate) fn agreement(&self, p: f64) -> f64 {
        self.noise().reach() + 0.5 * p.sqrt()
    }

    fn outlying(&mut self, e: f64, p: f64) -> Verdict {
        let agreement = self.agreement(p);
        if self.agreeing > 0 && (e - self.least_outlier).abs() <= agreement {
            self.agreeing = self.agreeing.saturating_add(1);
            self.least_outlier = self.least_outlier.min(e);
        } else {
            (self.agreeing, self.least_outlier) = (1, e);
        }
        if self.agreeing < STEP_ROWS {
            Verdict::Outlier
        } else {
            Verdict::Stepped
        }
    }

    /// Whether a step is near to being certain, so that the other direction may wait for it.
    pub(crate) fn suspects_step(&self) -> bool {
        (STEP_ROWS - 2..STEP_ROWS).contains(&self.agreeing)
    }

    /// Moves the offset by the step that the outliers agree on, or by what a longer route shows:
    /// the least late of the rows is nearest to the error's location. What looked like a burst
    /// was none.
    pub(crate) fn follow(&mut self, verdict: Verdict) {
        let sigma = self.noise().sigma;
        let moved = match verdict {
            Verdict::Stepped => self.least_outlier + 0.5 * sigma,
            Verdict::Rerouted => self.route.least_us() - sigma,
            Verdict::Ordinary | Verdict::Outlier => return,
        };
        self.offset += self.sign() * moved;
        self.agreeing = 0;
        self.route.forget();
        self.burst = BURST_BEGINS as f32;
    }

    /// Runs of late rows: the least latency may have grown by what the earliest of them shows.
    fn late(&mut self, e: f64) -> Verdict {
        let noise = self.noise();
        let hit = e <= noise.sigma + 0.5 * noise.tau[0];
        self.route.take(e, hit);
        let alike = self.thinning().min(3.0);
        if !hit && self.route.is_certain(noise.mean_lateness(), alike) {
            Verdict::Rerouted
        } else {
            Verdict::Ordinary
        }
    }
}
