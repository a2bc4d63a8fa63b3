//! Where the daemon is, and the names of its things.

use clap::Args;
use ratewright_client::{Client, Id, SettingNumber};

use crate::failure::Failure;

/// Which daemon to talk to.
#[derive(Clone, Debug, Args)]
pub(crate) struct Server {
    /// Address of the daemon
    #[arg(
        long,
        value_name = "ADDRESS",
        env = "RATEWRIGHT_SERVER",
        default_value = "http://127.0.0.1:7420"
    )]
    server: String,
}

impl Server {
    pub(crate) async fn connect(&self) -> Result<Client, Failure> {
        Ok(Client::connect(&self.server).await?)
    }

    /// True if the daemon is on this very machine, as far as its address tells.
    pub(crate) fn is_local(&self) -> bool {
        let rest = self
            .server
            .split_once("://")
            .map_or(self.server.as_str(), |(_, rest)| rest);
        ["127.", "localhost", "[::1]"]
            .iter()
            .any(|start| rest.starts_with(start))
    }
}

/// Reads a clock: `desk` or `clocks/desk`.
pub(crate) fn clock(text: &str) -> Result<Id, String> {
    id(text, "clocks/")
}

/// Reads a crossing: `hall-to-van` or `crossings/hall-to-van`.
pub(crate) fn crossing(text: &str) -> Result<Id, String> {
    id(text, "crossings/")
}

fn id(text: &str, collection: &str) -> Result<Id, String> {
    Id::new(text.strip_prefix(collection).unwrap_or(text)).map_err(|error| error.to_string())
}

/// A setting of a crossing; the newest if there is no number.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct SettingName {
    pub(crate) crossing: Id,
    pub(crate) number: Option<SettingNumber>,
}

/// Reads `CROSSING`, `CROSSING/EPOCH-NUMBER` or a setting's full name.
pub(crate) fn setting(text: &str) -> Result<SettingName, String> {
    let short = text.strip_prefix("crossings/").unwrap_or(text);
    let (id, number) = match short.split_once('/') {
        None => (short, None),
        Some((id, rest)) => (id, Some(rest.strip_prefix("settings/").unwrap_or(rest))),
    };
    let number = match number {
        None | Some("latest") => None,
        Some(number) => Some(setting_number(number).ok_or_else(|| {
            format!(
                "{number:?} is no setting; type CROSSING, or CROSSING/EPOCH-NUMBER such as {id}/1-7"
            )
        })?),
    };
    Ok(SettingName {
        crossing: crossing(id)?,
        number,
    })
}

fn setting_number(text: &str) -> Option<SettingNumber> {
    let (epoch, number) = text.split_once('-')?;
    Some(SettingNumber {
        epoch: epoch.parse().ok()?,
        number: number.parse().ok()?,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn settings_have_short_and_full_names() {
        let number = Some(SettingNumber {
            epoch: 1,
            number: 7,
        });
        for (text, expected) in [
            ("hall-to-van", None),
            ("crossings/hall-to-van", None),
            ("hall-to-van/1-7", number),
            ("crossings/hall-to-van/settings/1-7", number),
            ("crossings/hall-to-van/settings/latest", None),
        ] {
            let name = setting(text).expect(text);
            assert_eq!(
                (name.crossing.as_str(), name.number),
                ("hall-to-van", expected),
                "{text}"
            );
        }
        let error = setting("hall-to-van/seven").expect_err("no number");
        assert!(error.contains("hall-to-van/1-7"), "{error}");
    }
}
