//! The clocks of the sample facility.

use core::f64::consts::FRAC_PI_2;

use num_rational::Ratio;
use ratewright_control::ClockDeclaration;
use ratewright_timing::sim::{ClockModel, Daily, Disturbance, Period, Upset};

use super::{FERRY_OUTAGE, GRAMOPHONE_STEP_AT_NS, GRAMOPHONE_STEP_BY_S, S, id};
use crate::{
    link::{Delay, Link},
    plan::{Device, DeviceReading, Host},
};

/// A latch in a driver's interrupt: a few microseconds, and now and then a busy machine.
const LATCH: Delay = Delay {
    least_ns: 1_500,
    queue_ns: 2_500.0,
    burst_share: 0.02,
    burst_ns: 60_000.0,
};

pub(super) fn hosts() -> Vec<Host> {
    let cable = link(Delay::calm(95_000, 12_000.0), Vec::new());
    let busy = Delay {
        burst_share: 0.05,
        burst_ns: 300_000.0,
        ..Delay::calm(120_000, 25_000.0)
    };
    let radio = Delay {
        burst_share: 0.10,
        burst_ns: 2e6,
        ..Delay::calm(2_100_000, 150_000.0)
    };
    vec![
        host(
            "host-tower",
            "Host in the clock tower",
            crystal(1.8, 0.3),
            3_200_000,
            cable,
        ),
        host(
            "host-cellar",
            "Host in the cellar",
            crystal(-11.4, 0.2),
            -740_000,
            link(busy, Vec::new()),
        ),
        host(
            "host-attic",
            "Host in the attic",
            crystal(6.7, 0.9),
            18_000_000,
            link(busy, Vec::new()),
        ),
        host(
            "host-ferry",
            "Host aboard the night ferry",
            crystal(23.5, 0.6),
            -41_000_000,
            link(radio, vec![FERRY_OUTAGE]),
        ),
    ]
}

pub(super) fn exact() -> Vec<ClockDeclaration> {
    let mut word = clock(
        "house-word",
        "House word clock",
        Ratio::from_integer(48_000),
    );
    word.exact = true;
    word.tolerance_ppm = 0.0;
    vec![word]
}

pub(super) fn devices() -> Vec<Device> {
    let whole = Ratio::from_integer;
    let counter = DeviceReading::Counter {
        bits: 64,
        latch: LATCH,
    };
    let narrow = DeviceReading::Counter {
        bits: 32,
        latch: LATCH,
    };
    let bench = DeviceReading::Frequency { deviation: 2e-8 };
    let mut gramophone = crystal(-38.2, 0.8);
    gramophone.upsets.push(Upset {
        at_ns: GRAMOPHONE_STEP_AT_NS,
        what: Disturbance::PhaseStep(GRAMOPHONE_STEP_BY_S),
    });
    vec![
        device(
            "hall-stage",
            "Stage boxes, dance hall",
            whole(96_000),
            crystal(4.1, 0.4),
            "host-tower",
            counter,
        ),
        device(
            "hall-desk",
            "Mixing desk, dance hall",
            whole(48_000),
            crystal(-7.9, 0.4),
            "host-tower",
            counter,
        ),
        device(
            "multiplex",
            "Multiplexer",
            whole(27_000_000),
            oven(0.31),
            "host-tower",
            counter,
        ),
        device(
            "dish",
            "Dish receiver, recovered clock",
            whole(27_000_000),
            oven(-0.12),
            "host-tower",
            bench,
        ),
        device(
            "news-desk",
            "News desk",
            whole(48_000),
            crystal(15.6, 0.3),
            "host-cellar",
            narrow,
        ),
        device(
            "web-stream",
            "Encoder of the web stream",
            whole(44_100),
            crystal(11.3, 0.3),
            "host-cellar",
            counter,
        ),
        device(
            "picture-lock",
            "Picture lock",
            whole(25),
            oven(0.88),
            "host-cellar",
            bench,
        ),
        device(
            "guest-pictures",
            "Pictures from abroad",
            Ratio::new(30_000, 1001),
            crystal(-3.4, 0.2),
            "host-cellar",
            bench,
        ),
        device(
            "gramophone",
            "Gramophone transfer",
            whole(44_100),
            gramophone,
            "host-attic",
            counter,
        ),
        device(
            "film-sound",
            "Sound follower of the film table",
            Ratio::new(48_000_000, 1001),
            crystal(29.0, 1.1),
            "host-attic",
            counter,
        ),
        device(
            "ferry-desk",
            "Desk aboard the ferry",
            whole(48_000),
            crystal(-19.7, 0.9),
            "host-ferry",
            counter,
        ),
        device(
            "ferry-talkback",
            "Talkback aboard the ferry",
            whole(32_000),
            crystal(44.0, 0.9),
            "host-ferry",
            narrow,
        ),
    ]
}

/// A plain crystal: `drift_ppm` off, with a daily swing each way of `swing_ppm`, fastest in the middle of
/// the day that begins with the facility.
fn crystal(drift_ppm: f64, swing_ppm: f64) -> ClockModel {
    ClockModel {
        drift: drift_ppm * 1e-6,
        walk_fm: 9e-20,
        daily: Some(Daily {
            amplitude: swing_ppm * 1e-6,
            angle: -FRAC_PI_2,
        }),
        ..ClockModel::crystal()
    }
}

/// A crystal in an oven.
fn oven(drift_ppm: f64) -> ClockModel {
    ClockModel {
        white_fm: 1e-20,
        walk_fm: 1e-22,
        ..crystal(drift_ppm, 0.005)
    }
}

fn link(delay: Delay, outages: Vec<Period>) -> Link {
    let back = Delay {
        least_ns: delay.least_ns + 7_000,
        ..delay
    };
    Link {
        there: delay,
        back,
        loss: 0.005,
        outages,
        congestions: Vec::new(),
    }
}

fn host(name: &str, title: &str, oscillator: ClockModel, ahead_ns: i64, link: Link) -> Host {
    let clock = clock(name, title, Ratio::from_integer(1_000_000_000));
    Host {
        clock,
        oscillator,
        ahead_ns,
        link,
        exchange_every_ns: S,
    }
}

fn device(
    name: &str,
    title: &str,
    nominal_hz: Ratio<u64>,
    oscillator: ClockModel,
    host: &str,
    reading: DeviceReading,
) -> Device {
    let every_ns = match reading {
        DeviceReading::Frequency { .. } => 2 * S,
        _ => S,
    };
    Device {
        clock: clock(name, title, nominal_hz),
        oscillator,
        host: id(host),
        every_ns,
        reading,
        resets_ns: Vec::new(),
    }
}

fn clock(name: &str, title: &str, nominal_hz: Ratio<u64>) -> ClockDeclaration {
    ClockDeclaration {
        display_name: title.to_owned(),
        tolerance_ppm: 100.0,
        ..ClockDeclaration::new(id(name), nominal_hz)
    }
}
