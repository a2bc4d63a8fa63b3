//! The operator's hand: pins, releases, changeovers, trials, and the record of who did what.

use std::time::Duration;

use ratewright_proto::v1::{self, act::What};
use ratewright_server::Opening;
use tokio::time::timeout;
use tonic::{Code, Status};

use crate::facility::{Clients, Facility, crossing, reason, violations};

const NAME: &str = "crossings/desk-to-stage";

/// Two sources, a sink, and the crossing `desk-to-stage` with a backup.
async fn declare(clients: &mut Clients, silent: bool) -> v1::Crossing {
    for id in ["desk", "spare", "stage"] {
        clients.declare_clock(id).await.unwrap();
    }
    let declared = v1::Crossing {
        backup_clock: "clocks/spare".into(),
        silent,
        ..crossing("desk-to-stage", "desk", "stage")
    };
    let request = v1::CreateCrossingRequest {
        crossing: Some(declared),
    };
    let created = clients.crossings.create_crossing(request).await;
    created.unwrap().into_inner()
}

async fn pin(clients: &mut Clients, by: &str, note: &str) -> Result<v1::CrossingStatus, Status> {
    let request = v1::PinCrossingRequest {
        name: NAME.into(),
        by: by.into(),
        note: note.into(),
    };
    let crossing = clients.crossings.pin_crossing(request).await?;
    Ok(crossing.into_inner().status.unwrap())
}

async fn release(clients: &mut Clients, by: &str) -> Result<v1::CrossingStatus, Status> {
    let request = v1::ReleaseCrossingRequest {
        name: NAME.into(),
        by: by.into(),
        note: String::new(),
    };
    let crossing = clients.crossings.release_crossing(request).await?;
    Ok(crossing.into_inner().status.unwrap())
}

async fn change_over(clients: &mut Clients, source: &str) -> Result<v1::CrossingStatus, Status> {
    let request = v1::ChangeOverRequest {
        name: NAME.into(),
        source_clock: format!("clocks/{source}"),
        by: "Ben".into(),
        note: "the desk is silent".into(),
    };
    let crossing = clients.crossings.change_over(request).await?;
    Ok(crossing.into_inner().status.unwrap())
}

async fn update(
    clients: &mut Clients,
    change: impl FnOnce(&mut v1::Crossing),
) -> Result<(), Status> {
    let mut sent = v1::Crossing {
        backup_clock: "clocks/spare".into(),
        ..crossing("desk-to-stage", "desk", "stage")
    };
    change(&mut sent);
    let request = v1::UpdateCrossingRequest {
        crossing: Some(sent),
        update_mask: None,
    };
    clients.crossings.update_crossing(request).await.map(drop)
}

/// Every act, in pages of two.
async fn acts(clients: &mut Clients) -> Vec<v1::Act> {
    let (mut acts, mut page_token) = (Vec::new(), String::new());
    loop {
        let request = v1::ListActsRequest {
            parent: NAME.into(),
            page_size: 2,
            page_token,
        };
        let page = clients.crossings.list_acts(request).await.unwrap();
        let page = page.into_inner();
        assert!(page.acts.len() <= 2);
        acts.extend(page.acts);
        page_token = page.next_page_token;
        if page_token.is_empty() {
            return acts;
        }
    }
}

#[tokio::test]
async fn every_act_leaves_who_when_and_what_through_a_restart() {
    let mut facility = Facility::start().await;
    let clients = &mut facility.clients;
    let declared = declare(clients, false).await;
    assert_eq!(declared.backup_clock, "clocks/spare");
    assert_eq!(acts(clients).await, []);

    let before_ns = facility.daemon.house().now();
    let pinned = pin(clients, "Ada", "on air").await.unwrap().pin.unwrap();
    assert_eq!(
        (pinned.by.as_str(), pinned.note.as_str()),
        ("Ada", "on air")
    );
    assert!(pinned.since_ns >= before_ns);
    let again = pin(clients, "Ben", "").await.unwrap_err();
    assert_eq!(
        (again.code(), reason(&again)),
        (Code::FailedPrecondition, "PRECONDITION".into())
    );
    let redeclared = update(clients, |it| it.max_l = 77).await.unwrap_err();
    assert_eq!(redeclared.code(), Code::FailedPrecondition);

    let mut facility = facility.restart(Opening::Continue).await;
    let clients = &mut facility.clients;
    let get = v1::GetCrossingRequest { name: NAME.into() };
    let found = clients.crossings.get_crossing(get).await.unwrap();
    assert_eq!(found.into_inner().status.unwrap().pin, Some(pinned.clone()));
    assert_eq!(release(clients, "Ada").await.unwrap().pin, None);
    let status = change_over(clients, "spare").await.unwrap();
    assert_eq!(status.source_clock, "clocks/spare");

    let acts = acts(clients).await;
    let done: Vec<_> = acts.iter().map(|act| act.what.clone().unwrap()).collect();
    let changed = v1::ChangedOver {
        from_clock: "clocks/desk".into(),
        to_clock: "clocks/spare".into(),
    };
    let expected = [
        What::ChangedOver(changed),
        What::Released(v1::Released {}),
        What::Pinned(v1::Pinned {}),
    ];
    assert_eq!(done, expected);
    let times: Vec<i64> = acts.iter().rev().map(|act| act.at_ns).collect();
    assert!(times.is_sorted(), "{times:?}");
    assert_eq!(acts[2].at_ns, pinned.since_ns);
    assert_eq!((acts[0].by.as_str(), acts[2].by.as_str()), ("Ben", "Ada"));
    assert_eq!(acts[2].note, "on air");
}

