//! Start, health, restart and drain.

use std::time::{Duration, Instant};

use num_rational::Ratio;
use ratewright_control::{ClockDeclaration, Id};
use ratewright_proto::v1;
use ratewright_server::{
    Daemon, Opening, StartFault, StoreError,
    config::{Config, parse},
};
use tonic::{Code, Status, transport::Channel};
use tonic_health::pb::{
    HealthCheckRequest, health_check_response::ServingStatus, health_client::HealthClient,
};
use tonic_reflection::pb::v1::{
    ServerReflectionRequest, server_reflection_client::ServerReflectionClient,
    server_reflection_request::MessageRequest, server_reflection_response::MessageResponse,
};

use tonic_types::StatusExt as _;

use crate::facility::{Clients, Facility, counted, drift, reason};

/// How long a status asks to wait.
fn retry_after(status: &Status) -> Option<Duration> {
    let details = status.get_error_details();
    details.retry_info().and_then(|info| info.retry_delay)
}

async fn newest(clients: &mut Clients) -> v1::Setting {
    let name = "crossings/desk-to-stage/settings/latest".into();
    clients
        .ratios
        .get_setting(v1::GetSettingRequest { name })
        .await
        .unwrap()
        .into_inner()
}

#[tokio::test]
async fn health_and_reflection_are_served() {
    let facility = Facility::start().await;
    let mut health = HealthClient::new(facility.clients.channel.clone());
    for service in ["", "ratewright.v1.RatioService"] {
        let request = HealthCheckRequest {
            service: service.into(),
        };
        let answer = health.check(request).await.unwrap().into_inner();
        assert_eq!(answer.status(), ServingStatus::Serving);
    }
    let mut reflection = ServerReflectionClient::new(facility.clients.channel.clone());
    let message_request = Some(MessageRequest::ListServices(String::new()));
    let request = ServerReflectionRequest {
        host: String::new(),
        message_request,
    };
    let asked = tokio_stream::iter([request]);
    let mut answers = reflection
        .server_reflection_info(asked)
        .await
        .unwrap()
        .into_inner();
    let answer = answers
        .message()
        .await
        .unwrap()
        .unwrap()
        .message_response
        .unwrap();
    let MessageResponse::ListServicesResponse(list) = answer else {
        panic!("a list was asked for")
    };
    let names: Vec<String> = list
        .service
        .into_iter()
        .map(|service| service.name)
        .collect();
    for service in [
        "ClockService",
        "CrossingService",
        "ReadingService",
        "RatioService",
    ] {
        assert!(
            names.contains(&format!("ratewright.v1.{service}")),
            "{names:?}"
        );
    }
}

#[tokio::test]
async fn a_restart_goes_on_where_it_was() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let mut report = facility.clients.report().await;
    let readings = (1..=100)
        .map(|second| drift("desk", 5e-6, second))
        .collect();
    assert_eq!(report.batch(readings).await.accepted, 100);
    let before = newest(&mut facility.clients).await;
    let house_ns = facility.daemon.house().now();
    drop(report);

    let mut facility = facility.restart(Opening::Continue).await;
    assert!(facility.daemon.house().now() > house_ns);
    assert_eq!(newest(&mut facility.clients).await, before);
    let get = v1::GetClockRequest {
        name: "clocks/desk".into(),
    };
    let clock = facility
        .clients
        .clocks
        .get_clock(get)
        .await
        .unwrap()
        .into_inner();
    assert!((clock.estimate.unwrap().drift - 5e-6).abs() < 1e-7);

    let mut report = facility.clients.report().await;
    let again = report.batch(vec![drift("desk", 5e-6, 100)]).await;
    assert_eq!(
        again.refusals[0].field,
        "readings[0].frequency.reference_ns"
    );
    assert_eq!(
        report.batch(vec![drift("desk", 5e-6, 101)]).await.accepted,
        1
    );

    let crossing = Some(v1::Crossing {
        max_l: 77,
        ..crate::facility::crossing("desk-to-stage", "desk", "stage")
    });
    let update = v1::UpdateCrossingRequest {
        crossing,
        update_mask: None,
    };
    facility
        .clients
        .crossings
        .update_crossing(update)
        .await
        .unwrap();
    let after = newest(&mut facility.clients).await;
    assert_eq!(
        (after.epoch, after.number),
        (before.epoch, before.number + 1)
    );
}

