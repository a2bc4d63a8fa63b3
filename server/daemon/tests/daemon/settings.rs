//! Settings out: watch, follow, history, explanation.

use std::time::Duration;

use ratewright_proto::v1::{
    self, follow_settings_request::Message as Say, follow_settings_response::Message as Hear,
};
use tokio::{sync::mpsc, time::timeout};
use tokio_stream::wrappers::ReceiverStream;
use tonic::{Code, Streaming};

use crate::facility::{Clients, Facility, counted, crossing, violations};

const SOON: Duration = Duration::from_secs(10);

async fn watch(clients: &mut Clients, crossings: &[&str]) -> Streaming<v1::WatchSettingsResponse> {
    let crossings = crossings
        .iter()
        .map(|id| format!("crossings/{id}"))
        .collect();
    let request = v1::WatchSettingsRequest {
        crossings,
        newest_known: Vec::new(),
    };
    clients
        .ratios
        .watch_settings(request)
        .await
        .unwrap()
        .into_inner()
}

async fn next(watch: &mut Streaming<v1::WatchSettingsResponse>) -> v1::Setting {
    let heard = timeout(SOON, watch.message())
        .await
        .expect("a setting comes soon");
    heard.unwrap().unwrap().setting.unwrap()
}

/// Declares the crossing anew with another bound, which makes a setting.
async fn redeclare(clients: &mut Clients, id: &str, max_l: u64) {
    let crossing = Some(v1::Crossing {
        max_l,
        ..crossing(id, "desk", "stage")
    });
    let request = v1::UpdateCrossingRequest {
        crossing,
        update_mask: None,
    };
    clients.crossings.update_crossing(request).await.unwrap();
}

#[tokio::test]
async fn a_watch_begins_with_the_newest_and_hears_every_change() {
    let mut facility = Facility::start().await;
    let clients = &mut facility.clients;
    let mut all = watch(clients, &[]).await;
    clients.declare_pair().await;
    assert_eq!(
        next(&mut all).await.name,
        "crossings/desk-to-stage/settings/1-1"
    );
    let mut named = watch(clients, &["desk-to-stage"]).await;
    assert_eq!(next(&mut named).await.number, 1);

    clients
        .declare_crossing("other", "stage", "desk")
        .await
        .unwrap();
    assert_eq!(next(&mut all).await.crossing, "crossings/other");
    redeclare(clients, "desk-to-stage", 512).await;
    let setting = next(&mut named).await;
    assert_eq!(
        (setting.number, setting.reason()),
        (2, v1::SettingReason::Declaration)
    );
    assert_eq!(next(&mut all).await.name, setting.name);
}

#[tokio::test]
async fn a_slow_watcher_gets_the_newest_and_not_each() {
    let mut facility = Facility::start().await;
    let clients = &mut facility.clients;
    clients.declare_pair().await;
    // A window of a few settings: what the network holds for a reader is not the daemon's.
    let superseded = counted("ratewright_superseded_total");
    let mut narrow = Clients::connect_narrow(facility.daemon.grpc(), 4_096).await;
    let mut slow = watch(&mut narrow, &[]).await;
    for round in 0..100 {
        redeclare(clients, "desk-to-stage", 500 + round).await;
    }
    let mut heard = vec![next(&mut slow).await.number];
    while *heard.last().unwrap() < 101 {
        heard.push(next(&mut slow).await.number);
    }
    assert!(heard.is_sorted() && heard.len() < 30, "{heard:?}");
    let missed = 101 - heard.len() as u64;
    let all_counted = async {
        while counted("ratewright_superseded_total") < superseded + missed {
            tokio::time::sleep(Duration::from_millis(5)).await;
        }
    };
    timeout(SOON, all_counted).await.expect("each is counted");
}

