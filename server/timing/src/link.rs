//! The estimator of one link.

use serde::{Deserialize, Serialize};

use crate::acquire::{lock_expected_from_drifts, lock_expected_from_start, lock_expected_in_s};
use crate::blocks::Blocks;
use crate::config::{ConfigError, LinkConfig};
use crate::diagnosis::{Diagnosis, Wander};
use crate::drift_filter::DriftFilter;
use crate::early::Early;
use crate::estimate::{Estimate, Reason, State, normal_half_width};
use crate::filter::{Filter, Setup};
use crate::forecast::{Forecast, Part};
use crate::growth::Growth;
use crate::history::History;
use crate::intake::{Intake, Row, Values};
use crate::lock::Lock;
use crate::measurement::Measurement;
use crate::outcome::{Event, Outcome, Refusal};
use crate::predict::{Prediction, widening};
use crate::start::{Start, StartRow};

/// The estimator of one link: one clock, read against one reference by one probe.
///
/// Feed [`Link::observe`] in the order of reference time, ask [`Link::estimate`] at any time
/// from the last reading on. Same calls, same bits, on any machine; the whole state can be
/// saved and restored.
///
/// ```
/// use num_rational::Ratio;
/// use ratewright_timing::{Link, LinkConfig, Measurement, State};
/// let mut link = Link::new(LinkConfig::new(Ratio::new(1_000_000, 1)))?;
/// // A clock that runs 5 ppm fast, read every second: drift is positive.
/// for i in 0..300_u64 {
///     let count = i * 1_000_005;
///     let reference_ns = i as i64 * 1_000_000_000;
///     link.observe(i, &Measurement::Counter { count, bits: 64, reference_ns })?;
/// }
/// let estimate = link.estimate(299_000_000_000);
/// assert_eq!(estimate.state, State::Locked);
/// assert!(estimate.low < 5e-6 && 5e-6 < estimate.high);
/// assert!((estimate.phase_ns - 5.0 * 299_000.0 / 1000.0 * 1000.0).abs() < 1000.0);
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Link {
    config: LinkConfig,
    intake: Intake,
    stage: Stage,
    lock: Lock,
    mean_interval_s: f32,
    rows_used: u64,
    /// Rows since the link began, or began anew.
    rows_since_start: u16,
    /// The last row was set aside with its time.
    doubted: bool,
    outliers: u64,
    history: History,
}

/// How far the link is.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[allow(
    clippy::large_enum_variant,
    reason = "one lives as long as its link; a box would only add a hop"
)]
enum Stage {
    /// Phase readings are gathered; nothing else is known.
    Starting { start: Start, two_way: bool },
    /// Phase readings are filtered.
    Phase {
        filter: Filter,
        early: Option<Early>,
        blocks: Option<Blocks>,
    },
    /// Drift readings are filtered.
    Drift(DriftFilter),
}

impl Link {
    /// A link that has measured nothing yet.
    ///
    /// # Errors
    /// When a field of the declaration is out of its range.
    pub fn new(config: LinkConfig) -> Result<Link, ConfigError> {
        config.check()?;
        let intake = Intake::new(config.nominal_hz);
        let start = Start::new(variance(config.prior_deviation_ppm()));
        Ok(Link {
            config,
            intake,
            stage: Stage::Starting {
                start,
                two_way: false,
            },
            lock: Lock::default(),
            mean_interval_s: 0.0,
            rows_used: 0,
            rows_since_start: 0,
            doubted: false,
            outliers: 0,
            history: History::default(),
        })
    }

