//! A player, its audio thread, what it keeps, and several daemons.
#![allow(
    clippy::disallowed_methods,
    reason = "it waits for threads by the clock, and looks at what was kept on disk"
)]

mod fake_server;

use std::time::{Duration, Instant};

use fake_server::{FakeServer, HOUSE_NS, cadence_setting};
use ratewright_client::{
    Client, Freshness, Id, Player, PlayerOptions, Playing, Realised, Setting, Update, Watch,
};
use ratewright_proto::v1;
use ratewright_ratio::Fraction;
use v1::follow_settings_request::Message;

const BOUNDS: (u64, u64) = (256, 256);

fn id() -> Id {
    Id::new("hall-to-van").expect("an id")
}

/// In force for a second at the fake's house time, which stands still.
fn in_force(number: u64) -> v1::Setting {
    let wanted = Fraction::new(100_001, 100_000);
    v1::Setting {
        effect_ns: HOUSE_NS - 1_000_000_000,
        ..cadence_setting("hall-to-van", (1, number), wanted, BOUNDS)
    }
}

fn facility(number: u64) -> FakeServer {
    let server = FakeServer::start();
    server
        .facility
        .declare_crossing("hall-to-van", BOUNDS.0, BOUNDS.1);
    server.facility.publish(in_force(number));
    server
}

async fn next(player: &mut Player) -> Playing {
    let next = tokio::time::timeout(Duration::from_secs(20), player.next());
    next.await.expect("within 20 s").expect("no refusal")
}

async fn next_setting(watch: &mut Watch) -> Setting {
    loop {
        let next = tokio::time::timeout(Duration::from_secs(20), watch.next());
        match next.await.expect("within 20 s").expect("no refusal") {
            Update::Setting(setting) => return *setting,
            Update::Lost(_) | Update::Regained => {}
            other => panic!("a setting was due, not {other:?}"),
        }
    }
}

#[tokio::test]
async fn a_setting_reaches_the_audio_thread_and_word_of_it_the_daemon() {
    let server = facility(1);
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let options = PlayerOptions::new(48_000, 48_000);
    let (mut player, mut reader, probe) = client.play(&id(), options).expect("one ratio");
    let mut sink_sample = 0;
    let applied = loop {
        let audio = tokio::time::sleep(Duration::from_millis(5));
        tokio::select! {
            playing = next(&mut player) => match playing {
                Playing::Applied(applied) => break applied,
                Playing::Heard(Update::Setting(setting)) => assert_eq!(setting.number.number, 1),
                other => panic!("nothing else happens: {other:?}"),
            },
            () = audio => {
                probe.read(0, sink_sample, Instant::now());
                let block = reader.next_block(sink_sample);
                sink_sample += block.outputs;
                reader.set_level(0.25);
            }
        }
    };
    assert_eq!(reader.setting(), Some(applied.number));
    assert_eq!(player.freshness(), Some(Freshness::Current));
    let heard = |known: &fake_server::Known| {
        known.follower_said.iter().any(|said| {
            matches!(said, Message::Applied(said)
                if said.setting.ends_with("/1-1") && said.sink_sample == applied.sink_sample)
        })
    };
    let level = |known: &fake_server::Known| {
        let mut said = known.follower_said.iter();
        said.any(|said| matches!(said, Message::Occupancy(said) if said.level_samples == 0.25))
    };
    let playing = async {
        loop {
            next(&mut player).await;
        }
    };
    tokio::select! {
        () = playing => {}
        () = server.facility.until("both reports", |known| heard(known) && level(known)) => {}
    }
}

