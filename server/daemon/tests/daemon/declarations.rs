//! Clocks and crossings: the standard methods, and what they say when they refuse.

use prost_types::FieldMask;
use ratewright_proto::v1;
use tonic::Code;
use tonic_types::StatusExt as _;

use crate::facility::{Facility, clock, crossing, reason, violations};

fn paths(paths: &[&str]) -> Option<FieldMask> {
    Some(FieldMask {
        paths: paths.iter().map(ToString::to_string).collect(),
    })
}

#[tokio::test]
async fn a_clock_is_created_read_changed_and_deleted() {
    let mut facility = Facility::start().await;
    let clocks = &mut facility.clients.clocks;
    let request = v1::CreateClockRequest {
        clock: Some(clock("desk")),
    };
    let created = clocks
        .create_clock(request.clone())
        .await
        .unwrap()
        .into_inner();
    assert_eq!(created.display_name, "DESK");
    let estimate = created.estimate.clone().unwrap();
    assert_eq!(estimate.state(), v1::EstimateState::FreeRunning);
    assert_eq!(estimate.reference, "");

    let again = clocks.create_clock(request).await.unwrap_err();
    assert_eq!(
        (again.code(), reason(&again)),
        (Code::AlreadyExists, "ALREADY_DECLARED".into())
    );

    let sent = v1::Clock {
        display_name: "Desk 2".into(),
        tolerance_ppm: 3.0,
        ..created.clone()
    };
    let update = v1::UpdateClockRequest {
        clock: Some(sent),
        update_mask: paths(&["display_name"]),
    };
    let updated = clocks
        .update_clock(update.clone())
        .await
        .unwrap()
        .into_inner();
    assert_eq!(
        (updated.display_name.as_str(), updated.tolerance_ppm),
        ("Desk 2", 50.0)
    );
    assert_ne!(updated.etag, created.etag);

    let stale = clocks.update_clock(update).await.unwrap_err();
    assert_eq!(
        (stale.code(), reason(&stale)),
        (Code::Aborted, "STALE_ETAG".into())
    );

    let name = "clocks/desk".to_string();
    let delete = v1::DeleteClockRequest {
        name: name.clone(),
        etag: created.etag,
    };
    assert_eq!(
        clocks.delete_clock(delete).await.unwrap_err().code(),
        Code::Aborted
    );
    let delete = v1::DeleteClockRequest {
        name: name.clone(),
        etag: updated.etag,
    };
    clocks.delete_clock(delete).await.unwrap();
    let gone = clocks
        .get_clock(v1::GetClockRequest { name })
        .await
        .unwrap_err();
    assert_eq!(gone.code(), Code::NotFound);
    assert_eq!(
        gone.get_error_details()
            .resource_info()
            .unwrap()
            .resource_name,
        "clocks/desk"
    );
}

#[tokio::test]
async fn every_wrong_field_is_told_at_once() {
    let mut facility = Facility::start().await;
    let wrong = v1::Clock {
        name: "clocks/Desk".into(),
        nominal_rate: Some(v1::Rate {
            numerator: 48_000,
            denominator: 0,
        }),
        tolerance_ppm: f64::NAN,
        ..Default::default()
    };
    let request = v1::CreateClockRequest { clock: Some(wrong) };
    let status = facility
        .clients
        .clocks
        .create_clock(request)
        .await
        .unwrap_err();
    assert_eq!(
        (status.code(), reason(&status)),
        (Code::InvalidArgument, "FIELD_VIOLATION".into())
    );
    let told = violations(&status);
    let fields: Vec<&str> = told.iter().map(|(field, _)| field.as_str()).collect();
    assert_eq!(
        fields,
        [
            "clock.name",
            "clock.nominal_rate.denominator",
            "clock.tolerance_ppm"
        ]
    );
    assert_eq!(told[1].1, "is 0: accepted is 1 to 1000000000");
    assert!(
        told[2].1.starts_with("is NaN: accepted is 0"),
        "{}",
        told[2].1
    );
}

#[tokio::test]
async fn a_mask_that_names_no_field_is_refused_by_name() {
    let mut facility = Facility::start().await;
    facility.clients.declare_clock("desk").await.unwrap();
    let update_mask = paths(&["tolerance_ppm", "colour"]);
    let update = v1::UpdateClockRequest {
        clock: Some(clock("desk")),
        update_mask,
    };
    let status = facility
        .clients
        .clocks
        .update_clock(update)
        .await
        .unwrap_err();
    assert_eq!(violations(&status)[0].0, "update_mask.paths[1]");
    assert!(violations(&status)[0].1.contains("\"colour\""));
}