#[tokio::test]
async fn a_new_epoch_numbers_afresh_and_keeps_the_rest() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let mut facility = facility.restart(Opening::NewEpoch).await;
    let name = "crossings/desk-to-stage".to_string();
    let get = v1::GetCrossingRequest { name: name.clone() };
    facility.clients.crossings.get_crossing(get).await.unwrap();
    let crossing = Some(v1::Crossing {
        max_l: 77,
        ..crate::facility::crossing("desk-to-stage", "desk", "stage")
    });
    let update = v1::UpdateCrossingRequest {
        crossing,
        update_mask: None,
    };
    facility
        .clients
        .crossings
        .update_crossing(update)
        .await
        .unwrap();
    let list = v1::ListSettingsRequest {
        parent: name,
        ..Default::default()
    };
    let listed = facility
        .clients
        .ratios
        .list_settings(list)
        .await
        .unwrap()
        .into_inner();
    assert!(listed.settings.first().unwrap().epoch > 1_700_000_000);
    assert_eq!(
        listed.settings.last().unwrap().name,
        "crossings/desk-to-stage/settings/1-1"
    );
}

#[tokio::test]
async fn what_the_configuration_declares_is_there_at_once() {
    let desk = ClockDeclaration {
        display_name: "Desk".into(),
        ..ClockDeclaration::new(Id::new("desk").unwrap(), Ratio::new(48_000_000, 1_001))
    };
    let mut facility = Facility::start_with(|config| config.clocks.push(desk)).await;
    let get = v1::GetClockRequest {
        name: "clocks/desk".into(),
    };
    let clock = facility
        .clients
        .clocks
        .get_clock(get)
        .await
        .unwrap()
        .into_inner();
    let rate = Some(v1::Rate {
        numerator: 48_000_000,
        denominator: 1_001,
    });
    assert_eq!(
        (clock.display_name.as_str(), clock.nominal_rate),
        ("Desk", rate)
    );
}

#[tokio::test]
async fn when_the_store_fails_nobody_hears_of_the_setting() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let request = v1::WatchSettingsRequest::default();
    let watch = facility
        .clients
        .ratios
        .watch_settings(request)
        .await
        .unwrap();
    let mut watch = watch.into_inner();
    watch.message().await.unwrap().unwrap();

    let database = rusqlite::Connection::open(facility.folder.path().join("ratewright.sqlite3"));
    let database = database.unwrap();
    let fail = "CREATE TRIGGER full BEFORE INSERT ON journal
                BEGIN SELECT RAISE(ABORT, 'the disk is full'); END";
    database.execute_batch(fail).unwrap();
    let refused = facility
        .clients
        .declare_crossing("late", "stage", "desk")
        .await
        .unwrap_err();
    assert_eq!(refused.code(), Code::Unavailable);
    let fault = facility.daemon.failed().await;
    assert!(fault.to_string().contains("the disk is full"), "{fault}");
    database.execute_batch("DROP TRIGGER full").unwrap();

    let mut facility = facility.restart(Opening::Continue).await;
    let told = watch.message().await.unwrap_err();
    assert_eq!(
        told.code(),
        Code::Unavailable,
        "the end is told, and no setting before it"
    );
    let get = v1::GetCrossingRequest {
        name: "crossings/late".into(),
    };
    let never = facility
        .clients
        .crossings
        .get_crossing(get)
        .await
        .unwrap_err();
    assert_eq!(never.code(), Code::NotFound);
    assert_eq!(newest(&mut facility.clients).await.number, 1);
}

