//! Clocks and crossings.

use ratewright_proto::v1;
use ratewright_ratio::Bounds;

use super::fraction::{rate, to_rate};
use super::name::{clock_name, crossing_name, id_of, optional_id, optional_reference};
use super::{WireError, required};
use crate::{
    Clock, ClockDeclaration, Crossing, CrossingDeclaration, CrossingState, CrossingStatus,
    Estimate, EstimateState, LatencyTail, Oscillator, Pin, Realisation,
};

impl From<&ClockDeclaration> for v1::Clock {
    fn from(declaration: &ClockDeclaration) -> Self {
        Self {
            name: clock_name(&declaration.id),
            display_name: declaration.display_name.clone(),
            nominal_rate: Some(to_rate(declaration.nominal_hz)),
            exact: declaration.exact,
            tolerance_ppm: declaration.tolerance_ppm.unwrap_or_default(),
            oscillator: oscillator_to_wire(declaration.oscillator).into(),
            tail: tail_to_wire(declaration.tail).into(),
            quantum_ns: declaration.quantum_ns.unwrap_or_default(),
            statistics: declaration.statistics,
            estimate: None,
            etag: String::new(),
            fault: String::new(),
        }
    }
}

fn oscillator_to_wire(oscillator: Option<Oscillator>) -> v1::Oscillator {
    match oscillator {
        None => v1::Oscillator::Unspecified,
        Some(Oscillator::Crystal) => v1::Oscillator::Crystal,
        Some(Oscillator::Compensated) => v1::Oscillator::Compensated,
        Some(Oscillator::Oven) => v1::Oscillator::Oven,
        Some(Oscillator::Atomic) => v1::Oscillator::Atomic,
    }
}

fn tail_to_wire(tail: Option<LatencyTail>) -> v1::LatencyTail {
    match tail {
        None => v1::LatencyTail::Unspecified,
        Some(LatencyTail::ReferenceLate) => v1::LatencyTail::ReferenceLate,
        Some(LatencyTail::CounterLate) => v1::LatencyTail::CounterLate,
    }
}

impl TryFrom<v1::Clock> for Clock {
    type Error = WireError;

    fn try_from(wire: v1::Clock) -> Result<Self, WireError> {
        let oscillator = match wire.oscillator() {
            v1::Oscillator::Unspecified => None,
            v1::Oscillator::Crystal => Some(Oscillator::Crystal),
            v1::Oscillator::Compensated => Some(Oscillator::Compensated),
            v1::Oscillator::Oven => Some(Oscillator::Oven),
            v1::Oscillator::Atomic => Some(Oscillator::Atomic),
        };
        let tail = match wire.tail() {
            v1::LatencyTail::Unspecified => None,
            v1::LatencyTail::ReferenceLate => Some(LatencyTail::ReferenceLate),
            v1::LatencyTail::CounterLate => Some(LatencyTail::CounterLate),
        };
        Ok(Self {
            declaration: ClockDeclaration {
                id: id_of("clock.name", "clocks", &wire.name)?,
                display_name: wire.display_name,
                nominal_hz: rate("clock.nominal_rate", wire.nominal_rate)?,
                exact: wire.exact,
                tolerance_ppm: (wire.tolerance_ppm != 0.0).then_some(wire.tolerance_ppm),
                oscillator,
                tail,
                quantum_ns: (wire.quantum_ns != 0).then_some(wire.quantum_ns),
                statistics: wire.statistics,
            },
            fault: Some(wire.fault).filter(|fault| !fault.is_empty()),
            estimate: required("clock.estimate", wire.estimate)?.try_into()?,
        })
    }
}

impl TryFrom<v1::Estimate> for Estimate {
    type Error = WireError;

    fn try_from(wire: v1::Estimate) -> Result<Self, WireError> {
        let state = match wire.state() {
            v1::EstimateState::FreeRunning => EstimateState::FreeRunning,
            v1::EstimateState::Acquiring => EstimateState::Acquiring,
            v1::EstimateState::Locked => EstimateState::Locked,
            v1::EstimateState::Holdover => EstimateState::Holdover,
            v1::EstimateState::Unspecified => {
                return Err(WireError::new(
                    "estimate.state",
                    wire.state,
                    "a known state",
                ));
            }
        };
        Ok(Self {
            state,
            drift: wire.drift,
            deviation: wire.deviation,
            drift_low: wire.drift_low,
            drift_high: wire.drift_high,
            phase_ns: wire.phase_ns,
            as_of_ns: wire.as_of_ns,
            last_reading_ns: (wire.last_reading_ns != 0).then_some(wire.last_reading_ns),
            readings_used: wire.readings_used,
            readings_set_aside: wire.readings_set_aside,
            lock_expected_seconds: wire.lock_expected_seconds,
            reference: optional_reference("estimate.reference", &wire.reference)?,
        })
    }
}

