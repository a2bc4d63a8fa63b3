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
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, Random};

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

/// A desk that is read every second with 1 µs of noise, into an exact house of 48 kHz.
pub fn desk_into_house(drift: f64, source_hz: u64, declaration: CrossingDeclaration) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let delay = Delay::Normal { deviation_s: 1e-6 };
    world.add(
        clock("desk", source_hz),
        crystal(drift, 1e-10),
        delay,
        SECOND,
    );
    world.cross(declaration);
    world
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

/// One that reads a clock.
struct Probe {
    name: String,
    path: Path,
    /// From this time on it says that the clock runs by so much faster than it does.
    lie: (i64, f64),
}

/// A clock with those that read it.
struct Device {
    declaration: ClockDeclaration,
    truth: Clock,
    probes: Vec<Probe>,
    period_ns: i64,
    next_ns: i64,
    sequence: u64,
    /// Nothing is read from and to these times.
    silence: (i64, i64),
    /// Clock time gained on house time as of the world's now, s.
    gained_s: f64,
    /// What its counter stood at when it was last reset.
    base: f64,
}

impl Device {
    /// A counter latched at its last tick, with the time of that tick read late by the path: the
    /// noise is that of the path alone, without a tick's quantisation.
    fn measure(&mut self, probe: usize, now: i64) -> Option<Measurement> {
        let hz = self.hz();
        let probe = &mut self.probes[probe];
        let (from_ns, drift) = probe.lie;
        let lied_s = drift * (now - from_ns).max(0) as f64 * 1e-9;
        let shown = now as f64 * 1e-9 * hz + (self.gained_s + lied_s) * hz;
        let count = shown.floor();
        let late_s = probe.path.delay_s(now)? - (shown - count) / hz;
        let reference_ns = now + (late_s * 1e9).round() as i64;
        Some(Measurement::Counter {
            count: (count - self.base) as u64,
            bits: 64,
            reference_ns,
        })
    }

    fn hz(&self) -> f64 {
        let hz = self.declaration.nominal_hz;
        *hz.numer() as f64 / *hz.denom() as f64
    }
}

/// A follower that measures its buffer so often, with so much normal noise.
#[derive(Clone, Debug)]
struct Gauge {
    every_ns: i64,
    next_ns: i64,
    deviation_samples: f64,
    random: Random,
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
    /// It takes nothing it is sent.
    is_deaf: bool,
    gauge: Option<Gauge>,
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
    /// Largest difference of the engine's phase from the true one since then.
    pub worst_account: f64,
    /// When the true phase left the headroom since then, and what the engine said at that time.
    pub slips: Vec<(i64, CrossingState)>,
    slipped: bool,
}

