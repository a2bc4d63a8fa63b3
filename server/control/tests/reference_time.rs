//! Reference times that cannot be: what is refused, and how a link gets over what was not.

use num_rational::Ratio;
use ratewright_control::{
    ClockDeclaration, ClockEstimate, Effects, Engine, Event, Id, Reading, Reference, Refusal,
};
use ratewright_timing::{Event as TimingEvent, Measurement, Outcome, State};

const SECOND: i64 = 1_000_000_000;
const MINUTE: i64 = 60 * SECOND;
const HOUR: i64 = 60 * MINUTE;
/// The host's clock shows this much more than house time.
const HOST_NS: i64 = 1_000_000 * HOUR;

struct Desk {
    engine: Engine,
    reference: Reference,
    now: i64,
}

fn id(name: &str) -> Id {
    Id::new(name).expect("tests use good names")
}

impl Desk {
    /// A desk that runs 5 ppm fast, to be read against this reference.
    fn new(reference: Reference) -> Self {
        let mut engine = Engine::new(1);
        for (name, exact) in [("desk", false), ("host", false), ("record", true)] {
            let declaration = ClockDeclaration {
                exact,
                ..ClockDeclaration::new(id(name), Ratio::from_integer(1_000_000))
            };
            engine
                .apply(&Event::DeclareClock(declaration), 0)
                .expect("a good clock");
        }
        Desk {
            engine,
            reference,
            now: 0,
        }
    }

    fn read(&mut self, measurement: Measurement) -> Result<Effects, Refusal> {
        let reading = Reading {
            clock: id("desk"),
            reference: self.reference.clone(),
            probe: "rack".to_owned(),
            sequence: 0,
            measurement,
        };
        self.engine.apply(&Event::Reading(reading), self.now)
    }

    /// Reads the desk now, by a reference that shows `ahead_ns` more than house time.
    fn read_ahead(&mut self, ahead_ns: i64) -> Result<Effects, Refusal> {
        let seconds = (self.now / SECOND) as u64;
        let count = seconds * 1_000_005;
        self.read(counter(count, self.now + ahead_ns))
    }

    /// Reads the desk every second for so long; gives the readings that were taken.
    fn run(&mut self, seconds: usize, ahead_ns: i64) -> usize {
        (0..seconds)
            .filter(|_| {
                self.now += SECOND;
                self.read_ahead(ahead_ns).is_ok()
            })
            .count()
    }

    fn estimate(&self) -> ClockEstimate {
        let estimate = self.engine.estimate(&id("desk"), self.now);
        estimate.expect("it was declared")
    }

    /// Refuses, names the field and the value, and changes nothing.
    #[track_caller]
    fn refuses(&mut self, measurement: Measurement, field: &str) {
        let before = self.engine.clone();
        let refusal = self.read(measurement).expect_err("it cannot be");
        assert_eq!(refusal.field, field);
        assert_eq!(refusal.value, measurement.reference_ns().to_string());
        assert!(self.engine == before);
    }

    #[track_caller]
    fn is_locked_on_5_ppm(&self) {
        let estimate = self.estimate().estimate;
        assert_eq!(estimate.state, State::Locked, "{estimate:?}");
        assert!((estimate.drift - 5e-6).abs() < 1e-7, "{estimate:?}");
    }
}

fn counter(count: u64, reference_ns: i64) -> Measurement {
    Measurement::Counter {
        count,
        bits: 64,
        reference_ns,
    }
}

fn exchange(t3_ns: i64) -> Measurement {
    Measurement::Exchange {
        t1_ns: 0,
        t2_ns: 0,
        t3_ns,
        t4_ns: 0,
    }
}

#[test]
fn house_time_that_has_not_come_is_refused_and_the_next_reading_counts() {
    let mut desk = Desk::new(Reference::House);
    desk.refuses(exchange(11 * MINUTE), "measurement.t3_ns");
    assert_eq!(desk.run(300, 0), 300);
    for ahead_ns in [10 * MINUTE + 1, HOUR, i64::MAX / 2] {
        desk.refuses(counter(7, desk.now + ahead_ns), "measurement.reference_ns");
    }
    assert_eq!(desk.run(60, 0), 60);
    desk.is_locked_on_5_ppm();
}

