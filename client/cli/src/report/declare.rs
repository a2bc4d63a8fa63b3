//! Declaring the clocks of a report, if it was asked for.

use num_rational::Ratio;
use ratewright_client::{Client, ClockDeclaration, Id, Reference, RefusalKind};

use super::Arguments;
use crate::failure::Failure;
use crate::show;

/// Ticks of a record's time base: it is read in ns.
const TIME_BASE_HZ: u64 = 1_000_000_000;

/// Declares what was asked for and is not declared yet.
pub(super) async fn declare(client: &Client, arguments: &Arguments) -> Result<(), Failure> {
    if arguments.declare_reference {
        let Reference::Clock(id) = &arguments.reference else {
            return Err(Failure::Usage(
                "--declare-reference declares a clock, but the reference is house; name the record's \
                 time base, such as --reference gps"
                    .to_owned(),
            ));
        };
        ensure(client, id, Ratio::from_integer(TIME_BASE_HZ), true).await?;
    }
    match arguments.declare {
        Some(nominal_hz) => ensure(client, &arguments.clock, nominal_hz, false).await,
        // Nothing is sent for a clock that is not there: each reading would be refused.
        None => match client.clock(&arguments.clock).await {
            Ok(_) => Ok(()),
            Err(error) if error.is(RefusalKind::NotFound) => Err(Failure::Failed(format!(
                "clock {} is not declared; add --declare RATE, such as --declare 48k",
                arguments.clock
            ))),
            Err(error) => Err(error.into()),
        },
    }
}

/// Declares a clock; one that is there already must be the same.
pub(crate) async fn ensure(
    client: &Client,
    id: &Id,
    nominal_hz: Ratio<u64>,
    exact: bool,
) -> Result<(), Failure> {
    let declaration = ClockDeclaration {
        id: id.clone(),
        display_name: String::new(),
        nominal_hz,
        exact,
        tolerance_ppm: None,
    };
    match client.declare_clock(&declaration).await {
        Ok(_) => Ok(()),
        Err(error) if error.is(RefusalKind::AlreadyExists) => {
            let there = client.clock(id).await?.declaration;
            if there.nominal_hz == nominal_hz && there.exact == exact {
                return Ok(());
            }
            let kind = if there.exact {
                "an exact clock"
            } else {
                "a clock"
            };
            let rate = show::rate(there.nominal_hz);
            Err(Failure::Failed(format!(
                "{id} is declared already, as {kind} of {rate}"
            )))
        }
        Err(error) => Err(error.into()),
    }
}
