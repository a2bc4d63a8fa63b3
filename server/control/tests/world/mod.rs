//! A small simulated facility around the engine: seeded clocks are read, settings are followed,
//! and the true phase error of every crossing is kept beside what the engine believes.
#![allow(
    dead_code,
    unreachable_pub,
    missing_debug_implementations,
    reason = "each test file includes the world and uses its part of it"
)]

use std::collections::BTreeMap;

use num_rational::Ratio;
use ratewright_control::{
    ClockDeclaration, CrossingDeclaration, CrossingState, Effects, Engine, Event, Id, Reading,
    Realised, Reference, Setting, Transition,
};
use ratewright_ratio::{Bounds, Exact};
use ratewright_timing::Measurement;
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel};

pub const SECOND: i64 = 1_000_000_000;
pub const HOUR: i64 = 3600 * SECOND;
pub const DAY: i64 = 24 * HOUR;

pub fn id(name: &str) -> Id {
    Id::new(name).expect("tests use good names")
}

pub fn clock(name: &str, hz: u64) -> ClockDeclaration {
    ClockDeclaration::new(id(name), Ratio::from_integer(hz))
}

pub fn exact_clock(name: &str, hz: u64) -> ClockDeclaration {
    ClockDeclaration {
        exact: true,
        ..clock(name, hz)
    }
}

pub fn crossing(name: &str, source: &str, sink: &str) -> CrossingDeclaration {
    let bounds = Bounds::new(1024, 1024).expect("in range");
    CrossingDeclaration {
        headroom_samples: 4.0,
        lead_ns: SECOND,
        review_horizon_ns: HOUR,
        ..CrossingDeclaration::new(id(name), id(source), id(sink), bounds)
    }
}

/// A crystal that is off by so much, with the wander of the two-layer table.
pub fn crystal(drift: f64, walk_per_root_s: f64) -> ClockModel {
    ClockModel {
        drift,
        walk_fm: walk_per_root_s * walk_per_root_s,
        ..ClockModel::crystal()
    }
}

/// A clock with the path by which it is read.
struct Device {
    declaration: ClockDeclaration,
    truth: Clock,
    path: Path,
    period_ns: i64,
    next_ns: i64,
    sequence: u64,
    /// Nothing is read from and to these times.
    silence: (i64, i64),
}

impl Device {
    /// A counter latched at its last tick, with the time of that tick read late by the path: the
    /// noise is that of the path alone, without a tick's quantisation.
    fn measure(&mut self, now: i64) -> Option<Measurement> {
        let hz = self.declaration.nominal_hz;
        let hz = *hz.numer() as f64 / *hz.denom() as f64;
        let shown = now as f64 * 1e-9 * hz + self.truth.phase_s(now) * hz;
        let count = shown.floor();
        let late_s = self.path.delay_s(now)? - (shown - count) / hz;
        let reference_ns = now + (late_s * 1e9).round() as i64;
        Some(Measurement::Counter {
            count: count as u64,
            bits: 64,
            reference_ns,
        })
    }
}

/// What truly runs at a crossing.
struct Running {
    source: usize,
    sink: usize,
    headroom: f64,
    /// Setting in force, and those under way.
    ratio: Option<f64>,
    cadence_error: f64,
    coming: Vec<(i64, Setting)>,
    /// The follower is late by this, and reports or not.
    late_ns: i64,
    reports: bool,
    at_ns: i64,
    phase: f64,
    tally: Tally,
}

/// What became of a crossing.
#[derive(Clone, Debug, Default)]
pub struct Tally {
    pub settings: Vec<Setting>,
    /// Settings with another average than the one before.
    pub changes: Vec<(i64, f64)>,
    pub states: Vec<(i64, CrossingState)>,
    /// Largest |phase| (with the cadence's own error) since the last [`World::forget`].
    pub worst: f64,
    /// Largest difference of the engine's phase from the true one since then, and the largest
    /// one in standard deviations.
    pub worst_account: f64,
}

pub struct World {
    pub engine: Engine,
    pub now: i64,
    devices: Vec<Device>,
    running: BTreeMap<Id, Running>,
    pub transitions: Vec<(i64, Transition)>,
    pub journal: Option<Vec<(Event, i64)>>,
    next_compare_ns: i64,
}

impl World {
    pub fn new() -> Self {
        World {
            engine: Engine::new(1),
            now: 0,
            devices: Vec::new(),
            running: BTreeMap::new(),
            transitions: Vec::new(),
            journal: None,
            next_compare_ns: 0,
        }
    }

