//! `ratewright explain`: why a ratio was chosen.

use clap::Args;
use ratewright_client::Crossing;
use serde_json::json;

use crate::failure::Failure;
use crate::out;
use crate::out::say;
use crate::server::{self, Server, SettingName};
use crate::{json, names, show};

/// Tells why a setting was chosen, and how its crossing stands now
#[derive(Debug, Args)]
pub(crate) struct Arguments {
    /// A crossing, for its newest setting, or CROSSING/EPOCH-NUMBER
    #[arg(value_name = "CROSSING|SETTING", value_parser = server::setting)]
    setting: SettingName,
    /// Print JSON for a machine
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    server: Server,
}

/// Prints the daemon's explanation.
pub(crate) async fn run(arguments: &Arguments) -> Result<(), Failure> {
    let client = arguments.server.connect().await?;
    let SettingName { crossing, number } = &arguments.setting;
    let (setting, lines) = match client.explain(crossing, *number).await {
        Ok(explained) => explained,
        Err(error) => {
            return Err(names::crossings(&client, std::slice::from_ref(crossing), error).await);
        }
    };
    if arguments.json {
        say!(
            "{:#}",
            json!({ "setting": json::setting(&setting), "lines": lines })
        )?;
        return Ok(());
    }
    let runs = show::realised(&setting.realised);
    let mut text = format!(
        "{} {}  {runs}  {} when it was decided\n",
        setting.crossing,
        setting.number,
        show::offset(setting.residual)
    );
    for line in lines {
        text += &format!("  {line}\n");
    }
    if number.is_none() {
        text += &now(&client.crossing(crossing).await?);
    }
    out::prose(&text)
}

/// How the crossing stands now; what stands above is of the decision.
fn now(crossing: &Crossing) -> String {
    let status = &crossing.status;
    format!(
        "now: {}; off by {}, phase error {}, slip if left alone: {}\n  {}\n",
        show::crossing_state(crossing),
        show::offset(status.residual),
        show::phase(crossing),
        show::left(status.seconds_to_slip),
        status.reason,
    )
}
