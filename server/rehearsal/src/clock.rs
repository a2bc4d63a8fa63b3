//! A simulated clock: what its oscillator truly does.

use core::f64::consts::TAU;

use serde::{Deserialize, Serialize};

use crate::dice::Dice;

/// Nanoseconds in a second.
pub(crate) const NS_PER_S: f64 = 1e9;
/// The drift is drawn at whole seconds and is linear in between.
const CELL_NS: i64 = 1_000_000_000;
const DAY_S: f64 = 86_400.0;

/// How an oscillator behaves. Drifts are dimensionless (1e-6 is one part per million, positive runs
/// fast); times are since the facility's origin.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Oscillator {
    /// Drift at the origin, without the daily swing.
    pub drift: f64,
    /// Random walk of the drift: its standard deviation grows by this per square root of a second.
    pub walk_per_root_s: f64,
    /// Half the daily swing of the drift with temperature.
    pub daily_swing: f64,
    /// When in the day the drift is highest, s.
    pub daily_peak_s: f64,
    /// What goes wrong, and when.
    pub faults: Vec<Fault>,
}

/// Something that goes wrong with a clock. Times are ns since the facility's origin.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Fault {
    /// The clock jumps: from `at_ns` on it shows `by_ns` more.
    PhaseStep {
        /// When.
        at_ns: i64,
        /// By how much, ns; negative falls back.
        by_ns: f64,
    },
    /// The rate jumps: from `at_ns` on the drift is larger by `by`.
    RateStep {
        /// When.
        at_ns: i64,
        /// By how much, dimensionless.
        by: f64,
    },
    /// Nothing can be read from the clock in `from_ns..until_ns`; it runs on.
    Silence {
        /// First instant without readings.
        from_ns: i64,
        /// First instant with readings again.
        until_ns: i64,
    },
}

impl Oscillator {
    /// A clock that is off by a constant drift.
    pub fn steady(drift: f64) -> Self {
        Self {
            drift,
            walk_per_root_s: 0.0,
            daily_swing: 0.0,
            daily_peak_s: 0.0,
            faults: Vec::new(),
        }
    }

    /// True while the clock can be read.
    pub(crate) fn readable_at(&self, at_ns: i64) -> bool {
        !self.faults.iter().any(|fault| {
            matches!(*fault, Fault::Silence { from_ns, until_ns } if (from_ns..until_ns).contains(&at_ns))
        })
    }

    fn swing(&self, at_s: f64) -> f64 {
        self.daily_swing * libm::cos(TAU * (at_s - self.daily_peak_s) / DAY_S)
    }
}

/// The true condition of a clock at an instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Truth {
    /// Clock time minus house time, ns, counted from the origin.
    pub phase_ns: f64,
    /// Drift, dimensionless.
    pub drift: f64,
}

/// A walk along a clock's life, forwards.
///
/// The path is a function of the seed alone: two walkers of the same clock agree wherever they meet,
/// whatever steps they took. Each reader of a clock keeps its own.
#[derive(Clone, Debug)]
pub(crate) struct Walker {
    oscillator: Oscillator,
    dice: Dice,
    cell: i64,
    walked: f64,
    start: Truth,
    end_drift: f64,
}

impl Walker {
    pub(crate) fn new(oscillator: Oscillator, dice: Dice) -> Self {
        let drift = oscillator.drift + oscillator.swing(0.0);
        let start = Truth {
            phase_ns: 0.0,
            drift,
        };
        let mut walker = Self {
            oscillator,
            dice,
            cell: 0,
            walked: 0.0,
            start,
            end_drift: 0.0,
        };
        walker.draw_end();
        walker
    }

    /// The clock at `at_ns` ≥ 0 since the origin, which must not lie before the second of the latest question.
    pub(crate) fn at(&mut self, at_ns: i64) -> Truth {
        while at_ns >= (self.cell + 1) * CELL_NS {
            self.next_cell();
        }
        let within_ns = at_ns - self.cell * CELL_NS;
        debug_assert!(within_ns >= 0, "a walker does not go back");
        let calm = self.within(within_ns as f64);
        self.with_faults(calm, at_ns)
    }