#[tokio::test]
async fn a_reader_that_resumes_hears_only_what_it_has_not() {
    let mut facility = Facility::start().await;
    let clients = &mut facility.clients;
    clients.declare_pair().await;
    clients
        .declare_crossing("other", "stage", "desk")
        .await
        .unwrap();
    let resume = |known: &str| v1::WatchSettingsRequest {
        crossings: Vec::new(),
        newest_known: vec![known.to_owned()],
    };
    let request = resume("crossings/desk-to-stage/settings/1-1");
    let answer = clients.ratios.watch_settings(request).await.unwrap();
    let mut watch = answer.into_inner();
    let first = timeout(SOON, watch.message()).await.unwrap();
    let first = first.unwrap().unwrap();
    assert!(first.setting.is_none() && first.house_ns > 0, "{first:?}");
    assert_eq!(next(&mut watch).await.crossing, "crossings/other");
    redeclare(clients, "desk-to-stage", 512).await;
    assert_eq!(
        next(&mut watch).await.name,
        "crossings/desk-to-stage/settings/1-2"
    );

    for name in [
        "crossings/desk-to-stage",
        "crossings/desk-to-stage/settings/latest",
    ] {
        let refused = clients.ratios.watch_settings(resume(name)).await;
        assert_eq!(violations(&refused.unwrap_err())[0].0, "newest_known[0]");
    }
}

#[tokio::test]
async fn watching_an_unknown_crossing_is_refused() {
    let mut facility = Facility::start().await;
    let request = v1::WatchSettingsRequest {
        crossings: vec!["crossings/moon".into()],
        newest_known: Vec::new(),
    };
    let status = facility
        .clients
        .ratios
        .watch_settings(request)
        .await
        .unwrap_err();
    assert_eq!(status.code(), Code::NotFound);
    assert_eq!(violations(&status)[0].0, "crossings[0]");
}

struct Follow {
    say: mpsc::Sender<v1::FollowSettingsRequest>,
    hear: Streaming<v1::FollowSettingsResponse>,
}

impl Follow {
    async fn start(clients: &mut Clients) -> Self {
        let (say, said) = mpsc::channel(8);
        let select = v1::WatchSettingsRequest {
            crossings: vec!["crossings/desk-to-stage".into()],
            newest_known: Vec::new(),
        };
        say.send(v1::FollowSettingsRequest {
            message: Some(Say::Select(select)),
        })
        .await
        .unwrap();
        let hear = clients
            .ratios
            .follow_settings(ReceiverStream::new(said))
            .await
            .unwrap();
        Self {
            say,
            hear: hear.into_inner(),
        }
    }

    async fn say(&self, message: Say) {
        self.say
            .send(v1::FollowSettingsRequest {
                message: Some(message),
            })
            .await
            .unwrap();
    }

    async fn hear(&mut self) -> Hear {
        let heard = timeout(SOON, self.hear.message())
            .await
            .expect("an answer comes soon");
        heard.unwrap().unwrap().message.unwrap()
    }
}

#[tokio::test]
async fn a_follower_reports_and_a_bad_report_leaves_the_stream_open() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let mut follow = Follow::start(&mut facility.clients).await;
    let Hear::Setting(setting) = follow.hear().await else {
        panic!("the newest setting comes first")
    };
    assert_eq!(setting.number, 1);

    let never = "crossings/desk-to-stage/settings/1-99".to_string();
    let house_ns = setting.effect_ns;
    follow
        .say(Say::Applied(v1::Applied {
            setting: never,
            house_ns,
            sink_sample: 4,
        }))
        .await;
    let Hear::Refused(refusal) = follow.hear().await else {
        panic!("a wrong number is refused")
    };
    assert_eq!(refusal.field, "applied.setting");
    assert_eq!(refusal.value, "crossings/desk-to-stage/settings/1-99");
    assert_eq!(
        (refusal.crossing.as_str(), refusal.report),
        ("crossings/desk-to-stage", 1)
    );

    let level = v1::Occupancy {
        crossing: setting.crossing.clone(),
        level_samples: f64::NAN,
        deviation_samples: 1.0,
        house_ns,
    };
    follow.say(Say::Occupancy(level)).await;
    let Hear::Refused(refusal) = follow.hear().await else {
        panic!("NaN is refused")
    };
    assert_eq!(
        (refusal.field.as_str(), refusal.value.as_str()),
        ("occupancy.level_samples", "NaN")
    );

    redeclare(&mut facility.clients, "desk-to-stage", 512).await;
    let Hear::Setting(setting) = follow.hear().await else {
        panic!("the stream goes on")
    };
    assert_eq!(setting.number, 2);
}