pub struct World {
    pub engine: Engine,
    pub now: i64,
    devices: Vec<Device>,
    running: BTreeMap<Id, Running>,
    pub transitions: Vec<(i64, Transition)>,
    pub journal: Option<Vec<(Event, i64)>>,
    /// The truth is integrated up to here.
    advanced_ns: i64,
    /// When the engine's accounts are next compared with the truth.
    pub next_compare_ns: i64,
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
            advanced_ns: 0,
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
        self.add_read_by(declaration, model, PathModel::new(delay), period_ns, seed);
    }

    /// A clock that is read every `period_ns` by a path.
    pub fn add_read_by(
        &mut self,
        declaration: ClockDeclaration,
        model: ClockModel,
        path: PathModel,
        period_ns: i64,
        seed: u64,
    ) {
        self.apply(Event::DeclareClock(declaration.clone()));
        let mut truth = Clock::new(model, seed);
        self.devices.push(Device {
            next_ns: if period_ns == i64::MAX {
                i64::MAX
            } else {
                self.now + period_ns / 2
            },
            declaration,
            gained_s: truth.phase_s(self.now),
            base: 0.0,
            truth,
            probes: vec![Probe {
                name: "rack".to_owned(),
                path: Path::new(path, seed + 1),
                lie: (i64::MAX, 0.0),
            }],
            period_ns,
            sequence: 0,
            silence: (i64::MAX, i64::MAX),
        });
    }

    /// Another one reads the clock as well.
    pub fn add_probe(&mut self, name: &str, probe: &str, path: PathModel, seed: u64) {
        let device = self.device(name);
        self.devices[device].probes.push(Probe {
            name: probe.to_owned(),
            path: Path::new(path, seed),
            lie: (i64::MAX, 0.0),
        });
    }

    /// From now on the first that reads the clock says that it runs by so much faster than it does.
    pub fn lie(&mut self, name: &str, drift: f64) {
        let device = self.device(name);
        self.devices[device].probes[0].lie = (self.now, drift);
    }

    pub fn silence(&mut self, name: &str, from_ns: i64, to_ns: i64) {
        let device = self.device(name);
        self.devices[device].silence = (from_ns, to_ns);
    }

    /// The counter of a clock begins at nought again; its stream goes on.
    pub fn reset_counter(&mut self, name: &str) {
        let (device, now) = (self.device(name), self.now);
        let device = &mut self.devices[device];
        device.base = (device.hz() * (now as f64 * 1e-9 + device.gained_s)).floor();
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
            is_deaf: false,
            gauge: None,
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

    /// The follower of a crossing takes nothing any more, or again the newest setting.
    pub fn deafen(&mut self, name: &str, is_deaf: bool) {
        let running = self.running.get_mut(&id(name));
        running.expect("the test has declared it").is_deaf = is_deaf;
    }

    /// The follower of a crossing reports its level every so often, with so much noise.
    pub fn gauge(&mut self, name: &str, every_ns: i64, deviation_samples: f64, seed: u64) {
        let next_ns = self.now + every_ns;
        let random = Random::new(seed);
        let running = self.running.get_mut(&id(name));
        running.expect("the test has declared it").gauge = Some(Gauge {
            every_ns,
            next_ns,
            deviation_samples,
            random,
        });
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
            running.tally.slips.clear();
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
            self.report_levels();
            if reading == next {
                self.read();
            } else if due == next {
                self.apply(Event::Tick);
            }
            self.compare();
        }
    }

    /// When a follower next takes a setting or measures its buffer.
    fn next_effect(&self) -> i64 {
        let coming = self.running.values().map(|r| {
            let hears = r.coming.first().filter(|_| !r.is_deaf);
            let effect = hears.map_or(i64::MAX, |(at, _)| self.now.max(*at));
            effect.min(r.gauge.as_ref().map_or(i64::MAX, |gauge| gauge.next_ns))
        });
        coming.min().unwrap_or(i64::MAX)
    }

    fn report_levels(&mut self) {
        let (now, mut reports) = (self.now, Vec::new());
        for (crossing, running) in &mut self.running {
            let Some(gauge) = running.gauge.as_mut().filter(|gauge| gauge.next_ns <= now) else {
                continue;
            };
            gauge.next_ns += gauge.every_ns;
            reports.push(Event::Occupancy {
                crossing: crossing.clone(),
                level_samples: running.phase + gauge.deviation_samples * gauge.random.normal(),
                deviation_samples: gauge.deviation_samples,
                house_ns: now,
            });
        }
        for report in reports {
            self.apply(report);
        }
    }

    fn take_effect(&mut self) {
        let mut reports = Vec::new();
        for running in self.running.values_mut() {
            if running.is_deaf {
                // Of what it does not hear only the newest will be there when it hears again.
                let newest = running.coming.pop();
                running.coming = newest.into_iter().collect();
                continue;
            }
            while running
                .coming
                .first()
                .is_some_and(|(at, _)| *at <= self.now)
            {
                let (planned_ns, setting) = running.coming.remove(0);
                let house_ns = planned_ns.max(self.now);
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
            for probe in 0..device.probes.len() {
                let measured = device.measure(probe, now);
                let Some(measurement) = measured.filter(|_| !silent) else {
                    continue;
                };
                readings.push(Event::Reading(Reading {
                    clock: device.declaration.id.clone(),
                    reference: Reference::House,
                    probe: device.probes[probe].name.clone(),
                    sequence: device.sequence,
                    measurement,
                }));
            }
        }
        for reading in readings {
            self.apply(reading);
        }
    }

    /// Integrates the true phase errors up to now.
    fn advance_truth(&mut self) {
        let seconds = (self.now - self.advanced_ns) as f64 * 1e-9;
        if seconds == 0.0 {
            return;
        }
        self.advanced_ns = self.now;
        // Ticks of each device since the last time.
        let ticks = self.devices.iter_mut().map(|device| {
            let gained_s = device.truth.phase_s(self.now);
            let before_s = std::mem::replace(&mut device.gained_s, gained_s);
            device.hz() * (seconds + (gained_s - before_s))
        });
        let ticks: Vec<f64> = ticks.collect();
        for running in self.running.values_mut() {
            let Some(ratio) = running.ratio else {
                continue;
            };
            running.phase += ratio * ticks[running.source] - ticks[running.sink];
            let out = running.phase.abs() + running.cadence_error;
            let tally = &mut running.tally;
            tally.worst = tally.worst.max(out);
            let was_out = std::mem::replace(&mut tally.slipped, out > running.headroom);
            if tally.slipped && !was_out {
                let state = tally.states.last().map_or(CrossingState::Waiting, |s| s.1);
                tally.slips.push((self.now, state));
            }
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

/// A property is tried on so many cases, unless the environment asks for another number.
pub fn cases(usual: u32) -> proptest::test_runner::Config {
    let asked = proptest::test_runner::Config::default();
    let is_asked = std::env::var_os("PROPTEST_CASES").is_some();
    proptest::test_runner::Config {
        cases: if is_asked { asked.cases } else { usual },
        max_shrink_iters: 2000,
        ..asked
    }
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
    pub fn gained_s(&self, name: &str) -> f64 {
        self.devices[self.device(name)].gained_s
    }
}