    /// Takes one measurement.
    ///
    /// `sequence` is the reporter's own numbering; numbers not above the last one are dropped
    /// as stale, and a fall of 100,000 or more counts as a restart of the numbering.
    ///
    /// # Errors
    /// When the measurement is impossible; the link is then as it was.
    pub fn observe(&mut self, sequence: u64, m: &Measurement) -> Result<Outcome, Refusal> {
        let before_ns = self.intake.last_reference_ns();
        let drift_ppm = self.drift_ppm();
        let interval_s = before_ns.map_or(0.0, |ns| self.seconds_between(ns, m.reference_ns()));
        let in_gap = self.is_gap(interval_s);
        let before = (in_gap && !self.doubted).then(|| self.intake.clone());
        let Some(row) = self.intake.admit(sequence, m, drift_ppm)? else {
            return Ok(Outcome::Stale);
        };
        self.doubted = false;
        if let Some(before) = before
            && self.disbelieves(&row)
        {
            self.intake = before;
            self.doubted = true;
            self.outliers += 1;
            return Ok(Outcome::Outlier);
        }
        let outcome = self.take(&row, in_gap);
        self.keep_interval(interval_s, in_gap);
        match outcome {
            Outcome::Outlier => self.outliers += 1,
            _ => {
                self.rows_used += 1;
                self.rows_since_start = self.rows_since_start.saturating_add(1);
                self.intake.confirm(&row);
            }
        }
        if let Outcome::Event(event) = outcome {
            self.history.note_event(event, m.reference_ns());
        }
        if outcome == Outcome::Event(Event::Restart) {
            self.rows_since_start = 0;
        }
        self.watch_state(m.reference_ns(), before_ns, in_gap);
        Ok(outcome)
    }

    /// Whether a row that would end a gap has no explanation but that its time or its value is
    /// wrong. It is then as if it had not come: believing its time would have all rows refused
    /// until that time. The row after it is taken whatever it says.
    fn disbelieves(&self, row: &Row) -> bool {
        let Stage::Phase { filter, .. } = &self.stage else {
            return false;
        };
        match row.values {
            Values::OneWay(z) => filter.disbelieves(row.t_s, [z; 2]),
            Values::TwoWay(z) => filter.disbelieves(row.t_s, z),
            Values::Drift(..) => false,
        }
    }

    fn seconds_between(&self, earlier_ns: i64, later_ns: i64) -> f64 {
        self.intake.seconds(later_ns) - self.intake.seconds(earlier_ns)
    }

    /// Moves the state by what the row has left, and notes every change of it.
    fn watch_state(&mut self, at_ns: i64, before_ns: Option<i64>, in_gap: bool) {
        let threshold = self.config.lock_half_width;
        let half_width = self.quick_half_width();
        if let (true, Some(before_ns)) = (in_gap, before_ns) {
            let (state, reason) = self.lock.state(half_width, threshold, true);
            self.history
                .note_state(before_ns, state, reason, half_width, self.rows_used);
        }
        self.lock
            .update(half_width, threshold, self.rows_since_start);
        let (state, reason) = self.lock.state(half_width, threshold, false);
        self.history
            .note_state(at_ns, state, reason, half_width, self.rows_used);
    }

    /// What has happened so far: changes of state with their reasons, and events.
    pub fn history(&self) -> &History {
        &self.history
    }

    /// What the link makes of its probe, for people.
    pub fn diagnosis(&self) -> Diagnosis {
        match &self.stage {
            Stage::Phase { filter, .. } => filter.diagnosis(),
            Stage::Drift(filter) => filter.diagnosis(),
            Stage::Starting { .. } => Diagnosis {
                directions: Vec::new(),
                drift_readings: None,
                wander: Wander::default(),
            },
        }
    }

    /// What is known at a reference time; earlier times than the last reading count as that.
    pub fn estimate(&self, at_reference_ns: i64) -> Estimate {
        let last_reading_ns = self.intake.last_reference_ns();
        let as_of_ns = at_reference_ns.max(last_reading_ns.unwrap_or(i64::MIN));
        let now_s = self.intake.seconds(as_of_ns);
        let since_s = last_reading_ns.map_or(0.0, |ns| now_s - self.intake.seconds(ns));
        let in_gap = self.is_gap(since_s);
        let p = self.predict(now_s, in_gap);
        let half_width = 1e-6 * p.half_width;
        let (state, reason) = if last_reading_ns.is_none() {
            (State::FreeRunning, Reason::NeverMeasured)
        } else {
            self.lock
                .state(half_width, self.config.lock_half_width, in_gap)
        };
        let seeking = matches!(state, State::Acquiring | State::FreeRunning) && !in_gap;
        Estimate {
            state,
            reason,
            drift: 1e-6 * p.y,
            deviation: 1e-6 * p.variance.sqrt(),
            low: 1e-6 * p.y - half_width,
            high: 1e-6 * p.y + half_width,
            drift_rate_per_s: 1e-6 * p.slope,
            phase_ns: 1e3 * p.x,
            phase_deviation_ns: 1e3 * p.x_variance.sqrt(),
            phase_drift_covariance_ns: 1e-3 * p.xy,
            first_phase_ns: 1e3 * p.first_phase.x,
            first_phase_deviation_ns: 1e3 * p.first_phase.xx.sqrt(),
            as_of_ns,
            last_reading_ns,
            rows_used: self.rows_used,
            outliers: self.outliers,
            lock_expected_in_s: if seeking {
                self.lock_expected_in_s()
            } else {
                None
            },
            forecast: Forecast::of(self.forecast_part(&p, now_s, in_gap)),
        }
    }

