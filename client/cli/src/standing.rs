//! `ratewright standing`: how every clock and crossing stands.

use clap::Args;
use ratewright_client::{Clock, Crossing};
use serde_json::json;

use crate::failure::Failure;
use crate::out;
use crate::out::say;
use crate::server::Server;
use crate::{json, layout, show, terminal};

/// Shows how every clock and every crossing stands
///
/// "Slip if left alone" is when a buffer would slip if nothing were set anew: a crossing that is holding
/// gets another setting before. "Vouched for" is how long it can be kept from slipping, however it is
/// set, if no further reading comes.
#[derive(Debug, Args)]
pub(crate) struct Arguments {
    /// Print JSON for a machine
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    server: Server,
}

/// Prints both tables.
pub(crate) async fn run(arguments: &Arguments) -> Result<(), Failure> {
    let client = arguments.server.connect().await?;
    let (clocks, crossings) = (client.clocks().await?, client.crossings().await?);
    if arguments.json {
        let document = json!({
            "clocks": clocks.iter().map(json::clock).collect::<Vec<_>>(),
            "crossings": crossings.iter().map(json::crossing).collect::<Vec<_>>(),
        });
        say!("{document:#}")?;
        return Ok(());
    }
    let heading = |words: &[&str]| {
        words
            .iter()
            .map(|&word| word.to_owned())
            .collect::<Vec<_>>()
    };
    let width = terminal::width();
    let mut rows = vec![heading(&["clock", "nominal", "drift (95 %)", "state"])];
    rows.extend(clocks.iter().map(clock_row));
    out::prose(&layout::fitted(&rows, width))?;
    for clock in &clocks {
        if let Some(fault) = &clock.fault {
            out::prose(&format!(
                "  {} is at fault: {fault}\n",
                clock.declaration.id
            ))?;
        }
    }
    say!("")?;
    let mut rows = vec![heading(&[
        "crossing",
        "from",
        "to",
        "setting",
        "runs",
        "off by",
        "phase error",
        "slip if left alone",
        "vouched for",
        "state",
    ])];
    rows.extend(crossings.iter().map(crossing_row));
    out::prose(&layout::fitted(&rows, width))?;
    Ok(())
}

fn clock_row(clock: &Clock) -> Vec<String> {
    let declaration = &clock.declaration;
    let (drift, state) = show::clock(clock);
    vec![
        declaration.id.to_string(),
        show::rate(declaration.nominal_hz),
        drift,
        state,
    ]
}

fn crossing_row(crossing: &Crossing) -> Vec<String> {
    let (declaration, status) = (&crossing.declaration, &crossing.status);
    let (number, runs, off) = match &status.setting {
        Some(setting) => (
            setting.number.to_string(),
            show::realised(&setting.realised),
            show::offset(status.residual),
        ),
        None => ("none".to_owned(), String::new(), String::new()),
    };
    vec![
        declaration.id.to_string(),
        declaration.source.to_string(),
        declaration.sink.to_string(),
        number,
        runs,
        off,
        show::phase(crossing),
        show::left(status.seconds_to_slip),
        show::left(status.seconds_vouched),
        show::crossing_state(crossing),
    ]
}
