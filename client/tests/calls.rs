//! The calls that ask once, and what their errors say.

mod fake_server;

use fake_server::{FakeServer, HOUSE_NS, nearest_setting};
use num_rational::Ratio;
use ratewright_client::{
    CallError, Client, ClockDeclaration, Id, LatencyTail, Oscillator, RefusalKind,
};
use ratewright_ratio::Bounds;

fn id(text: &str) -> Id {
    Id::new(text).expect("an id")
}

fn clock(text: &str) -> ClockDeclaration {
    ClockDeclaration {
        display_name: "Mixing desk".to_owned(),
        tolerance_ppm: Some(50.0),
        oscillator: Some(Oscillator::Oven),
        tail: Some(LatencyTail::CounterLate),
        quantum_ns: Some(20_833),
        statistics: true,
        ..ClockDeclaration::new(id(text), Ratio::new(48_000_000, 1_001))
    }
}

#[tokio::test]
async fn a_declaration_comes_back_as_it_was_made() {
    let server = FakeServer::start();
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let made = client
        .declare_clock(&clock("desk"))
        .await
        .expect("a good clock");
    assert_eq!(made.declaration, clock("desk"));
    assert_eq!(client.clock(&id("desk")).await.expect("it is there"), made);
    let again = client
        .declare_clock(&clock("desk"))
        .await
        .expect_err("the name is taken");
    assert!(again.is(RefusalKind::AlreadyExists), "{again}");
}

#[tokio::test]
async fn lists_turn_every_page() {
    let server = FakeServer::start();
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    for name in ["c", "a", "b"] {
        client
            .declare_clock(&clock(name))
            .await
            .expect("a good clock");
    }
    let clocks = client.clocks().await.expect("a list");
    let names: Vec<_> = clocks
        .iter()
        .map(|clock| clock.declaration.id.as_str())
        .collect();
    assert_eq!(names, ["a", "b", "c"]);
}

#[tokio::test]
async fn a_refusal_carries_its_field_violations() {
    let server = FakeServer::start();
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let bad = ClockDeclaration {
        tolerance_ppm: Some(20_000.0),
        ..clock("desk")
    };
    let Err(CallError::Refused(refusal)) = client.declare_clock(&bad).await else {
        panic!("20000 ppm is no clock");
    };
    assert_eq!(refusal.kind, RefusalKind::Invalid);
    assert_eq!(refusal.violations[0].field, "clock.tolerance_ppm");
    assert_eq!(
        refusal.violations[0].description,
        "20000: accepted are 0 to 10000"
    );
    assert!(
        refusal.to_string().contains("clock.tolerance_ppm"),
        "{refusal}"
    );
}

#[tokio::test]
async fn nobody_there_is_said_with_the_address() {
    let mut server = FakeServer::start();
    server.crash();
    let error = Client::connect(&server.address())
        .await
        .expect_err("it is gone");
    assert!(
        matches!(&error, CallError::Unreachable { address, .. } if *address == server.address())
    );
    assert!(error.to_string().contains("refused"), "{error}");
}

#[tokio::test]
async fn a_setting_can_be_fetched_verified_and_explained() {
    let server = FakeServer::start();
    server.facility.declare_crossing("hall-to-van", 256, 256);
    server
        .facility
        .publish(nearest_setting("hall-to-van", (3, 9), 1.0884, (256, 256)));
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let setting = client
        .setting(&id("hall-to-van"), None)
        .await
        .expect("there is one");
    assert_eq!(setting.name(), "crossings/hall-to-van/settings/3-9");
    let crossing = client
        .crossing(&id("hall-to-van"))
        .await
        .expect("it is declared");
    assert_eq!(crossing.status.setting.as_ref(), Some(&setting));
    assert_eq!(setting.verify(&crossing.declaration.bounds), Ok(()));
    let narrower = Bounds::new(16, 16).expect("bounds");
    assert!(setting.verify(&narrower).is_err());
    let (explained, lines) = client
        .explain(&id("hall-to-van"), Some(setting.number))
        .await
        .expect("it is explained");
    assert_eq!((explained, lines.len()), (setting, 1));
}

#[tokio::test]
async fn an_exchange_reads_the_callers_clock_twice() {
    let server = FakeServer::start();
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let mut clock_ns = 5_000;
    let exchange = client.exchange_time(|| {
        clock_ns += 1_000;
        clock_ns
    });
    let exchange = exchange.await.expect("an answer");
    assert_eq!((exchange.t1_ns, exchange.t4_ns), (6_000, 7_000));
    assert_eq!(
        (exchange.t2_ns, exchange.t3_ns),
        (HOUSE_NS, HOUSE_NS + 1_000)
    );
}
