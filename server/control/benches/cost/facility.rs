//! A facility of any size, all of whose source clocks are read alike.

use num_rational::Ratio;
use ratewright_control::{
    ClockDeclaration, CrossingDeclaration, Engine, Event, Id, Reading, Reference,
};
use ratewright_ratio::Bounds;
use ratewright_timing::Measurement;
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, probe};

const SECOND: i64 = 1_000_000_000;
/// Crossings of one source clock.
pub(crate) const CROSSINGS_A_CLOCK: usize = 16;
/// Readings until the clocks are locked and their noise is learned.
const WARM_UP: usize = 400;
/// Settings that a crossing has had when it is weighed: as many as its timeline keeps.
const SETTINGS: usize = 5;
/// Crossings are decided half a second after clocks are looked at.
const HALF: i64 = SECOND / 2;

/// The engine with what is needed to keep it busy.
pub(crate) struct Facility {
    engine: Engine,
    now: i64,
    /// What every clock shows second by second.
    readings: Vec<Measurement>,
    sources: Vec<Id>,
    sinks: Vec<Id>,
    /// Next reading: its row, and the clock it is of.
    row: usize,
    turn: usize,
}

fn id(kind: char, number: usize) -> Id {
    Id::new(&format!("{kind}-{number:06}")).expect("a good name")
}

/// A clock that is 12 ppm fast, read with 20 µs of noise.
fn readings() -> Vec<Measurement> {
    let model = ClockModel {
        drift: 12e-6,
        ..ClockModel::crystal()
    };
    let delay = Delay::Normal { deviation_s: 20e-6 };
    let (mut clock, mut path) = (Clock::new(model, 1), Path::new(PathModel::new(delay), 2));
    let hz = Ratio::from_integer(44_100);
    // Those beyond the warm-up come in at once, from up to ten minutes ahead of house time.
    let seconds = 1..=(WARM_UP as i64 + 500);
    seconds
        .filter_map(|second| probe::counter(&mut clock, &mut path, hz, 64, second * SECOND))
        .collect()
}

fn clock(id: &Id, hz: u64, exact: bool) -> Event {
    Event::DeclareClock(ClockDeclaration {
        exact,
        ..ClockDeclaration::new(id.clone(), Ratio::from_integer(hz))
    })
}

impl Facility {
    /// Nothing is declared yet of so many clocks that will be read, and as many exact ones.
    pub(crate) fn new(count: usize) -> Self {
        Facility {
            engine: Engine::new(1),
            now: 0,
            readings: readings(),
            sources: (0..count).map(|i| id('c', i)).collect(),
            sinks: (0..count).map(|i| id('s', i)).collect(),
            row: 0,
            turn: 0,
        }
    }

    /// Declares the clocks.
    pub(crate) fn declare(&mut self) {
        for i in 0..self.sources.len() {
            let source = clock(&self.sources[i], 44_100, false);
            let sink = clock(&self.sinks[i], 48_000, true);
            [source, sink].iter().for_each(|event| self.apply(event));
        }
    }

    fn apply(&mut self, event: &Event) {
        self.engine
            .apply(event, self.now)
            .expect("a benchmark sends good events");
    }

    /// Reads every clock until it is locked.
    pub(crate) fn warm_up(&mut self) {
        for row in 1..=WARM_UP {
            self.now = row as i64 * SECOND;
            self.read(self.sources.len());
        }
        self.settle();
    }

    /// Takes so many readings, clock by clock and second by second. House time stands still.
    pub(crate) fn read(&mut self, count: usize) {
        for _ in 0..count {
            let row = self.row.min(self.readings.len() - 1);
            let reading = Reading {
                clock: self.sources[self.turn].clone(),
                reference: Reference::House,
                probe: "rack".to_owned(),
                sequence: 0,
                measurement: self.readings[row],
            };
            self.apply(&Event::Reading(reading));
            self.turn += 1;
            if self.turn == self.sources.len() {
                (self.turn, self.row) = (0, self.row + 1);
            }
        }
    }

    /// Declares crossings and has each decided as often as its timeline is long.
    pub(crate) fn cross(&mut self, count: usize) {
        let bounds = Bounds::new(1024, 1024).expect("in range");
        self.now += HALF;
        for round in 0..SETTINGS {
            for i in 0..count {
                let clock = i / CROSSINGS_A_CLOCK;
                let (source, sink) = (&self.sources[clock], &self.sinks[clock]);
                let event = Event::DeclareCrossing(CrossingDeclaration {
                    headroom_samples: 1000.0 + round as f64,
                    ..CrossingDeclaration::new(id('x', i), source.clone(), sink.clone(), bounds)
                });
                self.apply(&event);
            }
            self.tick_until_idle();
            self.now += 10 * SECOND;
        }
        self.now -= 10 * SECOND;
    }

    fn tick_until_idle(&mut self) -> usize {
        let mut ticks = 0;
        while self.engine.next_due().is_some_and(|due| due <= self.now) {
            self.apply(&Event::Tick);
            ticks += 1;
        }
        ticks
    }

    /// Does what is due, up to just before crossings are due again.
    pub(crate) fn settle(&mut self) {
        self.tick_until_idle();
        self.now += 10 * SECOND - HALF / 2;
        self.tick_until_idle();
        self.now += HALF / 2;
    }

    /// Decides all crossings, all of which are due; gives how many there were.
    pub(crate) fn decide_all(&mut self) -> usize {
        let before = self.engine.crossings().count();
        self.tick_until_idle();
        before
    }

    /// One event's worth of decisions.
    pub(crate) fn decide_once(&mut self) {
        self.apply(&Event::Tick);
    }
}
