//! `[host.link]`, `[clock.latch]` and `[crossing.follower]`.

use ratewright_control::Id;
use ratewright_declarations::{Section, flag, integer};

use super::{nanoseconds, scalar};
use crate::{
    follower::{Follower, Levels},
    link::{Delay, Link},
};

const US: &str = "0 to 10000000 µs";
const PERCENT: &str = "0 to 99 %";

pub(super) fn link(section: &Section<'_>) -> Link {
    let mut link = of_delay(Delay::calm(100_000, 20_000.0), 0.0, 0.0);
    section.section("link", |keys| {
        let there = delay(keys, Delay::calm(100_000, 20_000.0));
        let asymmetry_us = scalar(
            keys,
            "asymmetry_us",
            "-10000000 to 10000000 µs",
            (-1e7, 1e7),
            0.0,
        );
        let loss = scalar(keys, "loss_percent", PERCENT, (0.0, 99.0), 0.0) / 100.0;
        link = of_delay(there, asymmetry_us, loss);
    });
    link
}

/// The way back takes longer by the asymmetry, or, if that is negative, the way there by as much.
fn of_delay(delay: Delay, asymmetry_us: f64, loss: f64) -> Link {
    let longer = |us: f64| Delay {
        least_ns: delay.least_ns + (us.max(0.0) * 1e3) as i64,
        ..delay
    };
    Link {
        there: longer(-asymmetry_us),
        back: longer(asymmetry_us),
        loss,
        outages: Vec::new(),
        congestions: Vec::new(),
    }
}

/// A driver's interrupt, unless the file says otherwise.
pub(super) fn latch(section: &Section<'_>) -> Delay {
    let usual = Delay::calm(1_500, 2_500.0);
    let mut latch = usual;
    section.section("latch", |keys| latch = delay(keys, usual));
    latch
}

fn delay(keys: &Section<'_>, usual: Delay) -> Delay {
    let us = |key, default_ns: f64| 1e3 * scalar(keys, key, US, (0.0, 1e7), default_ns * 1e-3);
    Delay {
        least_ns: us("least_us", usual.least_ns as f64) as i64,
        queue_ns: us("jitter_us", usual.queue_ns),
        burst_share: scalar(keys, "burst_percent", PERCENT, (0.0, 99.0), 0.0) / 100.0,
        burst_ns: us("burst_us", 0.0),
    }
}

/// A follower whose crossing is not known yet.
pub(super) struct Nameless {
    block_samples: u32,
    delivery_s: f64,
    says_applied: bool,
    levels: Option<Levels>,
}

pub(super) fn follower(section: &Section<'_>) -> Nameless {
    let mut follower = Nameless {
        block_samples: 480,
        delivery_s: 0.05,
        says_applied: true,
        levels: None,
    };
    section.section("follower", |keys| read_follower(keys, &mut follower));
    follower
}

fn read_follower(keys: &Section<'_>, follower: &mut Nameless) {
    keys.set(
        "block_samples",
        "1 to 1000000 sink samples",
        &mut follower.block_samples,
        |value| integer(value, 1, 1_000_000)?.try_into().ok(),
    );
    follower.delivery_s = scalar(
        keys,
        "delivery_ms",
        "0 to 60000 ms",
        (0.0, 6e4),
        1e3 * follower.delivery_s,
    ) * 1e-3;
    keys.set(
        "says_applied",
        "true or false",
        &mut follower.says_applied,
        flag,
    );
    let mut every_s = None;
    keys.set(
        "level_every_s",
        "0.1 to 86400 seconds",
        &mut every_s,
        |value| ratewright_declarations::number(value, 0.1, 86_400.0).map(Some),
    );
    let deviation_samples = scalar(
        keys,
        "level_deviation_samples",
        "0.001 to 1000000 samples",
        (1e-3, 1e6),
        0.3,
    );
    follower.levels = every_s.map(|every_s| Levels {
        every_ns: nanoseconds(every_s),
        deviation_samples,
    });
}

impl Nameless {
    pub(super) fn of(self, crossing: Id) -> Follower {
        Follower {
            crossing,
            block_samples: self.block_samples,
            delivery_ns: nanoseconds(self.delivery_s),
            stuck: Vec::new(),
            says_applied: self.says_applied,
            levels: self.levels,
        }
    }
}