    /// No reading for longer than max(20 s, 6 usual intervals).
    fn is_gap(&self, since_s: f64) -> bool {
        self.rows_used > 1 && since_s > (6.0 * f64::from(self.mean_interval_s)).max(20.0)
    }

    fn keep_interval(&mut self, interval_s: f64, in_gap: bool) {
        if in_gap || interval_s <= 0.0 {
            return;
        }
        let gain = if self.mean_interval_s > 0.0 {
            1.0 / 16.0
        } else {
            1.0
        };
        self.mean_interval_s += gain * (interval_s as f32 - self.mean_interval_s);
    }

    /// Step of what the probe reads, µs.
    fn quantum_us(&self) -> f64 {
        let declared = self.config.quantum_s.map(|s| s * 1e6);
        declared.unwrap_or(self.intake.quantum_us())
    }

    fn setup(&self) -> Setup {
        Setup {
            prior_var: variance(self.config.prior_deviation_ppm()),
            scale: self.config.oscillator.wander_scale(),
            // Uniform over a tick, its deviation is the tick over √12; half of that is certain.
            least_sigma: 0.144 * self.quantum_us(),
            one_way_sign: self.config.latency_tail.sign(),
        }
    }

    fn take(&mut self, row: &Row, in_gap: bool) -> Outcome {
        match row.values {
            Values::OneWay(z) => self.take_phase(
                StartRow {
                    t_s: row.t_s,
                    z: [z; 2],
                },
                false,
                in_gap,
            ),
            Values::TwoWay(z) => self.take_phase(StartRow { t_s: row.t_s, z }, true, in_gap),
            Values::Drift(y, r) => self.take_drift(row.t_s, y, r, in_gap),
        }
    }

    fn take_phase(&mut self, row: StartRow, is_two_way: bool, in_gap: bool) -> Outcome {
        let setup = self.setup();
        match &mut self.stage {
            Stage::Starting { start, two_way } => {
                *two_way = is_two_way;
                if !start.push(row) {
                    return Outcome::Buffered;
                }
                let filter = Filter::begin(start, is_two_way, &setup);
                self.stage = Stage::Phase {
                    filter,
                    early: Some(Early::new(start.rows())),
                    blocks: is_two_way.then(Blocks::default),
                };
                Outcome::Used
            }
            Stage::Phase {
                filter,
                early,
                blocks,
            } => {
                let gathered = match blocks {
                    None => Some((row, in_gap)),
                    Some(blocks) => blocks.gather(row, in_gap, filter.latest.y),
                };
                let Some((row, in_gap)) = gathered else {
                    return Outcome::Used;
                };
                let outcome = match early {
                    // Once the filter has as many rows, nothing early is looked at any more.
                    _ if filter.rows() >= Early::MOST => filter.take(&row, in_gap),
                    None => filter.take(&row, in_gap),
                    Some(first) => {
                        let outcome = first.take(filter, blocks.as_mut(), (row, in_gap), &setup);
                        if first.is_full() {
                            *early = None;
                        }
                        outcome
                    }
                };
                if !filter.lost() {
                    return outcome;
                }
                let start = Start::new(setup.prior_var);
                self.stage = Stage::Starting {
                    start,
                    two_way: is_two_way,
                };
                Outcome::Event(Event::Restart)
            }
            Stage::Drift(_) => Outcome::Buffered, // the intake refuses a change of kind
        }
    }

    fn take_drift(&mut self, t_s: f64, y: f64, r: f64, in_gap: bool) -> Outcome {
        let setup = self.setup();
        if let Stage::Starting { .. } = self.stage {
            self.stage = Stage::Drift(DriftFilter::new(t_s, &setup));
        }
        match &mut self.stage {
            Stage::Drift(filter) => filter.take(t_s, y, r, in_gap),
            _ => Outcome::Buffered, // the intake refuses a change of kind
        }
    }

