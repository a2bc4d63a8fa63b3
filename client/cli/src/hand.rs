//! `ratewright pin`, `release` and `changeover`: the operator's hand.

use clap::Args;
use ratewright_client::{CallError, Client, Crossing, Id};

use crate::failure::Failure;
use crate::out::say;
use crate::server::{self, Server};
use crate::{json, names, show};

/// Keeps a crossing as it runs, whatever is measured, until it is released
///
/// Settings are renewed, so that followers do not expire, and the forecast goes on. Whatever runs is off
/// by a little, so that the buffer slips sooner or later: when is told, and by `standing`.
#[derive(Debug, Args)]
pub(crate) struct Pin {
    /// The crossing
    #[arg(value_parser = server::crossing)]
    crossing: Id,
    #[command(flatten)]
    act: Act,
}

/// Lets a pinned crossing be decided again
#[derive(Debug, Args)]
pub(crate) struct Release {
    /// The crossing
    #[arg(value_parser = server::crossing)]
    crossing: Id,
    #[command(flatten)]
    act: Act,
}

/// Says that a crossing's stream comes from its other source from now on
#[derive(Debug, Args)]
pub(crate) struct Changeover {
    /// The crossing
    #[arg(value_parser = server::crossing)]
    crossing: Id,
    /// Clock of the source to be used: the declared source or the backup
    #[arg(value_name = "CLOCK", value_parser = server::clock)]
    source: Id,
    #[command(flatten)]
    act: Act,
}

/// What every act says.
#[derive(Debug, Args)]
struct Act {
    /// Who does it
    #[arg(long, value_name = "WHO")]
    by: String,
    /// Why
    #[arg(long, value_name = "TEXT", default_value = "")]
    note: String,
    /// Print JSON for a machine
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    server: Server,
}

pub(crate) async fn pin(Pin { crossing, act }: &Pin) -> Result<(), Failure> {
    let client = act.server.connect().await?;
    let done = client.pin(crossing, &act.by, &act.note).await;
    let done = known(&client, crossing, done).await?;
    act.print(&done, "is pinned")?;
    if act.json {
        return Ok(());
    }
    match done.status.seconds_to_slip {
        Some(seconds) => say!(
            "as it runs, its buffer may slip in {}",
            show::duration(seconds)
        ),
        None => say!("as it runs, no slip of its buffer is in sight"),
    }
}

pub(crate) async fn release(Release { crossing, act }: &Release) -> Result<(), Failure> {
    let client = act.server.connect().await?;
    let done = client.release(crossing, &act.by, &act.note).await;
    let done = known(&client, crossing, done).await?;
    act.print(&done, "is released")
}

pub(crate) async fn changeover(
    Changeover {
        crossing,
        source,
        act,
    }: &Changeover,
) -> Result<(), Failure> {
    let client = act.server.connect().await?;
    let done = client
        .change_over(crossing, source, &act.by, &act.note)
        .await;
    let done = known(&client, crossing, done).await?;
    act.print(&done, &format!("takes its stream from {source}"))
}

/// What was done, or a failure that knows the names of crossings.
async fn known(
    client: &Client,
    crossing: &Id,
    done: Result<Crossing, CallError>,
) -> Result<Crossing, Failure> {
    match done {
        Ok(done) => Ok(done),
        Err(error) => Err(names::crossings(client, std::slice::from_ref(crossing), error).await),
    }
}

impl Act {
    fn print(&self, crossing: &Crossing, done: &str) -> Result<(), Failure> {
        if self.json {
            return say!("{:#}", json::crossing(crossing));
        }
        let id = &crossing.declaration.id;
        match &crossing.status.setting {
            Some(setting) => say!(
                "{id} {done}; its setting is {}, {}",
                setting.number,
                show::realised(&setting.realised)
            ),
            None => say!("{id} {done}; it has no setting yet"),
        }
    }
}