#[tokio::test]
async fn a_player_that_starts_alone_runs_what_was_kept() {
    let folder = tempfile::tempdir().expect("a folder");
    let mut server = facility(3);
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let mut watch = client.watch(&[id()]).keep_in(folder.path());
    let kept = next_setting(&mut watch).await;
    drop(watch);
    server.crash();

    let alone = Client::connect_later(&[&server.address()]).expect("an address");
    let mut watch = alone.watch(&[id()]).keep_in(folder.path());
    assert_eq!(next_setting(&mut watch).await, kept);
    assert_eq!(watch.freshness(&kept), Freshness::Stale);
    let options = PlayerOptions {
        keep_in: Some(folder.path().to_owned()),
        ..PlayerOptions::new(48_000, 48_000)
    };
    let (_, mut reader, _) = alone.play(&id(), options).expect("one ratio");
    let Realised::Cadence(cadence) = kept.realised else {
        panic!("a cadence was published");
    };
    let ratios = [cadence.low(), cadence.high()].map(|r| (*r.numer(), *r.denom()));
    let block = reader.next_block(0);
    assert!(ratios.contains(&(block.l, block.m)), "{block:?}");

    // It resumes from what it has, and hears the next.
    server.restart();
    server.facility.publish(in_force(4));
    assert_eq!(next_setting(&mut watch).await.number.number, 4);
    let name = "crossings/hall-to-van/settings/1-3".to_owned();
    assert_eq!(server.facility.known().newest_known, [name]);

    let file = folder.path().join("hall-to-van.setting");
    let mut bytes = std::fs::read(&file).expect("it was kept");
    let last = bytes.len() - 1;
    bytes[last] ^= 1;
    std::fs::write(&file, bytes).expect("the folder is ours");
    server.crash();
    let mut watch = alone.watch(&[id()]).keep_in(folder.path());
    let first = watch.next().await.expect("no refusal");
    assert!(
        matches!(first, Update::Lost(_)),
        "damaged is as good as none: {first:?}"
    );
}

#[tokio::test]
async fn what_was_kept_is_told_to_have_expired_without_any_daemon() {
    let folder = tempfile::tempdir().expect("a folder");
    let mut server = facility(1);
    server.facility.publish(v1::Setting {
        review_ns: HOUSE_NS + 100_000_000,
        expiry_ns: HOUSE_NS + 400_000_000,
        ..in_force(2)
    });
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let mut watch = client.watch(&[id()]).keep_in(folder.path());
    let kept = next_setting(&mut watch).await;
    assert_eq!(kept.number.number, 2);
    drop(watch);
    server.crash();

    let alone = Client::connect_later(&[&server.address()]).expect("an address");
    let options = PlayerOptions {
        keep_in: Some(folder.path().to_owned()),
        ..PlayerOptions::new(48_000, 48_000)
    };
    tokio::time::sleep(Duration::from_millis(500)).await;
    let watch = alone.watch(&[id()]).keep_in(folder.path());
    assert_eq!(watch.freshness(&kept), Freshness::Expired);
    let (mut player, _, _) = alone.play(&id(), options).expect("one ratio");
    let first = next(&mut player).await;
    assert!(
        matches!(first, Playing::Heard(Update::Setting(_))),
        "{first:?}"
    );
    assert_eq!(player.freshness(), Some(Freshness::Expired));
    // It goes on being run until the daemon, whose house time stands still, has another.
    server.facility.publish(in_force(3));
    server.restart();
    loop {
        match next(&mut player).await {
            Playing::Heard(Update::Setting(setting)) => {
                assert_eq!(setting.number.number, 3);
                break;
            }
            Playing::Heard(Update::Lost(_) | Update::Regained) => {}
            other => panic!("nothing else happens: {other:?}"),
        }
    }
    assert_eq!(player.freshness(), Some(Freshness::Current));
}

#[tokio::test]
async fn when_one_daemon_goes_the_next_is_asked() {
    let (mut one, mut other) = (facility(1), facility(1));
    let addresses = [one.address(), other.address()];
    let addresses = addresses.each_ref().map(String::as_str);
    let client = Client::connect_any(&addresses).await.expect("both listen");
    let mut watch = client.watch(&[id()]);
    next_setting(&mut watch).await;
    let (used, spare) = if client.address() == addresses[0] {
        (&mut one, &mut other)
    } else {
        (&mut other, &mut one)
    };
    used.crash();
    spare.facility.publish(in_force(2));
    assert_eq!(next_setting(&mut watch).await.number.number, 2);
    assert_eq!(client.address(), spare.address());
    assert!(client.crossing(&id()).await.is_ok(), "calls go there too");
}
