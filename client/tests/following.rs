//! A follower's own words.

mod fake_server;

use std::time::Duration;

use fake_server::{FakeServer, HOUSE_NS, nearest_setting};
use ratewright_client::{Client, Follow, Id, Update};
use ratewright_proto::v1;
use v1::follow_settings_request::Message;

fn id(text: &str) -> Id {
    Id::new(text).expect("an id")
}

async fn next(follow: &mut Follow) -> Update {
    let next = tokio::time::timeout(Duration::from_secs(20), follow.next());
    next.await.expect("within 20 s").expect("no refusal")
}

#[tokio::test]
async fn what_was_applied_is_said_and_said_again_after_a_crash() {
    let mut server = FakeServer::start();
    server.facility.declare_crossing("hall-to-van", 256, 256);
    server
        .facility
        .publish(nearest_setting("hall-to-van", (1, 1), 1.0884, (256, 256)));
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let mut follow = client.follow(&[id("hall-to-van")]);
    let Update::Setting(setting) = next(&mut follow).await else {
        panic!("a setting was due")
    };
    let effect_ns = setting.effect_ns + 2_000;
    follow.applied(&setting, effect_ns, 96_000).await;
    follow
        .occupancy(&setting.crossing, 0.25, 0.01, HOUSE_NS)
        .await;
    server
        .facility
        .until("both reports", |known| known.follower_said.len() == 2)
        .await;

    server.crash();
    assert!(matches!(next(&mut follow).await, Update::Lost(_)));
    follow
        .occupancy(&setting.crossing, 0.5, 0.01, HOUSE_NS)
        .await;
    server.restart();
    while next(&mut follow).await != Update::Regained {}
    server
        .facility
        .until("it is said again", |known| known.follower_said.len() == 3)
        .await;
    let applied = Message::Applied(v1::Applied {
        setting: "crossings/hall-to-van/settings/1-1".to_owned(),
        house_ns: effect_ns,
        sink_sample: 96_000,
    });
    let said = server.facility.known().follower_said.clone();
    assert_eq!(
        (&said[0], &said[2]),
        (&applied, &applied),
        "the old level is not"
    );
}

#[tokio::test]
async fn a_refused_report_leaves_the_stream_open() {
    let server = FakeServer::start();
    server.facility.declare_crossing("hall-to-van", 256, 256);
    server
        .facility
        .publish(nearest_setting("hall-to-van", (1, 1), 1.0884, (256, 256)));
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let mut follow = client.follow(&[]);
    assert!(matches!(next(&mut follow).await, Update::Setting(_)));
    follow
        .occupancy(&id("hall-to-van"), 0.25, 0.0, HOUSE_NS)
        .await;
    let Update::ReportRefused {
        field,
        value,
        crossing,
        ..
    } = next(&mut follow).await
    else {
        panic!("a deviation of 0 is refused");
    };
    assert_eq!(
        (field.as_str(), value.as_str()),
        ("occupancy.deviation_samples", "0")
    );
    assert_eq!(crossing, Some(id("hall-to-van")));
    server
        .facility
        .publish(nearest_setting("hall-to-van", (1, 2), 1.0885, (256, 256)));
    assert!(matches!(next(&mut follow).await, Update::Setting(_)));
}