#[tokio::test]
async fn a_refused_act_names_the_field_and_leaves_no_record() {
    let mut facility = Facility::start().await;
    let clients = &mut facility.clients;
    declare(clients, false).await;
    let nameless = pin(clients, "", &"n".repeat(513)).await.unwrap_err();
    let fields: Vec<_> = violations(&nameless).into_iter().map(|(f, _)| f).collect();
    assert_eq!(fields, ["by", "note"]);
    let free = release(clients, "Ada").await.unwrap_err();
    assert_eq!(free.code(), Code::FailedPrecondition);
    let other = change_over(clients, "stage").await.unwrap_err();
    assert_eq!(violations(&other)[0].0, "source_clock");
    let same = change_over(clients, "desk").await.unwrap_err();
    assert_eq!(same.code(), Code::FailedPrecondition);
    assert_eq!(acts(clients).await, []);

    let unknown = v1::PinCrossingRequest {
        name: "crossings/moon".into(),
        by: "Ada".into(),
        note: String::new(),
    };
    let unknown = clients.crossings.pin_crossing(unknown).await.unwrap_err();
    assert_eq!(
        (unknown.code(), violations(&unknown)[0].0.as_str()),
        (Code::NotFound, "name")
    );
    let unknown = v1::ListActsRequest {
        parent: "crossings/moon".into(),
        ..Default::default()
    };
    let unknown = clients.crossings.list_acts(unknown).await.unwrap_err();
    assert_eq!(unknown.code(), Code::NotFound);
}

#[tokio::test]
async fn a_trial_is_recorded_and_explained_and_nobody_is_told_to_run_it() {
    let mut facility = Facility::start().await;
    let clients = &mut facility.clients;
    let request = v1::WatchSettingsRequest::default();
    let watch = clients.ratios.watch_settings(request.clone()).await;
    let mut watch = watch.unwrap().into_inner();
    let declared = declare(clients, true).await;
    let decided = declared.status.unwrap().setting.unwrap();
    clients
        .declare_crossing("other", "stage", "desk")
        .await
        .unwrap();
    let mut next = async || {
        let heard = timeout(Duration::from_secs(10), watch.message()).await;
        heard
            .expect("a setting comes soon")
            .unwrap()
            .unwrap()
            .setting
            .unwrap()
    };
    assert_eq!(
        next().await.crossing,
        "crossings/other",
        "the trial's is left out"
    );

    let name = format!("{NAME}/settings/latest");
    let get = v1::GetSettingRequest { name: name.clone() };
    let kept = clients.ratios.get_setting(get).await.unwrap().into_inner();
    assert_eq!(kept, decided);
    let explain = v1::ExplainSettingRequest { name };
    let explained = clients.ratios.explain_setting(explain).await.unwrap();
    assert!(explained.into_inner().lines.len() > 2);
    let list = v1::ListSettingsRequest {
        parent: NAME.into(),
        ..Default::default()
    };
    let listed = clients.ratios.list_settings(list).await.unwrap();
    assert_eq!(listed.into_inner().settings, [decided]);

    update(clients, |it| it.silent = false).await.unwrap();
    assert_eq!(next().await.name, format!("{NAME}/settings/1-2"));
    update(clients, |it| it.silent = true).await.unwrap();
    update(clients, |it| {
        it.silent = true;
        it.max_l = 512;
    })
    .await
    .unwrap();
    clients
        .declare_crossing("third", "stage", "desk")
        .await
        .unwrap();
    assert_eq!(next().await.crossing, "crossings/third");

    // Whoever comes later hears nothing of it either, and after a restart of the daemon nobody does.
    let mut facility = facility.restart(Opening::Continue).await;
    let watch = facility.clients.ratios.watch_settings(request).await;
    let mut watch = watch.unwrap().into_inner();
    let mut heard = Vec::new();
    for _ in 0..2 {
        let message = timeout(Duration::from_secs(10), watch.message()).await;
        let setting = message.unwrap().unwrap().unwrap().setting.unwrap();
        heard.push(setting.crossing);
    }
    heard.sort();
    assert_eq!(heard, ["crossings/other", "crossings/third"]);
    let nothing = timeout(Duration::from_millis(300), watch.message()).await;
    assert!(nothing.is_err(), "{nothing:?}");
}