    /// An exact clock: its truth has no drift, nobody reads it.
    pub fn add_exact(&mut self, name: &str, hz: u64) {
        let still = ClockModel {
            white_fm: 0.0,
            walk_fm: 0.0,
            ..ClockModel::crystal()
        };
        self.add(exact_clock(name, hz), still, Delay::None, i64::MAX);
    }

    /// A clock that is read every `period_ns` with this noise.
    pub fn add(
        &mut self,
        declaration: ClockDeclaration,
        model: ClockModel,
        delay: Delay,
        period_ns: i64,
    ) {
        let seed = 1000 + 17 * self.devices.len() as u64;
        self.add_seeded(declaration, model, delay, period_ns, seed);
    }

    pub fn add_seeded(
        &mut self,
        declaration: ClockDeclaration,
        model: ClockModel,
        delay: Delay,
        period_ns: i64,
        seed: u64,
    ) {
        self.apply(Event::DeclareClock(declaration.clone()));
        self.devices.push(Device {
            next_ns: if period_ns == i64::MAX {
                i64::MAX
            } else {
                self.now + period_ns / 2
            },
            declaration,
            truth: Clock::new(model, seed),
            path: Path::new(PathModel::new(delay), seed + 1),
            period_ns,
            sequence: 0,
            silence: (i64::MAX, i64::MAX),
        });
    }

    pub fn silence(&mut self, name: &str, from_ns: i64, to_ns: i64) {
        let device = self.device(name);
        self.devices[device].silence = (from_ns, to_ns);
    }

    fn device(&self, name: &str) -> usize {
        let found = self
            .devices
            .iter()
            .position(|d| d.declaration.id.as_str() == name);
        found.expect("the test has added it")
    }

    /// Declares a crossing and follows it.
    pub fn cross(&mut self, declaration: CrossingDeclaration) {
        let running = Running {
            source: self.device(declaration.source.as_str()),
            sink: self.device(declaration.sink.as_str()),
            headroom: declaration.headroom_samples,
            ratio: None,
            cadence_error: 0.0,
            coming: Vec::new(),
            late_ns: 0,
            reports: false,
            at_ns: self.now,
            phase: 0.0,
            tally: Tally::default(),
        };
        self.running
            .entry(declaration.id.clone())
            .or_insert(running);
        self.apply(Event::DeclareCrossing(declaration));
    }

    /// The follower of a crossing takes settings so late, and says so or not.
    pub fn follow_late(&mut self, name: &str, late_ns: i64, reports: bool) {
        let running = self
            .running
            .get_mut(&id(name))
            .expect("the test has declared it");
        (running.late_ns, running.reports) = (late_ns, reports);
    }

    /// Somebody moves the buffer by so many samples.
    pub fn move_buffer(&mut self, name: &str, samples: f64) {
        self.running
            .get_mut(&id(name))
            .expect("the test has declared it")
            .phase += samples;
    }

    pub fn phase(&mut self, name: &str) -> f64 {
        self.advance_truth();
        self.running[&id(name)].phase
    }

    pub fn tally(&self, name: &str) -> &Tally {
        &self.running[&id(name)].tally
    }

    /// Worst values count from now on.
    pub fn forget(&mut self) {
        for running in self.running.values_mut() {
            running.tally.worst = 0.0;
            running.tally.worst_account = 0.0;
        }
    }

    pub fn apply(&mut self, event: Event) -> Effects {
        if let Some(journal) = &mut self.journal {
            journal.push((event.clone(), self.now));
        }
        let effects = self
            .engine
            .apply(&event, self.now)
            .expect("the world sends good events");
        for setting in &effects.settings {
            let Some(running) = self.running.get_mut(&setting.crossing) else {
                continue;
            };
            let before = running.tally.settings.last().map(Setting::average);
            if before != Some(setting.average()) {
                running.tally.changes.push((self.now, average(setting)));
            }
            running.tally.settings.push(setting.clone());
            running
                .coming
                .push((setting.effect_ns + running.late_ns, setting.clone()));
        }
        for transition in &effects.transitions {
            if let Transition::Crossing { crossing, to, .. } = transition
                && let Some(running) = self.running.get_mut(crossing)
            {
                running.tally.states.push((self.now, *to));
            }
            self.transitions.push((self.now, transition.clone()));
        }
        effects
    }

