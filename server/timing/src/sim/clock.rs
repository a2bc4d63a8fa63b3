//! A free-running clock with a true phase at every true time.

use num_rational::Ratio;
use serde::{Deserialize, Serialize};

use super::flicker::Flicker;
use super::random::Random;
use crate::growth::DAILY;

/// How a clock wanders. Drifts are dimensionless, times in seconds.
///
/// The drift is constant + walk + flicker + ageing·t + warm-up + daily swing + jumps; the phase is its
/// integral plus white frequency noise plus steps.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ClockModel {
    /// Constant part of the drift.
    pub drift: f64,
    /// White frequency noise: the phase walks by this variance a second, s²/s.
    pub white_fm: f64,
    /// Random walk of the drift: variance gained a second, 1/s.
    pub walk_fm: f64,
    /// Flicker frequency noise: the Allan deviation it has at any averaging time from some ten seconds
    /// to some days.
    pub flicker_fm: f64,
    /// Ageing, 1/s.
    pub ageing_per_s: f64,
    /// Warm-up after time 0.
    pub warm_up: Option<WarmUp>,
    /// Daily swing with temperature.
    pub daily: Option<Daily>,
    /// Irregular swing with the temperature around.
    pub weather: Option<Weather>,
    /// What happens to the clock, in any order.
    pub upsets: Vec<Upset>,
}

/// A drift that fades: `amplitude`·exp(−t/`time_s`).
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct WarmUp {
    /// Drift at time 0 beyond the settled one.
    pub amplitude: f64,
    /// Time constant, s, above zero.
    pub time_s: f64,
}

/// A drift that swings: `amplitude`·sin(2πt/day + `angle`).
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Daily {
    /// Amplitude.
    pub amplitude: f64,
    /// Angle at time 0, radians.
    pub angle: f64,
}

/// A drift that follows an irregular temperature: a first-order Gauss–Markov process of the
/// given correlation time, smoothed by a lag of an eighth of it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Weather {
    /// Deviation of the process before it is smoothed.
    pub deviation: f64,
    /// Correlation time, s, above zero.
    pub time_s: f64,
}

/// Something that happens to a clock at a true time.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Upset {
    /// When, ns.
    pub at_ns: i64,
    /// What.
    pub what: Disturbance,
}

/// What can happen to a clock.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Disturbance {
    /// The drift jumps by this much.
    DriftJump(f64),
    /// The clock's reading jumps by this many seconds.
    PhaseStep(f64),
}

impl Knot {
    fn total_drift(&self) -> f64 {
        self.drift + self.weather + self.flicker.drift()
    }
}

impl ClockModel {
    /// A plain crystal on its frequency, with the noise of a common one (invented figures).
    pub fn crystal() -> Self {
        ClockModel {
            drift: 0.0,
            white_fm: 1e-18,
            walk_fm: 1e-20,
            flicker_fm: 0.0,
            ageing_per_s: 0.0,
            warm_up: None,
            daily: None,
            weather: None,
            upsets: Vec::new(),
        }
    }
}

/// A clock made from a model and a seed. Ask times in any order within a second, and otherwise
/// forward: the noise is drawn once per second of true time, whatever is asked.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Clock {
    model: ClockModel,
    random: Random,
    knot: Knot,
    next: Knot,
}

/// The noisy part of the clock at a whole second.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Knot {
    second: i64,
    phase_s: f64,
    drift: f64,
    temperature: f64,
    weather: f64,
    flicker: Flicker,
}

const NS: i64 = 1_000_000_000;

impl Clock {
    /// A clock whose phase is 0 at true time 0; times before 0 count as 0.
    pub fn new(model: ClockModel, seed: u64) -> Self {
        let knot = Knot::default();
        let mut clock = Clock {
            model,
            random: Random::new(seed),
            knot,
            next: knot,
        };
        clock.next = clock.following(knot);
        clock
    }

    /// True clock time minus true time, s.
    pub fn phase_s(&mut self, at_ns: i64) -> f64 {
        self.advance(at_ns);
        let t = seconds(at_ns);
        let into = t - self.knot.second as f64;
        let mut phase = self.knot.phase_s + into * (self.next.phase_s - self.knot.phase_s);
        let m = &self.model;
        phase += t * (m.drift + 0.5 * t * m.ageing_per_s);
        if let Some(w) = m.warm_up {
            phase -= w.amplitude * w.time_s * libm::expm1(-t / w.time_s);
        }
        if let Some(d) = m.daily {
            phase += d.amplitude / DAILY * (libm::cos(d.angle) - libm::cos(DAILY * t + d.angle));
        }
        for upset in m.upsets.iter().filter(|u| u.at_ns <= at_ns) {
            phase += match upset.what {
                Disturbance::DriftJump(by) => by * seconds(at_ns - upset.at_ns),
                Disturbance::PhaseStep(by) => by,
            };
        }
        phase
    }