#[tokio::test]
async fn a_follower_has_no_word_on_a_crossing_that_it_did_not_select() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let clients = &mut facility.clients;
    clients
        .declare_crossing("stage-to-desk", "stage", "desk")
        .await
        .unwrap();
    let crossing = "crossings/stage-to-desk".to_owned();
    let mut follow = Follow::start(&mut facility.clients).await;
    let Hear::Setting(selected) = follow.hear().await else {
        panic!("the newest setting comes first")
    };
    let house_ns = selected.effect_ns;
    let reports = [
        Say::Occupancy(v1::Occupancy {
            crossing: crossing.clone(),
            level_samples: 1.0,
            deviation_samples: 0.5,
            house_ns,
        }),
        Say::Applied(v1::Applied {
            setting: format!("{crossing}/settings/1-1"),
            house_ns,
            sink_sample: 0,
        }),
    ];
    for ((report, field), nth) in reports
        .into_iter()
        .zip(["occupancy.crossing", "applied.setting"])
        .zip(1..)
    {
        follow.say(report).await;
        let Hear::Refused(refusal) = follow.hear().await else {
            panic!("another's report is refused")
        };
        assert_eq!(refusal.field, field);
        assert_eq!((refusal.crossing, refusal.report), (crossing.clone(), nth));
        assert!(
            refusal.accepted.contains("selected"),
            "{}",
            refusal.accepted
        );
    }
}

#[tokio::test]
async fn a_follow_that_selects_nothing_is_refused() {
    let mut facility = Facility::start().await;
    let first = v1::FollowSettingsRequest { message: None };
    let said = tokio_stream::iter([first]);
    let status = facility
        .clients
        .ratios
        .follow_settings(said)
        .await
        .unwrap_err();
    assert_eq!(violations(&status)[0].0, "message");
}

#[tokio::test]
async fn settings_stay_readable_and_explained() {
    let mut facility = Facility::start().await;
    let clients = &mut facility.clients;
    clients.declare_pair().await;
    redeclare(clients, "desk-to-stage", 512).await;
    redeclare(clients, "desk-to-stage", 256).await;
    let parent = "crossings/desk-to-stage".to_string();
    let request = v1::ListSettingsRequest {
        parent: parent.clone(),
        page_size: 2,
        ..Default::default()
    };
    let first = clients
        .ratios
        .list_settings(request.clone())
        .await
        .unwrap()
        .into_inner();
    let page_token = first.next_page_token.clone();
    let rest = v1::ListSettingsRequest {
        page_token,
        ..request
    };
    let rest = clients
        .ratios
        .list_settings(rest)
        .await
        .unwrap()
        .into_inner();
    let numbers: Vec<u64> = first
        .settings
        .iter()
        .chain(&rest.settings)
        .map(|setting| setting.number)
        .collect();
    assert_eq!(
        (numbers.as_slice(), rest.next_page_token.as_str()),
        ([3, 2, 1].as_slice(), "")
    );

    for (last, number) in [("latest", 3), ("1-2", 2)] {
        let name = format!("{parent}/settings/{last}");
        let get = v1::GetSettingRequest { name: name.clone() };
        assert_eq!(
            clients
                .ratios
                .get_setting(get)
                .await
                .unwrap()
                .into_inner()
                .number,
            number
        );
        let explain = v1::ExplainSettingRequest { name };
        let explained = clients
            .ratios
            .explain_setting(explain)
            .await
            .unwrap()
            .into_inner();
        assert_eq!(explained.setting.unwrap().number, number);
        assert!(explained.lines.len() > 2, "{:?}", explained.lines);
    }
    let missing = v1::GetSettingRequest {
        name: format!("{parent}/settings/1-9"),
    };
    assert_eq!(
        clients
            .ratios
            .get_setting(missing)
            .await
            .unwrap_err()
            .code(),
        Code::NotFound
    );
    let unknown = v1::ListSettingsRequest {
        parent: "crossings/moon".into(),
        ..Default::default()
    };
    assert_eq!(
        clients
            .ratios
            .list_settings(unknown)
            .await
            .unwrap_err()
            .code(),
        Code::NotFound
    );
}