#[test]
fn a_stretch_sent_at_once_may_run_ahead_of_house_time() {
    let mut desk = Desk::new(Reference::House);
    for second in 1..=120 {
        desk.read(counter(second * 1_000_005, second as i64 * SECOND))
            .expect("two minutes are not far");
    }
    desk.now = 120 * SECOND;
    assert_eq!(desk.run(60, 0), 60);
    // The readings are those of now, not of two minutes ago.
    desk.is_locked_on_5_ppm();
    let estimate = desk.estimate().estimate;
    assert_eq!(estimate.as_of_ns, desk.now);
}

#[test]
fn house_times_that_come_late_do_not_turn_the_clock_back() {
    let mut desk = Desk::new(Reference::House);
    desk.run(300, 0);
    let before = desk.estimate().estimate;
    // A minute of readings is kept back, and comes all at once.
    let kept_back = 301..=360;
    desk.now = 360 * SECOND;
    for second in kept_back {
        desk.read(counter(second * 1_000_005, second as i64 * SECOND))
            .expect("late, but its own time has come");
        let estimate = desk.estimate().estimate;
        assert_eq!(estimate.as_of_ns, desk.now, "after second {second}");
        // 5 ppm of a minute are 300 µs.
        let gained_ns = estimate.phase_ns - before.phase_ns;
        assert!(
            (gained_ns - 300e3).abs() < 5e3,
            "after second {second}: {gained_ns} ns"
        );
    }
}

#[test]
fn a_wrong_house_time_within_the_allowance_is_as_if_it_had_not_come() {
    let mut desk = Desk::new(Reference::House);
    desk.run(300, 0);
    desk.read_ahead(9 * MINUTE).expect("within the allowance");
    assert_eq!(desk.run(600, 0), 600);
    desk.is_locked_on_5_ppm();
    assert_eq!(desk.estimate().estimate.as_of_ns, desk.now);
}

#[test]
fn a_host_that_leaps_is_refused_while_it_is_read() {
    let mut desk = Desk::new(Reference::Clock(id("host")));
    assert_eq!(desk.run(300, HOST_NS), 300);
    desk.refuses(
        counter(7, desk.now + HOST_NS + HOUR + SECOND),
        "measurement.reference_ns",
    );
    assert_eq!(desk.run(60, HOST_NS), 60);
}

#[test]
fn a_first_reading_of_a_wrong_time_does_not_stop_a_link_for_ever() {
    for reference in ["host", "record"] {
        let mut desk = Desk::new(Reference::Clock(id(reference)));
        desk.read_ahead(HOST_NS).expect("nothing is known yet");
        assert_eq!(desk.run(600, 0), 0);
        desk.now += SECOND;
        let effects = desk.read_ahead(0).expect("the link is stuck");
        assert_eq!(effects.outcome, Some(Outcome::Event(TimingEvent::Restart)));
        assert_eq!(desk.run(300, 0), 300);
        if reference == "record" {
            desk.is_locked_on_5_ppm();
        }
    }
}

#[test]
fn a_host_that_was_set_is_followed_anew() {
    for ahead_ns in [HOST_NS + 2 * HOUR, 0] {
        let mut desk = Desk::new(Reference::Clock(id("host")));
        assert_eq!(desk.run(300, HOST_NS), 300);
        assert_eq!(desk.run(600, ahead_ns), 0);
        assert_eq!(desk.run(300, ahead_ns), 300);
    }
}

#[test]
fn a_record_against_an_exact_clock_has_its_own_time() {
    let mut desk = Desk::new(Reference::Clock(id("record")));
    for second in (1..100).chain(90_000..90_100) {
        desk.read(counter(
            second * 1_000_005,
            HOST_NS + second as i64 * SECOND,
        ))
        .expect("a record may have gaps of a day");
    }
}
