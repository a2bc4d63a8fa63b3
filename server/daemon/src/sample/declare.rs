//! Declares the facility over gRPC, and finds out when it began.

use ratewright_client::{
    CallError, Client, Id, LatencyTail, Oscillator, Realisation, RefusalKind, SettingNumber,
};
use ratewright_control as control;
use ratewright_rehearsal::Plan;
use ratewright_timing as timing;

use super::SampleError;

/// Declares what is not declared yet. Returns the house time at which the facility began: now, or when
/// an earlier run of it did.
pub(super) async fn all(client: &Client, plan: &Plan, now_ns: i64) -> Result<i64, SampleError> {
    for clock in plan.clocks() {
        unless_there(client.declare_clock(&clock_on_the_wire(clock)).await)?;
    }
    for crossing in &plan.crossings {
        unless_there(
            client
                .declare_crossing(&crossing_on_the_wire(crossing))
                .await,
        )?;
    }
    match plan.crossings.first() {
        Some(first) => began(client, &id(&first.id), now_ns).await,
        None => Ok(now_ns),
    }
}

/// A crossing's first setting is decided when it is declared.
async fn began(client: &Client, first: &Id, now_ns: i64) -> Result<i64, SampleError> {
    let number = SettingNumber {
        epoch: 1,
        number: 1,
    };
    match client.setting(first, Some(number)).await {
        Ok(setting) => Ok(setting.decided_ns),
        Err(error) if error.is(RefusalKind::NotFound) => {
            tracing::warn!(
                crossing = %first,
                "the store no longer knows when the sample facility began; it begins again, and its \
                 clocks will seem to step"
            );
            Ok(now_ns)
        }
        Err(error) => Err(error.into()),
    }
}

fn unless_there<T>(declared: Result<T, CallError>) -> Result<(), CallError> {
    match declared {
        Err(error) if !error.is(RefusalKind::AlreadyExists) => Err(error),
        _ => Ok(()),
    }
}

fn clock_on_the_wire(clock: &control::ClockDeclaration) -> ratewright_client::ClockDeclaration {
    ratewright_client::ClockDeclaration {
        display_name: clock.display_name.clone(),
        exact: clock.exact,
        tolerance_ppm: Some(clock.tolerance_ppm).filter(|&ppm| ppm > 0.0),
        oscillator: clock.oscillator.map(|kind| match kind {
            timing::Oscillator::Crystal => Oscillator::Crystal,
            timing::Oscillator::Compensated => Oscillator::Compensated,
            timing::Oscillator::Oven => Oscillator::Oven,
            timing::Oscillator::Atomic => Oscillator::Atomic,
        }),
        tail: clock.tail.map(|tail| match tail {
            timing::LatencyTail::ReferenceLate => LatencyTail::ReferenceLate,
            timing::LatencyTail::CounterLate => LatencyTail::CounterLate,
        }),
        quantum_ns: Some(clock.quantum_ns).filter(|&ns| ns > 0),
        // The page has something to show of each.
        statistics: !clock.exact,
        ..ratewright_client::ClockDeclaration::new(id(&clock.id), clock.nominal_hz)
    }
}

fn crossing_on_the_wire(
    crossing: &control::CrossingDeclaration,
) -> ratewright_client::CrossingDeclaration {
    ratewright_client::CrossingDeclaration {
        display_name: crossing.display_name.clone(),
        headroom_samples: crossing.headroom_samples,
        realisation: match crossing.realisation {
            control::Realisation::Single => Realisation::Single,
            control::Realisation::Cadence => Realisation::Cadence,
            control::Realisation::Stepping => Realisation::Stepping,
            control::Realisation::Lazy => Realisation::Lazy,
        },
        group: crossing.group.as_ref().map(id),
        lead_ns: crossing.lead_ns,
        review_horizon_ns: crossing.review_horizon_ns,
        least_hold_ns: crossing.least_hold_ns,
        pitch_limit_ppm: crossing.pitch_limit_ppm,
        silent: crossing.silent,
        backup: crossing.backup.as_ref().map(id),
        ..ratewright_client::CrossingDeclaration::new(
            id(&crossing.id),
            id(&crossing.source),
            id(&crossing.sink),
            crossing.bounds,
        )
    }
}

/// The same name for the client, which has types of its own.
pub(super) fn id(id: &control::Id) -> Id {
    Id::new(id.as_str()).expect("client and engine take the same names")
}