impl From<&CrossingDeclaration> for v1::Crossing {
    fn from(declaration: &CrossingDeclaration) -> Self {
        let realisation = match declaration.realisation {
            Realisation::Single => v1::Realisation::Single,
            Realisation::Cadence => v1::Realisation::Cadence,
            Realisation::Stepping => v1::Realisation::Stepping,
            Realisation::Lazy => v1::Realisation::Lazy,
        };
        Self {
            name: crossing_name(&declaration.id),
            display_name: declaration.display_name.clone(),
            source_clock: clock_name(&declaration.source),
            sink_clock: clock_name(&declaration.sink),
            max_l: declaration.bounds.max_l(),
            max_m: declaration.bounds.max_m(),
            headroom_samples: declaration.headroom_samples,
            realisation: realisation.into(),
            group: declaration
                .group
                .as_ref()
                .map(ToString::to_string)
                .unwrap_or_default(),
            lead_ns: declaration.lead_ns,
            review_horizon_ns: declaration.review_horizon_ns,
            least_hold_ns: declaration.least_hold_ns,
            pitch_limit_ppm: declaration.pitch_limit_ppm,
            silent: declaration.silent,
            backup_clock: declaration
                .backup
                .as_ref()
                .map(clock_name)
                .unwrap_or_default(),
            status: None,
            etag: String::new(),
        }
    }
}

impl TryFrom<v1::Crossing> for Crossing {
    type Error = WireError;

    fn try_from(wire: v1::Crossing) -> Result<Self, WireError> {
        let realisation = match wire.realisation() {
            v1::Realisation::Single => Realisation::Single,
            v1::Realisation::Unspecified | v1::Realisation::Cadence => Realisation::Cadence,
            v1::Realisation::Stepping => Realisation::Stepping,
            v1::Realisation::Lazy => Realisation::Lazy,
        };
        let backup = Some(wire.backup_clock.as_str()).filter(|name| !name.is_empty());
        let status = required("crossing.status", wire.status)?.try_into()?;
        let declaration = CrossingDeclaration {
            id: id_of("crossing.name", "crossings", &wire.name)?,
            display_name: wire.display_name,
            source: id_of("crossing.source_clock", "clocks", &wire.source_clock)?,
            sink: id_of("crossing.sink_clock", "clocks", &wire.sink_clock)?,
            bounds: bounds("crossing.max_l, max_m", (wire.max_l, wire.max_m))?,
            headroom_samples: wire.headroom_samples,
            realisation,
            group: optional_id("crossing.group", &wire.group)?,
            lead_ns: wire.lead_ns,
            review_horizon_ns: wire.review_horizon_ns,
            least_hold_ns: wire.least_hold_ns,
            pitch_limit_ppm: wire.pitch_limit_ppm,
            silent: wire.silent,
            backup: backup
                .map(|name| id_of("crossing.backup_clock", "clocks", name))
                .transpose()?,
        };
        Ok(Self {
            declaration,
            status,
        })
    }
}

fn bounds(field: &str, (max_l, max_m): (u64, u64)) -> Result<Bounds, WireError> {
    Bounds::new(max_l, max_m)
        .map_err(|_| WireError::new(field, (max_l, max_m), "bounds from 1 to 2^31"))
}

impl TryFrom<v1::CrossingStatus> for CrossingStatus {
    type Error = WireError;

    fn try_from(wire: v1::CrossingStatus) -> Result<Self, WireError> {
        let state = match wire.state() {
            v1::CrossingState::Waiting => CrossingState::Waiting,
            v1::CrossingState::Holding => CrossingState::Holding,
            v1::CrossingState::Degraded => CrossingState::Degraded,
            v1::CrossingState::OutOfBounds => CrossingState::OutOfBounds,
            v1::CrossingState::Unspecified => {
                return Err(WireError::new("status.state", wire.state, "a known state"));
            }
        };
        Ok(Self {
            state,
            reason: wire.reason,
            as_of_ns: wire.as_of_ns,
            target: wire.target,
            target_low: wire.target_low,
            target_high: wire.target_high,
            phase_error_samples: wire.phase_error_samples,
            phase_deviation_samples: wire.phase_deviation_samples,
            seconds_to_slip: wire.seconds_to_slip,
            seconds_vouched: wire.seconds_vouched,
            setting: wire.setting.map(TryInto::try_into).transpose()?,
            settings_made: wire.settings_made,
            residual: wire.residual,
            pin: wire
                .pin
                .map(|v1::Pin { by, since_ns, note }| Pin { by, since_ns, note }),
            source: id_of("status.source_clock", "clocks", &wire.source_clock)?,
            needed: wire
                .needed
                .map(|v1::Bounds { max_l, max_m }| bounds("status.needed", (max_l, max_m)))
                .transpose()?,
        })
    }
}
