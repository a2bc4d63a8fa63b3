//! `ratewright watch`: settings as they come.

use clap::Args;
use ratewright_client::{Id, Setting, Update};
use serde_json::json;

use crate::failure::Failure;
use crate::out::say;
use crate::server::{self, Server};
use crate::{json, show};

/// Prints the newest setting of each crossing, then every change
///
/// Each setting is verified first: one whose certificate fails is named and not shown as good.
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

/// Prints updates until it is interrupted.
pub(crate) async fn run(arguments: &Arguments) -> Result<(), Failure> {
    let client = arguments.server.connect().await?;
    let mut watch = client.watch(&arguments.crossings);
    loop {
        match watch.next().await? {
            Update::Setting(setting) if arguments.json => {
                say!("{}", json::setting(&setting))?;
            }
            Update::Setting(setting) => {
                say!(
                    "{}",
                    line(&setting, watch.house_now_ns().unwrap_or(setting.decided_ns))
                )?;
            }
            Update::Refused { name, error } if arguments.json => {
                say!(
                    "{}",
                    json!({ "setting": name, "refused": error.to_string() })
                )?;
            }
            Update::Refused { name, error } => say!("{name} must not be run: {error}")?,
            Update::Lost(loss) => eprintln!("ratewright: {loss}; settings stay in force"),
            Update::Regained => eprintln!("ratewright: contact is back"),
            _ => {}
        }
    }
}

/// One line for a setting.
fn line(setting: &Setting, now_ns: i64) -> String {
    let effect_s = (setting.effect_ns - now_ns) as f64 / 1e9;
    let effect = if effect_s > 0.0 {
        format!("in {}", show::duration(effect_s))
    } else {
        format!("{} ago", show::duration(-effect_s))
    };
    let slip = match setting.seconds_to_slip {
        Some(seconds) => format!("could slip {} after it", show::duration(seconds)),
        None => "no slip within a day".to_owned(),
    };
    format!(
        "{:<20} {:>6}  {:<36} {:>15}  effect {effect}, {slip} ({})",
        setting.crossing,
        setting.number,
        show::realised(&setting.realised),
        show::offset(setting.residual),
        show::reason_word(setting.reason),
    )
}
