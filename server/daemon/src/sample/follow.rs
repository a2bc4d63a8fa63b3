//! Follows every crossing as its players would: each setting is taken at the first block end at or after its
//! instant, and the daemon is told so.

use std::collections::BTreeMap;

use ratewright_client::{Client, Id, Setting, Update};
use tokio::time::sleep;

use super::SampleError;
use crate::house::HouseClock;

/// Blocks of the players end on multiples of this, house time.
const BLOCK_NS: i64 = 10_000_000;

/// Settings that wait for their block end, the newest of each crossing, with the instant of that end.
type Armed = BTreeMap<Id, (i64, Box<Setting>)>;

pub(super) async fn forever(client: &Client, house: HouseClock) -> Result<(), SampleError> {
    let mut follow = client.follow(&[]);
    let mut armed = Armed::new();
    loop {
        let next_ns = armed.values().map(|(end_ns, _)| *end_ns).min();
        let due = async {
            match next_ns {
                Some(end_ns) => sleep(house.until(end_ns)).await,
                None => std::future::pending().await,
            }
        };
        tokio::select! {
            update = follow.next() => match update? {
                Update::Setting(setting) => {
                    let end_ns = block_end_ns(setting.effect_ns.max(house.now()));
                    armed.insert(setting.crossing.clone(), (end_ns, setting));
                }
                Update::Refused { name, error } => tracing::warn!(name, %error, "a player refused a setting"),
                Update::ReportRefused { field, value, accepted, .. } => {
                    tracing::warn!(field, value, accepted, "the daemon refused a player's report");
                }
                Update::Lost(loss) => tracing::warn!(%loss, "the players lost contact"),
                _ => {}
            },
            () = due => {
                let now_ns = house.now();
                let (run, still_armed): (Armed, Armed) =
                    armed.into_iter().partition(|(_, (end_ns, _))| *end_ns <= now_ns);
                for (end_ns, setting) in run.into_values() {
                    // The players of the sample have no count of their own to tell.
                    follow.applied(&setting, end_ns, 0).await;
                }
                armed = still_armed;
            }
        }
    }
}

/// The first block end at or after an instant.
fn block_end_ns(at_ns: i64) -> i64 {
    at_ns + (-at_ns).rem_euclid(BLOCK_NS)
}