#[tokio::test]
async fn lists_go_on_page_by_page() {
    let mut facility = Facility::start().await;
    for index in 0..5 {
        facility
            .clients
            .declare_clock(&format!("c{index}"))
            .await
            .unwrap();
    }
    let clocks = &mut facility.clients.clocks;
    let mut names = Vec::new();
    let mut pages = 0;
    let mut page_token = String::new();
    loop {
        let request = v1::ListClocksRequest {
            page_size: 2,
            page_token,
        };
        let page = clocks.list_clocks(request).await.unwrap().into_inner();
        names.extend(page.clocks.into_iter().map(|clock| clock.name));
        pages += 1;
        page_token = page.next_page_token;
        if page_token.is_empty() {
            break;
        }
    }
    assert_eq!(
        names,
        [
            "clocks/c0",
            "clocks/c1",
            "clocks/c2",
            "clocks/c3",
            "clocks/c4"
        ]
    );
    assert_eq!(pages, 3);

    for (page_size, page_token, field) in [(-1, "", "page_size"), (2, "second", "page_token")] {
        let request = v1::ListClocksRequest {
            page_size,
            page_token: page_token.into(),
        };
        let status = clocks.list_clocks(request).await.unwrap_err();
        assert_eq!(violations(&status)[0].0, field);
    }
}

#[tokio::test]
async fn a_crossing_has_a_setting_at_once() {
    let mut facility = Facility::start().await;
    facility.clients.declare_clock("desk").await.unwrap();
    facility.clients.declare_clock("stage").await.unwrap();
    let created = facility
        .clients
        .declare_crossing("pass", "desk", "stage")
        .await
        .unwrap();
    let status = created.status.unwrap();
    assert_eq!(status.state(), v1::CrossingState::Waiting);
    let setting = status.setting.unwrap();
    assert_eq!(setting.name, "crossings/pass/settings/1-1");
    assert_eq!(setting.reason(), v1::SettingReason::First);

    let delete = v1::DeleteClockRequest {
        name: "clocks/desk".into(),
        etag: String::new(),
    };
    let used = facility
        .clients
        .clocks
        .delete_clock(delete)
        .await
        .unwrap_err();
    assert_eq!(used.code(), Code::FailedPrecondition);
    assert!(used.get_error_details().precondition_failure().is_some());
}

#[tokio::test]
async fn a_crossing_between_unknown_clocks_is_refused_by_name() {
    let mut facility = Facility::start().await;
    facility.clients.declare_clock("desk").await.unwrap();
    let status = facility
        .clients
        .declare_crossing("pass", "desk", "moon")
        .await
        .unwrap_err();
    assert_eq!(status.code(), Code::NotFound);
    assert_eq!(violations(&status)[0].0, "crossing.sink_clock");
    assert_eq!(
        status
            .get_error_details()
            .resource_info()
            .unwrap()
            .resource_name,
        "clocks/moon"
    );
}

#[tokio::test]
async fn a_deleted_crossing_never_reuses_its_numbers() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let name = "crossings/desk-to-stage".to_string();
    let delete = v1::DeleteCrossingRequest {
        name: name.clone(),
        etag: String::new(),
    };
    facility
        .clients
        .crossings
        .delete_crossing(delete)
        .await
        .unwrap();
    let get = v1::GetCrossingRequest { name: name.clone() };
    let gone = facility
        .clients
        .crossings
        .get_crossing(get)
        .await
        .unwrap_err();
    assert_eq!(gone.code(), Code::NotFound);

    let list = v1::ListSettingsRequest {
        parent: name,
        ..Default::default()
    };
    let kept = facility
        .clients
        .ratios
        .list_settings(list.clone())
        .await
        .unwrap()
        .into_inner();
    assert_eq!(kept.settings.len(), 1, "its settings stay readable");

    facility
        .clients
        .declare_crossing("desk-to-stage", "desk", "stage")
        .await
        .unwrap();
    let both = facility
        .clients
        .ratios
        .list_settings(list)
        .await
        .unwrap()
        .into_inner();
    let numbers: Vec<u64> = both.settings.iter().map(|setting| setting.number).collect();
    assert_eq!(numbers, [2, 1]);
}

