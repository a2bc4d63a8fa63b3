//! Declaring clocks, as far as commands do that on the way.

use num_rational::Ratio;
use ratewright_client::{Client, ClockDeclaration, Id, RefusalKind};

use crate::failure::Failure;
use crate::{names, show};

/// Declares a clock unless it is there; one that is there must be the same.
pub(crate) async fn ensure(
    client: &Client,
    id: &Id,
    nominal_hz: Ratio<u64>,
    exact: bool,
) -> Result<(), Failure> {
    let declaration = ClockDeclaration {
        exact,
        ..ClockDeclaration::new(id.clone(), nominal_hz)
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

/// Fails, with this advice, if a clock is not declared: each of its readings would be refused.
pub(crate) async fn expect(client: &Client, id: &Id, advice: &str) -> Result<(), Failure> {
    match client.clock(id).await {
        Ok(_) => Ok(()),
        Err(error) if error.is(RefusalKind::NotFound) => {
            let meant = match names::clocks_like(client, id).await {
                Some(meant) => format!("{meant}; or "),
                None => String::new(),
            };
            Err(Failure::Failed(format!(
                "clock {id} is not declared; {meant}{advice}"
            )))
        }
        Err(error) => Err(error.into()),
    }
}
