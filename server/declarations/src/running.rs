//! How a crossing runs: the keys of a `[[crossing]]` that name no clock.

use ratewright_control::{CrossingDeclaration, DEFAULT_PITCH_LIMIT_PPM, Id, Realisation};
use ratewright_ratio::Bounds;
use toml::de::DeValue;

use crate::{Section, as_id, flag, integer, number, seconds, text};

const LARGEST_BOUND: i64 = 1 << 31;

/// What these keys say; a key with a fault has its default.
pub(crate) struct Running {
    max_l: u64,
    max_m: u64,
    headroom_samples: f64,
    realisation: Realisation,
    group: Option<Id>,
    lead_ns: i64,
    review_horizon_ns: i64,
    least_hold_ns: i64,
    pitch_limit_ppm: f64,
    silent: bool,
}

impl Default for Running {
    fn default() -> Self {
        Self {
            max_l: 1_024,
            max_m: 1_024,
            headroom_samples: 1.0,
            realisation: Realisation::Cadence,
            group: None,
            lead_ns: 1_000_000_000,
            review_horizon_ns: 86_400_000_000_000,
            least_hold_ns: 0,
            pitch_limit_ppm: DEFAULT_PITCH_LIMIT_PPM,
            silent: false,
        }
    }
}

impl Running {
    pub(crate) fn read(section: &Section<'_>) -> Self {
        let mut it = Self::default();
        let bound = |value: &_| integer(value, 1, LARGEST_BOUND).map(i64::unsigned_abs);
        section.set("max_l", "1 to 2147483648", &mut it.max_l, bound);
        section.set("max_m", "1 to 2147483648", &mut it.max_m, bound);
        section.set(
            "headroom_samples",
            "above 0 to 1000000000 sink samples",
            &mut it.headroom_samples,
            |value| number(value, f64::MIN_POSITIVE, 1e9),
        );
        section.set(
            "realisation",
            "\"single\", \"cadence\", \"stepping\" or \"lazy\"",
            &mut it.realisation,
            realisation,
        );
        section.set("group", Id::ACCEPTED, &mut it.group, |value| {
            as_id(value).map(Some)
        });
        let span = |key, accepted, place, least_s, most_s| {
            section.set(key, accepted, place, |value| {
                seconds(value, least_s, most_s)
            });
        };
        span(
            "lead_s",
            "0.001 to 60 seconds",
            &mut it.lead_ns,
            0.001,
            60.0,
        );
        span(
            "review_horizon_s",
            "10 to 2592000 seconds",
            &mut it.review_horizon_ns,
            10.0,
            2_592_000.0,
        );
        span(
            "least_hold_s",
            "0 to 3600 seconds",
            &mut it.least_hold_ns,
            0.0,
            3_600.0,
        );
        section.set(
            "pitch_limit_ppm",
            "0.1 to 1000 ppm",
            &mut it.pitch_limit_ppm,
            |value| number(value, 0.1, 1_000.0),
        );
        section.set("silent", "true or false", &mut it.silent, flag);
        it
    }

    /// The declaration of a crossing that runs so.
    pub(crate) fn between(self, id: Id, source: Id, sink: Id) -> CrossingDeclaration {
        let bounds =
            Bounds::new(self.max_l, self.max_m).expect("2^31 is within what the ratio crate takes");
        CrossingDeclaration {
            headroom_samples: self.headroom_samples,
            realisation: self.realisation,
            group: self.group,
            lead_ns: self.lead_ns,
            review_horizon_ns: self.review_horizon_ns,
            least_hold_ns: self.least_hold_ns,
            pitch_limit_ppm: self.pitch_limit_ppm,
            silent: self.silent,
            ..CrossingDeclaration::new(id, source, sink, bounds)
        }
    }
}

fn realisation(value: &DeValue<'_>) -> Option<Realisation> {
    match text(value)? {
        "single" => Some(Realisation::Single),
        "cadence" => Some(Realisation::Cadence),
        "stepping" => Some(Realisation::Stepping),
        "lazy" => Some(Realisation::Lazy),
        _ => None,
    }
}