#[tokio::test]
async fn an_update_of_a_crossing_keeps_what_the_mask_leaves_out() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let sent = v1::Crossing {
        headroom_samples: 10.0,
        max_l: 7,
        ..crossing("desk-to-stage", "x", "y")
    };
    let update_mask = paths(&["headroom_samples"]);
    let request = v1::UpdateCrossingRequest {
        crossing: Some(sent),
        update_mask,
    };
    let updated = facility
        .clients
        .crossings
        .update_crossing(request)
        .await
        .unwrap()
        .into_inner();
    assert_eq!((updated.headroom_samples, updated.max_l), (10.0, 1024));
    assert_eq!(updated.source_clock, "clocks/desk");
}

#[tokio::test]
async fn what_is_known_of_a_clock_beforehand_is_kept_and_changed_by_the_mask() {
    let mut facility = Facility::start().await;
    let clocks = &mut facility.clients.clocks;
    let sent = v1::Clock {
        oscillator: v1::Oscillator::Oven.into(),
        tail: v1::LatencyTail::CounterLate.into(),
        quantum_ns: 20_833,
        ..clock("desk")
    };
    let request = v1::CreateClockRequest {
        clock: Some(sent.clone()),
    };
    let created = clocks.create_clock(request).await.unwrap().into_inner();
    assert_eq!(created.oscillator(), v1::Oscillator::Oven);
    assert_eq!(created.tail(), v1::LatencyTail::CounterLate);
    assert_eq!((created.quantum_ns, created.fault.as_str()), (20_833, ""));

    let changed = v1::Clock {
        oscillator: v1::Oscillator::Atomic.into(),
        quantum_ns: 5,
        ..sent
    };
    let update = v1::UpdateClockRequest {
        clock: Some(changed.clone()),
        update_mask: paths(&["oscillator"]),
    };
    let updated = clocks.update_clock(update).await.unwrap().into_inner();
    assert_eq!(updated.oscillator(), v1::Oscillator::Atomic);
    assert_eq!(updated.quantum_ns, 20_833);

    let wrong = v1::Clock {
        oscillator: 99,
        quantum_ns: -1,
        ..changed
    };
    let update = v1::UpdateClockRequest {
        clock: Some(wrong),
        update_mask: None,
    };
    let refused = clocks.update_clock(update).await.unwrap_err();
    let told = violations(&refused);
    assert_eq!(told[0].0, "clock.oscillator");
    assert!(told[0].1.contains("OSCILLATOR_OVEN (3)"), "{}", told[0].1);
    assert_eq!(told[1].0, "clock.quantum_ns");
}

#[tokio::test]
async fn a_crossing_runs_in_the_way_its_resampler_can() {
    let mut facility = Facility::start().await;
    let clients = &mut facility.clients;
    clients.declare_clock("desk").await.unwrap();
    clients.declare_clock("stage").await.unwrap();
    for realisation in [
        v1::Realisation::Single,
        v1::Realisation::Cadence,
        v1::Realisation::Stepping,
        v1::Realisation::Lazy,
    ] {
        let id = format!("way-{}", realisation as i32);
        let sent = v1::Crossing {
            realisation: realisation.into(),
            pitch_limit_ppm: 2.5,
            ..crossing(&id, "desk", "stage")
        };
        let request = v1::CreateCrossingRequest {
            crossing: Some(sent),
        };
        let created = clients.crossings.create_crossing(request).await;
        let created = created.unwrap().into_inner();
        assert_eq!(created.realisation(), realisation);
        assert_eq!(created.pitch_limit_ppm, 2.5);
        let status = created.status.unwrap();
        assert_eq!(status.source_clock, "clocks/desk");
        assert_eq!((status.pin, status.needed), (None, None));
        assert!(status.setting.unwrap().realisation.is_some());
    }
    let sent = v1::Crossing {
        pitch_limit_ppm: 0.0,
        ..crossing("way-1", "desk", "stage")
    };
    let request = v1::UpdateCrossingRequest {
        crossing: Some(sent),
        update_mask: paths(&["pitch_limit_ppm"]),
    };
    let updated = clients.crossings.update_crossing(request).await;
    let updated = updated.unwrap().into_inner();
    assert_eq!(updated.pitch_limit_ppm, 20.0, "0 means the default");
    assert_eq!(updated.realisation(), v1::Realisation::Single);
}