    /// The drift is linear within a cell, so the phase is quadratic.
    fn within(&self, within_ns: f64) -> Truth {
        let slope = (self.end_drift - self.start.drift) / CELL_NS as f64;
        Truth {
            phase_ns: self.start.phase_ns
                + within_ns * (self.start.drift + 0.5 * slope * within_ns),
            drift: self.start.drift + slope * within_ns,
        }
    }

    fn with_faults(&self, calm: Truth, at_ns: i64) -> Truth {
        self.oscillator
            .faults
            .iter()
            .fold(calm, |truth, fault| match *fault {
                Fault::PhaseStep { at_ns: from, by_ns } if at_ns >= from => Truth {
                    phase_ns: truth.phase_ns + by_ns,
                    ..truth
                },
                Fault::RateStep { at_ns: from, by } if at_ns >= from => Truth {
                    phase_ns: truth.phase_ns + by * (at_ns - from) as f64,
                    drift: truth.drift + by,
                },
                _ => truth,
            })
    }

    fn next_cell(&mut self) {
        self.start = self.within(CELL_NS as f64);
        self.cell += 1;
        self.draw_end();
    }

    fn draw_end(&mut self) {
        if self.oscillator.walk_per_root_s != 0.0 {
            self.walked +=
                self.oscillator.walk_per_root_s * self.dice.normal(self.cell.unsigned_abs());
        }
        let end_s = (self.cell + 1) as f64 * CELL_NS as f64 / NS_PER_S;
        self.end_drift = self.oscillator.drift + self.walked + self.oscillator.swing(end_s);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const S: i64 = 1_000_000_000;

    fn wandering() -> Oscillator {
        Oscillator {
            walk_per_root_s: 1e-9,
            daily_swing: 5e-7,
            daily_peak_s: 40_000.0,
            faults: vec![
                Fault::PhaseStep {
                    at_ns: 50 * S,
                    by_ns: 1e6,
                },
                Fault::RateStep {
                    at_ns: 80 * S,
                    by: 2e-6,
                },
            ],
            ..Oscillator::steady(2e-5)
        }
    }

    #[test]
    fn the_path_does_not_depend_on_the_steps_taken() {
        let dice = Dice::new(3).named("kiln");
        let mut fine = Walker::new(wandering(), dice);
        let mut coarse = Walker::new(wandering(), dice);
        for step in 0..1_000 {
            fine.at(step * S / 10);
        }
        assert_eq!(fine.at(100 * S + 7), coarse.at(100 * S + 7));
    }

    #[test]
    fn phase_is_the_integral_of_drift() {
        let mut walker = Walker::new(wandering(), Dice::new(3).named("kiln"));
        let step_ns = S / 100;
        let mut integral = 0.0;
        for step in 0..2_000 {
            integral += walker.at(step * step_ns + step_ns / 2).drift * step_ns as f64;
        }
        let phase = walker.at(20 * S).phase_ns;
        assert!(
            (phase - integral).abs() < 1e-6,
            "phase {phase} ns, integral {integral} ns"
        );
    }

    #[test]
    fn faults_show_when_they_should() {
        let faults = wandering().faults;
        let mut walker = Walker::new(
            Oscillator {
                faults,
                ..Oscillator::steady(0.0)
            },
            Dice::new(1),
        );
        assert_eq!(walker.at(50 * S - 1).phase_ns, 0.0);
        assert_eq!(walker.at(50 * S).phase_ns, 1e6);
        let late = walker.at(90 * S);
        assert_eq!(late.drift, 2e-6);
        assert!((late.phase_ns - (1e6 + 2e4)).abs() < 1e-6, "{late:?}");
    }

    #[test]
    fn a_silent_clock_cannot_be_read() {
        let silence = Fault::Silence {
            from_ns: 10,
            until_ns: 20,
        };
        let oscillator = Oscillator {
            faults: vec![silence],
            ..Oscillator::steady(0.0)
        };
        let readable: Vec<_> = [9, 10, 19, 20].map(|at| oscillator.readable_at(at)).into();
        assert_eq!(readable, [true, false, false, true]);
    }
}
