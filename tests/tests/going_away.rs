//! Real daemons that go away, and a client that goes on with another.

use std::time::Duration;

use ratewright_client::{
    Answer, Client, Follow, Freshness, Id, Measurement, Reading, Receipts, Reference, Setting,
    Update, Watch,
};
use ratewright_server::{
    Daemon,
    config::{Config, parse},
};
use tempfile::TempDir;

/// Longer than any test waits: no daemon of these may need its grace time.
const GRACE: Duration = Duration::from_secs(60);

const FACILITY: &str = "
    [listen]
    grpc = '127.0.0.1:0'
    people = '127.0.0.1:0'
    [[clock]]
    id = 'desk'
    rate = 48000
    [[clock]]
    id = 'hall'
    rate = 48000
    exact = true
    [[crossing]]
    id = 'line'
    source = 'desk'
    sink = 'hall'
    headroom_samples = 48
";

fn id(text: &str) -> Id {
    Id::new(text).expect("an id")
}

fn config(folder: &TempDir, max_connection_age: Option<Duration>) -> Config {
    Config {
        store: folder.path().to_owned(),
        drain_grace: GRACE,
        max_connection_age,
        ..parse(FACILITY).expect("a configuration")
    }
}

async fn daemon(config: Config) -> Daemon {
    Daemon::builder(config).start().await.expect("it starts")
}

/// Declares the crossing anew, which makes a new setting.
async fn change(daemon: &Daemon, mut config: Config, headroom_samples: f64) {
    config.crossings[0].headroom_samples = headroom_samples;
    let changed = daemon.redeclare(config).await;
    assert_eq!(changed.expect("a good declaration"), 1);
}

fn address(daemon: &Daemon) -> String {
    format!("http://{}", daemon.grpc())
}

/// Anything of a stream, within a time that only a hang exceeds.
async fn soon<T>(next: impl Future<Output = T>) -> T {
    let next = tokio::time::timeout(Duration::from_secs(30), next);
    next.await.expect("it does not hang")
}

async fn seen(watch: &mut Watch) -> Update {
    soon(watch.next()).await.expect("no refusal")
}

async fn next_setting(watch: &mut Watch) -> Setting {
    loop {
        if let Update::Setting(setting) = seen(watch).await {
            return *setting;
        }
    }
}

async fn next_followed(follow: &mut Follow) -> Setting {
    loop {
        if let Update::Setting(setting) = soon(follow.next()).await.expect("no refusal") {
            return *setting;
        }
    }
}

/// Readings accepted by the next receipt, and whether contact was lost before it.
async fn next_receipt(receipts: &mut Receipts) -> (u64, bool) {
    let mut lost = false;
    loop {
        match soon(receipts.next()).await.expect("no refusal") {
            Some(Answer::Receipt(receipt)) => return (receipt.accepted, lost),
            Some(Answer::Lost(_)) => lost = true,
            Some(_) => {}
            None => panic!("the reporter is still there"),
        }
    }
}

fn reading(second: i64) -> Reading {
    Reading {
        clock: id("desk"),
        reference: Reference::House,
        probe: None,
        sequence: None,
        measurement: Measurement::Counter {
            count: 48_000 * second.unsigned_abs(),
            bits: 64,
            reference_ns: second * 1_000_000_000,
        },
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn streams_of_a_daemon_that_drains_go_on_at_the_other() {
    let folders = [(); 2].map(|()| tempfile::tempdir().expect("a folder"));
    let one = daemon(config(&folders[0], None)).await;
    let other = daemon(config(&folders[1], None)).await;
    let addresses = [address(&one), address(&other)];
    let addresses = addresses.each_ref().map(String::as_str);
    let client = Client::connect_any(&addresses).await.expect("both serve");
    let (used, spare, folder) = if client.address() == addresses[0] {
        (one, other, &folders[1])
    } else {
        (other, one, &folders[0])
    };

    let mut watch = client.watch(&[id("line")]);
    let first = next_setting(&mut watch).await;
    let mut follow = client.follow(&[id("line")]);
    next_followed(&mut follow).await;
    let (reporter, mut receipts) = client.report(Default::default());
    reporter.report(reading(1)).expect("it is open");
    assert_eq!(next_receipt(&mut receipts).await, (1, false));

    let drained = tokio::spawn(used.drain());
    let loss = loop {
        // Readings may have brought a setting before.
        match seen(&mut watch).await {
            Update::Lost(loss) => break loss,
            Update::Setting(_) => {}
            other => panic!("contact with that one is lost first: {other:?}"),
        }
    };
    assert!(loss.reason.contains("going away"), "{loss}");
    assert!(loss.reason.contains("stopping"), "{loss}");
    assert_eq!(watch.freshness(&first), Freshness::Stale);
    assert_eq!(seen(&mut watch).await, Update::Regained);
    assert_eq!(client.address(), address(&spare));
    assert_eq!(watch.freshness(&first), Freshness::Current);

    // Every stream goes on at the other, and so does every call.
    assert!(client.crossing(&id("line")).await.is_ok());
    change(&spare, config(folder, None), 24.0).await;
    let second = next_setting(&mut watch).await;
    assert!(second.number > first.number, "{second:?}");
    assert_eq!(next_followed(&mut follow).await.number, second.number);
    follow.applied(&second, second.effect_ns, 0).await;
    reporter.report(reading(2)).expect("it is open");
    assert_eq!(next_receipt(&mut receipts).await, (1, true));
    soon(async {
        let line = &spare.board().crossings(None, 1)[0].declaration.id;
        while spare.board().applied(line).is_none() {
            tokio::time::sleep(Duration::from_millis(10)).await;
        }
    })
    .await;
    let drained = soon(drained).await.expect("it does not panic");
    drained.expect("with everybody gone it need not wait for its grace time");
}

#[tokio::test(flavor = "multi_thread")]
async fn a_watch_outlives_its_connections() {
    let folder = tempfile::tempdir().expect("a folder");
    let config = config(&folder, Some(Duration::from_secs(1)));
    let only = daemon(config.clone()).await;
    let client = Client::connect(&address(&only)).await.expect("it serves");
    let mut watch = client.watch(&[id("line")]);
    let mut newest = next_setting(&mut watch).await.number;
    for headroom_samples in [24.0, 12.0] {
        let Update::Lost(loss) = seen(&mut watch).await else {
            panic!("the connection gets old");
        };
        assert!(loss.reason.contains("the connection is old"), "{loss}");
        while seen(&mut watch).await != Update::Regained {}
        change(&only, config.clone(), headroom_samples).await;
        let setting = next_setting(&mut watch).await;
        assert!(setting.number > newest, "{setting:?}");
        newest = setting.number;
    }
    drop((watch, client));
    soon(only.drain())
        .await
        .expect("a last snapshot is written");
}
