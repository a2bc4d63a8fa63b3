//! Tells the terminal how the facility fares: every change of a state as it is seen, and the whole
//! summary once it has settled and every minute after that.

use std::{
    collections::BTreeMap,
    io::{self, Write},
    time::Duration,
};

use ratewright_client::{Client, CrossingState, EstimateState};
use tokio::time::{Instant, MissedTickBehavior, interval};

use super::{
    SampleError,
    summary::{Snapshot, clock_state, crossing_state, span},
};
use crate::house::HouseClock;

/// Real time between looks.
const LOOK: Duration = Duration::from_secs(1);
/// Real time before the first summary: after a restart the first readings have to come in.
const FIRST: Duration = Duration::from_secs(5);
/// Real time between summaries.
const SUMMARY: Duration = Duration::from_secs(60);
const NS_PER_S: f64 = 1e9;

pub(super) async fn forever(
    client: &Client,
    house: HouseClock,
    origin_ns: i64,
    page: &str,
) -> Result<(), SampleError> {
    let mut looks = interval(LOOK);
    looks.set_missed_tick_behavior(MissedTickBehavior::Delay);
    let mut news = News::default();
    let began = Instant::now();
    let mut last_summary: Option<Instant> = None;
    say(&format!(
        "Radio Lanternsea reports to this daemon: an invented facility with real arithmetic.\n\
         Its page is {page} ; a summary follows here as soon as every clock is measured.\n"
    ))?;
    loop {
        looks.tick().await;
        let age_s = (house.now() - origin_ns) as f64 / NS_PER_S;
        let (clocks, crossings) = (client.clocks().await?, client.crossings().await?);
        let snapshot = Snapshot {
            age_s,
            page,
            clocks: &clocks,
            crossings: &crossings,
        };
        let changes = news.changes(&snapshot);
        let due = match last_summary {
            Some(at) => at.elapsed() >= SUMMARY,
            None => began.elapsed() >= FIRST && snapshot.settled(),
        };
        if last_summary.is_some() {
            say(&changes)?;
        }
        if due {
            say(&format!("\n{snapshot}\n"))?;
            last_summary = Some(Instant::now());
        }
    }
}

fn say(text: &str) -> io::Result<()> {
    let mut out = io::stdout().lock();
    out.write_all(text.as_bytes())?;
    out.flush()
}

/// The states as they were seen last.
#[derive(Debug, Default)]
struct News {
    clocks: BTreeMap<String, EstimateState>,
    crossings: BTreeMap<String, CrossingState>,
}

impl News {
    /// A line for each state that differs from the one seen last; none for what is new.
    fn changes(&mut self, snapshot: &Snapshot<'_>) -> String {
        let mut lines = String::new();
        let mut line = |id: &str, was: &str, is: &str| {
            lines += &format!("{:>9}  {id}: {was} → {is}\n", span(snapshot.age_s));
        };
        for clock in snapshot.clocks {
            let (id, state) = (clock.declaration.id.as_str(), clock.estimate.state);
            match self.clocks.insert(id.to_owned(), state) {
                Some(was) if was != state => line(id, clock_state(was), clock_state(state)),
                _ => {}
            }
        }
        for crossing in snapshot.crossings {
            let (id, state) = (crossing.declaration.id.as_str(), crossing.status.state);
            match self.crossings.insert(id.to_owned(), state) {
                Some(was) if was != state => line(id, crossing_state(was), crossing_state(state)),
                _ => {}
            }
        }
        lines
    }
}