    /// True drift, dimensionless; positive runs fast.
    pub fn drift(&mut self, at_ns: i64) -> f64 {
        self.advance(at_ns);
        let t = seconds(at_ns);
        let into = t - self.knot.second as f64;
        let (from, to) = (self.knot.total_drift(), self.next.total_drift());
        let mut drift = from + into * (to - from);
        let m = &self.model;
        drift += m.drift + t * m.ageing_per_s;
        if let Some(w) = m.warm_up {
            drift += w.amplitude * libm::exp(-t / w.time_s);
        }
        if let Some(d) = m.daily {
            drift += d.amplitude * libm::sin(DAILY * t + d.angle);
        }
        for upset in m.upsets.iter().filter(|u| u.at_ns <= at_ns) {
            if let Disturbance::DriftJump(by) = upset.what {
                drift += by;
            }
        }
        drift
    }

    /// What the clock shows at a true time, ns.
    pub fn reading_ns(&mut self, at_ns: i64) -> i64 {
        at_ns + libm::round(self.phase_s(at_ns) * 1e9) as i64
    }

    /// Whole ticks of a nominal rate since true time 0, below 2^`bits` (1..=64).
    pub fn ticks(&mut self, nominal_hz: Ratio<u64>, bits: u32, at_ns: i64) -> u64 {
        let shown_ps = at_ns as i128 * 1000 + libm::round(self.phase_s(at_ns) * 1e12) as i128;
        let (numer, denom) = (*nominal_hz.numer() as i128, *nominal_hz.denom() as i128);
        let ticks = (shown_ps * numer).div_euclid(denom * 1_000_000_000_000);
        ticks.rem_euclid(1_i128 << bits) as u64
    }

    fn advance(&mut self, at_ns: i64) {
        let second = at_ns.max(0).div_euclid(NS);
        while self.knot.second < second {
            self.knot = self.next;
            self.next = self.following(self.knot);
        }
    }

    /// One second on: exact increments of an integrated random walk with white frequency noise.
    fn following(&mut self, knot: Knot) -> Knot {
        let m = &self.model;
        let walked = m.walk_fm.sqrt() * self.random.normal();
        let bend = (m.walk_fm / 12.0).sqrt() * self.random.normal();
        let white = m.white_fm.sqrt() * self.random.normal();
        let (temperature, weather) = match m.weather {
            None => (0.0, 0.0),
            Some(w) => {
                let keep = libm::exp(-1.0 / w.time_s);
                let fresh = w.deviation * (1.0 - keep * keep).sqrt() * self.random.normal();
                let temperature = keep * knot.temperature + fresh;
                let lag = 1.0 - libm::exp(-8.0 / w.time_s);
                (
                    temperature,
                    knot.weather + lag * (temperature - knot.weather),
                )
            }
        };
        let flicker = knot.flicker.following(m.flicker_fm, &mut self.random);
        let flickered = 0.5 * (knot.flicker.drift() + flicker.drift());
        let swung = 0.5 * (knot.weather + weather) + flickered;
        Knot {
            second: knot.second + 1,
            phase_s: knot.phase_s + knot.drift + 0.5 * walked + bend + white + swung,
            drift: knot.drift + walked,
            temperature,
            weather,
            flicker,
        }
    }
}

fn seconds(ns: i64) -> f64 {
    ns.max(0) as f64 * 1e-9
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn phase_is_the_integral_of_drift() {
        let model = ClockModel {
            drift: 2e-5,
            ageing_per_s: 1e-12,
            warm_up: Some(WarmUp {
                amplitude: 4e-6,
                time_s: 600.0,
            }),
            daily: Some(Daily {
                amplitude: 1e-6,
                angle: 1.0,
            }),
            weather: Some(Weather {
                deviation: 1e-7,
                time_s: 3600.0,
            }),
            upsets: vec![Upset {
                at_ns: 1000 * NS,
                what: Disturbance::DriftJump(3e-6),
            }],
            walk_fm: 0.0,
            white_fm: 0.0,
            flicker_fm: 0.0,
        };
        let mut clock = Clock::new(model, 1);
        let mut integral = 0.0;
        for i in 0..2000 {
            integral += clock.drift(i * NS + NS / 2);
        }
        assert!((clock.phase_s(2000 * NS) - integral).abs() < 1e-9);
    }

    #[test]
    fn noise_is_the_same_however_often_it_is_asked() {
        let mut often = Clock::new(ClockModel::crystal(), 9);
        let mut once = often.clone();
        for i in 0..10_000 {
            often.phase_s(i * NS / 10);
        }
        assert_eq!(often.phase_s(1000 * NS), once.phase_s(1000 * NS));
    }
}