#[tokio::test]
async fn a_store_in_use_is_refused() {
    let facility = Facility::start().await;
    let any = "127.0.0.1:0".parse().unwrap();
    let store = facility.folder.path().to_path_buf();
    let config = Config {
        grpc: any,
        people: any,
        store,
        ..Config::default()
    };
    let refused = Daemon::builder(config).start().await.unwrap_err();
    let StartFault::Recover(ratewright_server::RecoverFault::Store(fault)) = refused else {
        panic!("the store is the fault: {refused}")
    };
    assert!(matches!(fault, StoreError::InUse(_)), "{fault}");
}

#[tokio::test]
async fn declarations_are_read_again_whole_or_not_at_all_and_streams_go_on() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let watched = facility
        .clients
        .ratios
        .watch_settings(v1::WatchSettingsRequest::default());
    let mut watch = watched.await.unwrap().into_inner();
    watch.message().await.unwrap().unwrap();

    let added = "[[clock]]\nid = 'van'\nrate = 44100\n[[clock]]\nid = 'house'\nrate = 48000\n\
                 [[crossing]]\nid = 'van-in'\nsource = 'van'\nsink = 'house'\n";
    let taken = facility.daemon.redeclare(parse(added).unwrap()).await;
    assert_eq!(taken.unwrap(), 3);
    let heard = watch.message().await.unwrap().unwrap().setting.unwrap();
    assert_eq!(heard.crossing, "crossings/van-in");
    // Nothing has changed since.
    assert_eq!(
        facility
            .daemon
            .redeclare(parse(added).unwrap())
            .await
            .unwrap(),
        0
    );

    // The second is impossible for a clock that crossings use: the first is not taken either.
    let half = "[[clock]]\nid = 'bus'\nrate = 48000\n[[clock]]\nid = 'van'\nrate = '1/1000'\n";
    let refused = facility
        .daemon
        .redeclare(parse(half).unwrap())
        .await
        .unwrap_err();
    assert!(refused.to_string().contains("clocks/van"), "{refused}");
    let name = "clocks/bus".into();
    let never = facility
        .clients
        .clocks
        .get_clock(v1::GetClockRequest { name })
        .await;
    assert_eq!(never.unwrap_err().code(), Code::NotFound);
}

#[tokio::test]
async fn open_streams_are_told_of_the_drain_and_do_not_hold_it_up() {
    let mut facility = Facility::start().await;
    facility.clients.declare_pair().await;
    let request = v1::WatchSettingsRequest::default();
    let watch = facility
        .clients
        .ratios
        .watch_settings(request)
        .await
        .unwrap();
    let mut watch = watch.into_inner();
    watch.message().await.unwrap().unwrap();
    let mut report = facility.clients.report().await;
    assert_eq!(report.batch(vec![drift("desk", 1e-6, 1)]).await.accepted, 1);
    let mut health = HealthClient::new(facility.clients.channel.clone());
    let mut heard = health
        .watch(HealthCheckRequest::default())
        .await
        .unwrap()
        .into_inner();
    assert_eq!(
        heard.message().await.unwrap().unwrap().status(),
        ServingStatus::Serving
    );

    let started = Instant::now();
    let draining = tokio::spawn(facility.daemon.drain());
    let told = watch.message().await.unwrap_err();
    assert_eq!(
        (told.code(), reason(&told)),
        (Code::Unavailable, "GOING_AWAY".into())
    );
    assert_eq!(retry_after(&told), Some(Duration::from_secs(1)));
    let told = report.receipts.message().await.unwrap_err();
    assert_eq!(reason(&told), "GOING_AWAY");
    assert_eq!(
        heard.message().await.unwrap().unwrap().status(),
        ServingStatus::NotServing
    );
    draining.await.unwrap().unwrap();
    assert!(
        started.elapsed() < Duration::from_secs(9),
        "the grace time of 10 s was not needed"
    );
}

#[tokio::test]
async fn a_silent_connection_cannot_hold_up_the_drain_beyond_the_grace() {
    let grace = Duration::from_millis(600);
    let facility = Facility::start_with(|config| config.drain_grace = grace).await;
    let silent = tokio::net::TcpStream::connect(facility.daemon.grpc())
        .await
        .unwrap();
    tokio::time::sleep(Duration::from_millis(50)).await;
    let started = Instant::now();
    facility.daemon.drain().await.unwrap();
    assert!(started.elapsed() < grace + Duration::from_secs(5));
    drop(silent);
}

