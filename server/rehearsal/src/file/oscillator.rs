//! `[host.truth]` and `[clock.truth]`: what a clock truly does.

use core::f64::consts::TAU;

use ratewright_declarations::Section;
use ratewright_timing::sim::{ClockModel, Daily, WarmUp, Weather};

use super::scalar;

const DAY_S: f64 = 86_400.0;

pub(super) fn oscillator(section: &Section<'_>) -> ClockModel {
    let mut model = ClockModel::crystal();
    section.section("truth", |keys| model = read(keys));
    model
}

fn read(keys: &Section<'_>) -> ClockModel {
    let ppm = |key, default| 1e-6 * scalar(keys, key, "-10000 to 10000 ppm", (-1e4, 1e4), default);
    let noise = |key, default| 1e-9 * scalar(keys, key, "0 to 1000000 ppb", (0.0, 1e6), default);
    let ageing = scalar(
        keys,
        "ageing_ppb_per_day",
        "-1000000 to 1000000 ppb a day",
        (-1e6, 1e6),
        0.0,
    );
    let squared = |deviation: f64| deviation * deviation;
    ClockModel {
        drift: ppm("drift_ppm", 0.0),
        white_fm: squared(noise("white_ppb", 1.0)),
        flicker_fm: noise("flicker_ppb", 0.0),
        walk_fm: squared(noise("walk_ppb", 0.1)),
        ageing_per_s: ageing * 1e-9 / DAY_S,
        warm_up: warm_up(keys),
        daily: daily(keys),
        weather: weather(keys),
        upsets: Vec::new(),
    }
}

fn daily(keys: &Section<'_>) -> Option<Daily> {
    let swing_ppm = scalar(keys, "swing_ppm", "0 to 1000 ppm", (0.0, 1_000.0), 0.0);
    let fastest_h = scalar(keys, "fastest_at_h", "0 to 24 hours", (0.0, 24.0), 12.0);
    // sin(2πt/day + angle) has its top at t = fastest.
    let angle = TAU * (0.25 - fastest_h / 24.0);
    (swing_ppm > 0.0).then_some(Daily {
        amplitude: swing_ppm * 1e-6,
        angle,
    })
}

fn weather(keys: &Section<'_>) -> Option<Weather> {
    let ppm = scalar(keys, "weather_ppm", "0 to 1000 ppm", (0.0, 1_000.0), 0.0);
    let time_s = scalar(
        keys,
        "weather_s",
        "1 to 1000000 seconds",
        (1.0, 1e6),
        3_600.0,
    );
    (ppm > 0.0).then_some(Weather {
        deviation: ppm * 1e-6,
        time_s,
    })
}

fn warm_up(keys: &Section<'_>) -> Option<WarmUp> {
    let ppm = scalar(keys, "warm_up_ppm", "-1000 to 1000 ppm", (-1e3, 1e3), 0.0);
    let time_s = scalar(keys, "warm_up_s", "1 to 1000000 seconds", (1.0, 1e6), 600.0);
    (ppm != 0.0).then_some(WarmUp {
        amplitude: ppm * 1e-6,
        time_s,
    })
}