    /// Lets time pass: readings come in, timers fire, settings take effect.
    pub fn run_until(&mut self, end_ns: i64) {
        loop {
            let reading = self
                .devices
                .iter()
                .map(|d| d.next_ns)
                .min()
                .unwrap_or(i64::MAX);
            let due = self.engine.next_due().unwrap_or(i64::MAX).max(self.now);
            let next = reading.min(due).min(self.next_effect()).min(end_ns);
            self.now = next;
            self.advance_truth();
            if next == end_ns {
                return;
            }
            self.take_effect();
            if reading == next {
                self.read();
            } else if due == next {
                self.apply(Event::Tick);
            }
            self.compare();
        }
    }

    fn next_effect(&self) -> i64 {
        let coming = self
            .running
            .values()
            .flat_map(|r| r.coming.first().map(|(at, _)| *at));
        coming.min().unwrap_or(i64::MAX)
    }

    fn take_effect(&mut self) {
        let mut reports = Vec::new();
        for running in self.running.values_mut() {
            while running
                .coming
                .first()
                .is_some_and(|(at, _)| *at <= self.now)
            {
                let (house_ns, setting) = running.coming.remove(0);
                running.ratio = Some(average(&setting));
                running.cadence_error = match setting.realised {
                    Realised::Single(_) => 0.0,
                    Realised::Cadence(cadence) => as_f64(cadence.error_bound()),
                    Realised::Stepping(stepping) => as_f64(stepping.error_bound()),
                    Realised::Lazy { swing_samples, .. } => swing_samples,
                };
                if running.reports {
                    let Setting {
                        crossing,
                        epoch,
                        number,
                        ..
                    } = setting;
                    reports.push(Event::Applied {
                        crossing,
                        epoch,
                        number,
                        house_ns,
                        sink_sample: 0,
                    });
                }
            }
        }
        for report in reports {
            self.apply(report);
        }
    }

    fn read(&mut self) {
        let (now, mut readings) = (self.now, Vec::new());
        for device in self.devices.iter_mut().filter(|d| d.next_ns == now) {
            device.next_ns += device.period_ns;
            device.sequence += 1;
            let silent = (device.silence.0..device.silence.1).contains(&now);
            let measured = device.measure(now);
            let Some(measurement) = measured.filter(|_| !silent) else {
                continue;
            };
            readings.push(Event::Reading(Reading {
                clock: device.declaration.id.clone(),
                reference: Reference::House,
                probe: "rack".to_owned(),
                sequence: device.sequence,
                measurement,
            }));
        }
        for reading in readings {
            self.apply(reading);
        }
    }

    /// Integrates the true phase errors up to now.
    fn advance_truth(&mut self) {
        let now = self.now;
        for running in self.running.values_mut() {
            let from = std::mem::replace(&mut running.at_ns, now);
            let Some(ratio) = running.ratio.filter(|_| from < now) else {
                continue;
            };
            let mut gained = |device: usize| {
                let device = &mut self.devices[device];
                let hz = device.declaration.nominal_hz;
                let hz = *hz.numer() as f64 / *hz.denom() as f64;
                let before = device.truth.phase_s(from);
                let seconds = (now - from) as f64 * 1e-9 + (device.truth.phase_s(now) - before);
                hz * seconds
            };
            running.phase += ratio * gained(running.source) - gained(running.sink);
            let out = running.phase.abs() + running.cadence_error;
            running.tally.worst = running.tally.worst.max(out);
        }
    }

    fn compare(&mut self) {
        if self.now < self.next_compare_ns {
            return;
        }
        self.next_compare_ns = self.now + 60 * SECOND;
        for (name, running) in &mut self.running {
            let Some(status) = self.engine.status(name, self.now) else {
                continue;
            };
            let off = (status.phase_error_samples - running.phase).abs();
            running.tally.worst_account = running.tally.worst_account.max(off);
        }
    }
}

fn as_f64(exact: Exact) -> f64 {
    *exact.numer() as f64 / *exact.denom() as f64
}

pub fn average(setting: &Setting) -> f64 {
    *setting.average().numer() as f64 / *setting.average().denom() as f64
}

impl World {
    /// The true phase error as of the last event.
    pub fn phase_of(&self, name: &str) -> f64 {
        self.running[&id(name)].phase
    }

    /// The stream of a crossing truly comes from this clock from now on.
    pub fn comes_from(&mut self, name: &str, source: &str) {
        self.advance_truth();
        let source = self.device(source);
        let running = self.running.get_mut(&id(name));
        running.expect("the test has declared it").source = source;
    }

    /// Clock time that a clock has truly gained on house time, s.
    pub fn gained_s(&mut self, name: &str) -> f64 {
        let device = self.device(name);
        self.devices[device].truth.phase_s(self.now)
    }
}
