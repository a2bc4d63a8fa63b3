//! A line a setting: for files, pipes and machines.

use ratewright_client::{Setting, Update, Watch};
use serde_json::json;

use super::Ended;
use crate::failure::Failure;
use crate::out::say;
use crate::{json, show};

/// Prints updates until it is interrupted.
pub(super) async fn run(watch: &mut Watch, as_json: bool) -> Ended {
    loop {
        let update = match watch.next().await {
            Ok(update) => update,
            Err(error) => return Ended::Refused(error),
        };
        if let Err(failure) = print(update, watch, as_json) {
            return failure.into();
        }
    }
}

fn print(update: Update, watch: &Watch, as_json: bool) -> Result<(), Failure> {
    match update {
        Update::Setting(setting) if as_json => say!("{}", json::setting(&setting)),
        Update::Setting(setting) => {
            let now_ns = watch.house_now_ns().unwrap_or(setting.decided_ns);
            say!("{}", line(&setting, now_ns))
        }
        Update::Refused { name, error } if as_json => {
            let refused = json!({ "setting": name, "refused": error.to_string() });
            say!("{refused}")
        }
        Update::Refused { name, error } => say!("{name} must not be run: {error}"),
        Update::Older { name, newest } => {
            eprintln!("ratewright: {}", super::passed_over(&name, newest));
            Ok(())
        }
        Update::Lost(loss) => {
            eprintln!("ratewright: {loss}; settings stay in force");
            Ok(())
        }
        Update::Regained => {
            eprintln!("ratewright: contact is back");
            Ok(())
        }
        _ => Ok(()),
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
