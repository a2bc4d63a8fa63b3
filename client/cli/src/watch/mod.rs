//! `ratewright watch`: settings as they come.

mod board;
mod lines;
mod live;

use clap::Args;
use console::Term;
use ratewright_client::{Id, SettingNumber};

use crate::failure::Failure;
use crate::names;
use crate::server::{self, Server};

/// Shows the newest setting of each crossing, and every change
///
/// On a terminal: a line a crossing, kept up to date in place, with how fresh its setting is.
/// Elsewhere, and with --json: a line a setting. Each setting is verified first: one whose
/// certificate fails is named and not shown as good.
#[derive(Debug, Args)]
pub(crate) struct Arguments {
    /// Crossings to watch; all if there are none
    #[arg(value_name = "CROSSING", value_parser = server::crossing)]
    crossings: Vec<Id>,
    /// Print JSON, a line a setting
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    server: Server,
}

/// Shows updates until it is interrupted, or until there is nothing to wait for.
pub(crate) async fn run(arguments: &Arguments) -> Result<(), Failure> {
    let client = arguments.server.connect().await?;
    let mut watch = client.watch(&arguments.crossings);
    let term = Term::buffered_stdout();
    let in_place = !arguments.json && term.is_term() && term.features().is_attended();
    let ended = if in_place && !console::is_dumb() {
        live::run(&mut watch, &term).await
    } else {
        lines::run(&mut watch, arguments.json).await
    };
    match ended {
        Ended::Refused(error) => Err(names::crossings(&client, &arguments.crossings, error).await),
        Ended::Unseen(failure) => Err(failure),
    }
}

/// What to say of a setting that is older than one heard before.
fn passed_over(name: &str, newest: SettingNumber) -> String {
    format!(
        "{name} is older than {newest}, which was heard before, and is passed over; if the daemon's store was \
         lost, start it once with `run --new-epoch`"
    )
}

/// Why watching ended.
enum Ended {
    /// The daemon refused to be watched like this.
    Refused(ratewright_client::CallError),
    /// Nothing can be shown any more.
    Unseen(Failure),
}

impl From<Failure> for Ended {
    fn from(failure: Failure) -> Self {
        Self::Unseen(failure)
    }
}
