//! The sample facility against a daemon of its own, at sixty house seconds a second.

use std::{collections::BTreeMap, net::Ipv4Addr, path::Path, time::Duration};

use ratewright_client::{Clock, CrossingState, EstimateState, Id};
use tokio::time::{sleep, timeout};

use super::*;
use crate::Daemon;

const PACE: f64 = 60.0;
/// All lock within five simulated minutes, or, if that comes too late for the outage, after ten.
const PATIENCE: Duration = Duration::from_secs(20);

async fn daemon(store: &Path) -> Daemon {
    let any_port = SocketAddr::from((Ipv4Addr::LOCALHOST, 0));
    let config = Config {
        grpc: any_port,
        people: any_port,
        ..config(store.to_owned())
    };
    Daemon::builder(config)
        .pace(PACE)
        .start()
        .await
        .expect("the daemon starts")
}

async fn client(daemon: &Daemon) -> Client {
    Client::connect(&format!("http://{}", daemon.grpc()))
        .await
        .expect("it serves")
}

/// Plays the sample until every clock is in a state that `wanted` takes.
async fn play_until(daemon: &Daemon, wanted: impl Fn(&Clock) -> bool) {
    let client = client(daemon).await;
    let looking = async {
        loop {
            let clocks = client.clocks().await.expect("it lists its clocks");
            if !clocks.is_empty() && clocks.iter().all(&wanted) {
                return;
            }
            sleep(Duration::from_millis(100)).await;
        }
    };
    let playing = run(daemon.grpc(), daemon.people(), daemon.house());
    tokio::select! {
        ended = playing => panic!("the sample ended: {ended:?}"),
        seen = timeout(PATIENCE, looking) => seen.expect("the clocks come to the state in time"),
    }
}

/// A second run on the same store finds the facility where it would have been, and its clocks lock on new
/// readings.
#[tokio::test(flavor = "multi_thread")]
async fn the_sample_locks_and_goes_on_after_a_restart() {
    let store = tempfile::tempdir().expect("a folder can be made");
    let locked = |clock: &Clock| clock.estimate.state == EstimateState::Locked;

    let first = daemon(store.path()).await;
    play_until(&first, locked).await;
    let crossings = client(&first)
        .await
        .crossings()
        .await
        .expect("it lists its crossings");
    assert_eq!(crossings.len(), sample::plan().crossings.len());
    for crossing in crossings {
        assert_ne!(
            crossing.status.state,
            CrossingState::Waiting,
            "{}",
            crossing.declaration.id
        );
        assert!(
            crossing.status.setting.is_some(),
            "{}",
            crossing.declaration.id
        );
    }
    let origin_ns = origin(&first).await;
    let used = readings_used(&first).await;
    first.drain().await.expect("it stops");

    let second = daemon(store.path()).await;
    assert_eq!(origin(&second).await, origin_ns);
    let fresh = |clock: &Clock| clock.estimate.readings_used > used[&clock.declaration.id];
    play_until(&second, |clock| {
        locked(clock) && (clock.declaration.exact || fresh(clock))
    })
    .await;
    second.drain().await.expect("it stops");
}

async fn origin(daemon: &Daemon) -> i64 {
    let client = client(daemon).await;
    declare::all(&client, &sample::plan(), daemon.house().now())
        .await
        .expect("it is declared")
}

async fn readings_used(daemon: &Daemon) -> BTreeMap<Id, u64> {
    let clocks = client(daemon)
        .await
        .clocks()
        .await
        .expect("it lists its clocks");
    clocks
        .into_iter()
        .map(|clock| (clock.declaration.id, clock.estimate.readings_used))
        .collect()
}