#[tokio::test]
async fn streams_are_counted_and_a_closed_one_frees_its_place() {
    let mut facility = Facility::start_with(|config| config.max_streams = 1).await;
    let request = v1::WatchSettingsRequest::default();
    let held = facility
        .clients
        .ratios
        .watch_settings(request.clone())
        .await
        .unwrap();
    // The transport counts as well, for each connection: ask on another one.
    let mut other = Clients::connect(facility.daemon.grpc()).await;
    let refused = other
        .ratios
        .watch_settings(request.clone())
        .await
        .unwrap_err();
    assert_eq!(
        (refused.code(), reason(&refused)),
        (Code::ResourceExhausted, "TOO_MANY_STREAMS".into())
    );
    drop(held);
    let freed = async {
        while other.ratios.watch_settings(request.clone()).await.is_err() {
            tokio::time::sleep(Duration::from_millis(5)).await;
        }
    };
    tokio::time::timeout(Duration::from_secs(10), freed)
        .await
        .expect("the place comes back");
}

#[tokio::test]
async fn one_connection_too_many_is_turned_away_and_a_closed_one_makes_room() {
    let facility = Facility::start_with(|config| config.max_connections = 1).await;
    let turned_away = counted("ratewright_connections_turned_away_total");
    let address = format!("http://{}", facility.daemon.grpc());
    let served = async || {
        let endpoint = Channel::from_shared(address.clone()).unwrap();
        let channel = endpoint.connect().await.ok()?;
        let mut clocks = v1::clock_service_client::ClockServiceClient::new(channel);
        clocks
            .list_clocks(v1::ListClocksRequest::default())
            .await
            .ok()
    };
    assert!(served().await.is_none());
    assert!(counted("ratewright_connections_turned_away_total") > turned_away);
    drop(facility.clients);
    let freed = async {
        while served().await.is_none() {
            tokio::time::sleep(Duration::from_millis(5)).await;
        }
    };
    tokio::time::timeout(Duration::from_secs(10), freed)
        .await
        .expect("the place comes back");
}

#[tokio::test]
async fn streams_of_an_old_connection_are_told_to_go_elsewhere() {
    let age = Duration::from_secs(1);
    let mut facility = Facility::start_with(|config| config.max_connection_age = Some(age)).await;
    let begun = Instant::now();
    facility.clients.declare_pair().await;
    let request = v1::WatchSettingsRequest::default();
    let clients = &mut facility.clients;
    let watch = clients.ratios.watch_settings(request.clone()).await;
    let mut watch = watch.unwrap().into_inner();
    watch.message().await.unwrap().unwrap();
    let mut report = clients.report().await;
    assert_eq!(report.batch(vec![drift("desk", 1e-6, 1)]).await.accepted, 1);

    let told = watch.message().await.unwrap_err();
    assert!(begun.elapsed() >= age.mul_f64(0.8), "{:?}", begun.elapsed());
    assert_eq!(
        (told.code(), reason(&told)),
        (Code::Unavailable, "GOING_AWAY".into())
    );
    assert_eq!(retry_after(&told), Some(Duration::ZERO));
    let told = report.receipts.message().await.unwrap_err();
    assert_eq!(reason(&told), "GOING_AWAY");

    // The channel makes a new connection; its first call may find the old one closing.
    let again = async {
        loop {
            if let Ok(watch) = clients.ratios.watch_settings(request.clone()).await {
                return watch.into_inner();
            }
            tokio::time::sleep(Duration::from_millis(5)).await;
        }
    };
    let mut watch = tokio::time::timeout(Duration::from_secs(10), again)
        .await
        .expect("the daemon still serves");
    watch.message().await.unwrap().unwrap();
    let told = watch.message().await.unwrap_err();
    assert_eq!(reason(&told), "GOING_AWAY", "as any other connection");
}
