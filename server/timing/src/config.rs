//! What is known of a link before anything is measured.

use num_rational::Ratio;
use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::oscillator::Oscillator;

/// What is known of a link before anything is measured.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct LinkConfig {
    /// Nominal rate of the clock, Hz, above zero; its denominator at most 1,000,000.
    pub nominal_hz: Ratio<u64>,
    /// Bound on the drift that its maker or standard states, ppm, above zero and at most
    /// 100,000: taken as a 95 % interval around zero. Absent: that of the oscillator kind.
    pub tolerance_ppm: Option<f64>,
    /// Kind of oscillator: sets the prior of drift and of its wander.
    pub oscillator: Oscillator,
    /// Which way a one-way reading errs when it is not punctual.
    pub latency_tail: LatencyTail,
    /// True step of what is read, s, above zero and at most 1, where it is not a tick of
    /// `nominal_hz`: a counter that moves by whole periods of a device, say, or a count that is
    /// latched when it changes, whose time is then as fine as the reference's timestamps.
    pub quantum_s: Option<f64>,
    /// Half-width of the 95 % interval at which the estimate counts as locked, dimensionless,
    /// above zero and at most 1e-5 (default 1e-7 = 0.1 ppm).
    pub lock_half_width: f64,
}

/// Which way a one-way reading errs when it is not punctual.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub enum LatencyTail {
    /// The reference is read late after the counter, or the report arrives late: what happens
    /// when the counter is latched first.
    #[default]
    ReferenceLate,
    /// The counter is read late after the reference.
    CounterLate,
}

impl LatencyTail {
    /// s in e = s(clock − reference − …): lateness is positive e.
    pub(crate) fn sign(self) -> f64 {
        match self {
            LatencyTail::ReferenceLate => -1.0,
            LatencyTail::CounterLate => 1.0,
        }
    }
}

/// A declaration that no link can be made of.
#[derive(Clone, Debug, PartialEq, Error)]
#[error("{field} is {value}: accepted is {accepted}")]
pub struct ConfigError {
    /// Name of the field.
    pub field: &'static str,
    /// Its value.
    pub value: String,
    /// What would be accepted.
    pub accepted: &'static str,
}

impl LinkConfig {
    /// A plain crystal of the given rate, with nothing else declared.
    pub fn new(nominal_hz: Ratio<u64>) -> Self {
        LinkConfig {
            nominal_hz,
            tolerance_ppm: None,
            oscillator: Oscillator::default(),
            latency_tail: LatencyTail::default(),
            quantum_s: None,
            lock_half_width: 1e-7,
        }
    }

    /// Declares the tolerance in ppm.
    pub fn with_tolerance_ppm(mut self, tolerance_ppm: f64) -> Self {
        self.tolerance_ppm = Some(tolerance_ppm);
        self
    }

    /// Declares the kind of oscillator.
    pub fn with_oscillator(mut self, oscillator: Oscillator) -> Self {
        self.oscillator = oscillator;
        self
    }

    /// Standard deviation of the drift before anything is measured, ppm.
    pub(crate) fn prior_deviation_ppm(&self) -> f64 {
        match self.tolerance_ppm {
            Some(tolerance) => tolerance / crate::normal::Z95,
            None => self.oscillator.prior_deviation_ppm(),
        }
    }

    pub(crate) fn check(&self) -> Result<(), ConfigError> {
        let refuse = |field, value: String, accepted| {
            Err(ConfigError {
                field,
                value,
                accepted,
            })
        };
        let (numer, denom) = (*self.nominal_hz.numer(), *self.nominal_hz.denom());
        if numer == 0 || denom == 0 || denom > 1_000_000 || numer / denom > 1_000_000_000_000 {
            return refuse(
                "nominal_hz",
                format!("{numer}/{denom}"),
                "a rate above 0 and up to 1e12 Hz with a denominator up to 1000000",
            );
        }
        if let Some(tolerance) = self.tolerance_ppm
            && !(tolerance > 0.0 && tolerance <= 100_000.0)
        {
            return refuse(
                "tolerance_ppm",
                tolerance.to_string(),
                "above 0, at most 100000",
            );
        }
        if let Some(quantum) = self.quantum_s
            && !(quantum > 0.0 && quantum <= 1.0)
        {
            return refuse("quantum_s", quantum.to_string(), "above 0, at most 1");
        }
        if !(self.lock_half_width > 0.0 && self.lock_half_width <= 1e-5) {
            let value = self.lock_half_width.to_string();
            return refuse("lock_half_width", value, "above 0, at most 1e-5");
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_bad_field_is_named_with_its_value_and_what_would_do() {
        let good = LinkConfig::new(Ratio::from_integer(48_000));
        assert_eq!(good.check(), Ok(()));
        let bad = [
            (
                "nominal_hz",
                LinkConfig {
                    nominal_hz: Ratio::from_integer(0),
                    ..good.clone()
                },
            ),
            (
                "nominal_hz",
                LinkConfig {
                    nominal_hz: Ratio::new(1, 1_000_001),
                    ..good.clone()
                },
            ),
            ("tolerance_ppm", good.clone().with_tolerance_ppm(f64::NAN)),
            ("tolerance_ppm", good.clone().with_tolerance_ppm(-1.0)),
            (
                "quantum_s",
                LinkConfig {
                    quantum_s: Some(0.0),
                    ..good.clone()
                },
            ),
            (
                "lock_half_width",
                LinkConfig {
                    lock_half_width: f64::INFINITY,
                    ..good.clone()
                },
            ),
        ];
        for (field, config) in bad {
            let error = config.check().unwrap_err();
            assert_eq!(error.field, field);
            assert!(error.to_string().starts_with(field), "{error}");
        }
    }
}