    fn drift_ppm(&self) -> f64 {
        match &self.stage {
            Stage::Starting { start, .. } => start.line(self.quantum_us()).y,
            Stage::Phase { filter, .. } => filter.latest.y,
            Stage::Drift(filter) => filter.bank().mixture().y,
        }
    }

    /// Half-width after a row, from the moments alone: what the lock goes by.
    fn quick_half_width(&self) -> f64 {
        let (variance, widening) = match &self.stage {
            Stage::Starting { start, .. } => (start.line(self.quantum_us()).yy, 1.0),
            Stage::Phase { filter, .. } => (filter.latest.yy, widening(filter.rows())),
            Stage::Drift(filter) => (filter.bank().mixture().yy, 1.0),
        };
        1e-6 * widening * normal_half_width(variance.sqrt())
    }

    fn predict(&self, now_s: f64, in_gap: bool) -> Prediction {
        match &self.stage {
            Stage::Starting { start, .. } => {
                let line = start.line(self.quantum_us());
                let scale = self.config.oscillator.wander_scale();
                let growth = Growth {
                    factors: [scale; 6],
                    tail: scale,
                    walk: 0.0,
                };
                let ahead = (now_s - line.t_s).max(0.0);
                let variance = line.yy + if in_gap { growth.variance(ahead) } else { 0.0 };
                Prediction {
                    y: line.y,
                    variance,
                    half_width: normal_half_width(variance.sqrt()),
                    slope: 0.0,
                    x: line.x + ahead * line.y,
                    x_variance: line.xx + ahead * (2.0 * line.xy + ahead * variance),
                    xy: line.xy + ahead * variance,
                    first_phase: line.first_phase,
                    white_fm: 1e-6 * scale,
                    growth,
                }
            }
            Stage::Phase { filter, .. } => {
                filter.predict((now_s - filter.latest.t_s).max(0.0), in_gap)
            }
            Stage::Drift(filter) => filter.predict(now_s, in_gap),
        }
    }

    /// In a gap growth has begun at the last row; otherwise it begins now.
    fn forecast_part(&self, p: &Prediction, now_s: f64, in_gap: bool) -> Part {
        let age_s = match &self.stage {
            _ if !in_gap => 0.0,
            Stage::Starting { .. } => 0.0,
            Stage::Phase { filter, .. } => (now_s - filter.latest.t_s).max(0.0),
            Stage::Drift(filter) => filter.age_s(now_s),
        };
        let drift_var = (p.variance - p.growth.variance(age_s)).max(0.0);
        Part {
            age_s,
            drift_var,
            white_fm: p.white_fm,
            growth: p.growth,
        }
    }

    fn lock_expected_in_s(&self) -> Option<f64> {
        let wanted = self.config.lock_half_width;
        match &self.stage {
            Stage::Starting { start, .. } => {
                lock_expected_from_start(start, &start.line(self.quantum_us()), wanted)
            }
            Stage::Phase { filter, .. } => {
                lock_expected_in_s(filter, wanted, self.rows_since_start)
            }
            Stage::Drift(filter) => {
                lock_expected_from_drifts(filter, wanted, self.rows_since_start)
            }
        }
    }
}

/// Bytes of state that every measurement of a one-way and of a two-way link reads or writes:
/// modes, noise with what is learned of it, evidence of events, the block under way, counters
/// and states. Second, the bytes by which exact integers are checked and unwrapped besides.
pub fn hot_state_bytes() -> ([usize; 2], usize) {
    use crate::{bank::Bank, blocks::Block, direction::Direction};
    let counters = size_of::<f32>() + size_of::<u64>() + size_of::<u16>() + size_of::<bool>();
    let states = size_of::<Lock>() + size_of::<State>();
    let filter = size_of::<Bank>() + size_of::<Direction>() + Filter::PACE_BYTES;
    let one_way = filter + counters + states;
    let two_way = one_way + size_of::<Direction>() + size_of::<Option<Block>>();
    ([one_way, two_way], size_of::<Intake>())
}

fn variance(deviation: f64) -> f64 {
    deviation * deviation
}
