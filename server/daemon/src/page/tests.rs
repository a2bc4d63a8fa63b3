//! The page over a board that the engine filled from the sample facility.

use axum::{
    body::{Body, to_bytes},
    http::Request,
};
use ratewright_control::{Engine, Event, HouseNs, Id};
use ratewright_rehearsal::{Facility, declare, rehearse, sample};
use tower::ServiceExt;

use super::*;
use crate::board::{Applied, ClockView, CrossingView, News};

const S: HouseNs = 1_000_000_000;

/// A board as it stands `age_s` after the sample facility began; house time runs on from there.
fn board(age_s: i64) -> (Arc<Board>, HouseClock) {
    let house = HouseClock::start(0, 0, 1.0);
    let now = house.now();
    let mut facility =
        Facility::new(sample::plan(), sample::SEED, now - age_s * S).expect("the plan is sound");
    let mut engine = Engine::new(1);
    declare(&mut engine, &facility, |_, _| ());
    rehearse(&mut engine, &mut facility, now, |_, _| ());
    let board = Board::new();
    board.publish(news(&engine, now));
    (Arc::new(board), house)
}

fn news(engine: &Engine, as_of_ns: HouseNs) -> News {
    let clocks = engine.clocks().map(|clock| ClockView {
        declaration: clock.clone(),
        estimate: engine
            .estimate(&clock.id, as_of_ns)
            .expect("it is declared"),
        as_of_ns,
    });
    let crossings = engine.crossings().map(|crossing| CrossingView {
        declaration: crossing.clone(),
        status: engine
            .status(&crossing.id, as_of_ns)
            .expect("it is declared"),
        as_of_ns,
    });
    News {
        clocks: clocks.collect(),
        crossings: crossings.collect(),
        ..News::default()
    }
}

async fn get_from(
    board: Arc<Board>,
    house: HouseClock,
    phase: Phase,
    path: &str,
) -> (StatusCode, String) {
    let readiness = Readiness::new();
    readiness.enter(phase);
    let request = Request::get(path)
        .body(Body::empty())
        .expect("the path is well formed");
    let answer = router(board, house, readiness)
        .oneshot(request)
        .await
        .expect("it never fails");
    let status = answer.status();
    let body = to_bytes(answer.into_body(), 1 << 22)
        .await
        .expect("the body is whole");
    (
        status,
        String::from_utf8(body.to_vec()).expect("the body is text"),
    )
}

async fn page_after(age_s: i64) -> String {
    let (board, house) = board(age_s);
    let (status, page) = get_from(board, house, Phase::Serving, "/").await;
    assert_eq!(status, StatusCode::OK);
    page
}

fn place(page: &str, text: &str) -> usize {
    page.find(text)
        .unwrap_or_else(|| panic!("{text:?} is not on the page"))
}

#[tokio::test]
async fn the_page_tells_what_is_lost_before_anything_else() {
    let page = page_after(sample::FERRY_OUTAGE.from_ns / S + 120).await;
    let sentence = "<strong>Host aboard the night ferry</strong> is in holdover: no readings for";
    assert!(place(&page, sentence) < place(&page, "<table"));
    // In the tables too the worst come first: the ferry's clocks before those that are locked.
    let clocks = place(&page, "id=\"clocks\"");
    let row = |title: &str| clocks + place(&page[clocks..], title);
    assert!(row("Desk aboard the ferry") < row("Mixing desk, dance hall"));
    assert!(row("Mixing desk, dance hall") < row("House word clock"));
}

#[tokio::test]
async fn the_page_has_every_clock_and_crossing_and_the_caution() {
    let page = page_after(300).await;
    let plan = sample::plan();
    for clock in plan.clocks() {
        place(&page, &clock.display_name);
    }
    for crossing in &plan.crossings {
        place(&page, &crossing.display_name);
    }
    place(&page, "Not a safety system.");
    place(&page, "30000/1001 Hz");
    place(&page, "All 12 crossings are holding");
}

/// Nothing from elsewhere, and no script or style that the policy would have to allow by exception.
#[tokio::test]
async fn the_page_needs_nobody_else() {
    let page = page_after(10).await;
    for foreign in ["http://", "https://", "//", "<style", "style=", "onclick"] {
        assert!(!page.contains(foreign), "{foreign} is on the page");
    }
}

#[tokio::test]
async fn names_are_escaped() {
    let mut engine = Engine::new(1);
    let mut clock = sample::plan().exact.remove(0);
    clock.display_name = "<script>alert('\"&')</script>".to_owned();
    engine
        .apply(&Event::DeclareClock(clock), 1)
        .expect("any text is a title");
    let board = Board::new();
    board.publish(news(&engine, 1));
    let house = HouseClock::start(0, 0, 1.0);
    let (_, page) = get_from(Arc::new(board), house, Phase::Serving, "/").await;
    place(&page, "&lt;script&gt;alert('&quot;&amp;')&lt;/script&gt;");
    assert!(!page.contains("<script>"));
}

#[tokio::test]
async fn an_empty_board_has_a_page() {
    let house = HouseClock::start(0, 0, 1.0);
    let (status, page) = get_from(Arc::default(), house, Phase::Serving, "/").await;
    assert_eq!(status, StatusCode::OK);
    place(&page, "Nothing is declared yet.");
}

#[tokio::test]
async fn readiness_follows_the_phase_and_liveness_does_not() {
    let expected = [
        (
            Phase::Recovering,
            StatusCode::SERVICE_UNAVAILABLE,
            "recovering\n",
        ),
        (Phase::Serving, StatusCode::OK, "serving\n"),
        (
            Phase::Draining,
            StatusCode::SERVICE_UNAVAILABLE,
            "draining\n",
        ),
    ];
    for (phase, status, text) in expected {
        let house = HouseClock::start(0, 0, 1.0);
        let ready = get_from(Arc::default(), house, phase, "/readyz").await;
        assert_eq!(ready, (status, text.to_owned()));
        let live = get_from(Arc::default(), house, phase, "/livez").await;
        assert_eq!(live.0, StatusCode::OK);
    }
}

/// Every metric of the documented table, and none that is not in it; no sample without HELP and TYPE.
#[tokio::test]
async fn the_metrics_are_those_of_the_table() {
    use std::{collections::BTreeSet, time::Duration};
    metrics::install();
    metrics::readings(1, 1);
    metrics::commit(1, Duration::from_millis(1));
    metrics::open_streams("watch", 1);
    metrics::applied(1_000_000);
    metrics::store(1, 4_096);
    let (board, house) = board(200);
    let named = Id::new("web").expect("an id");
    board.publish(News {
        applied: vec![Applied {
            crossing: named,
            setting: (0, 0),
            house_ns: 0,
        }],
        ..News::default()
    });
    let crossing = &board.crossings(None, 1)[0];
    metrics::setting(
        crossing
            .status
            .setting
            .as_ref()
            .expect("every crossing has one"),
        Some(0),
    );
    let (from, to) = (crossing.status.state, crossing.status.state);
    let (crossing, reason) = (crossing.declaration.id.clone(), String::new());
    metrics::transition(&ratewright_control::Transition::Crossing {
        crossing,
        from,
        to,
        reason,
    });
    let (_, text) = get_from(board, house, Phase::Serving, "/metrics").await;

    let table: BTreeSet<&str> = include_str!("../metrics/mod.rs")
        .lines()
        .filter_map(|line| line.strip_prefix("//! | `")?.split('`').next())
        .collect();
    let named = |kind: &str| -> BTreeSet<&str> {
        let names = text
            .lines()
            .filter_map(|line| line.strip_prefix(kind)?.split(' ').next());
        // What each system tells of a process is its own matter.
        names
            .map(|name| {
                if name.starts_with("process_") {
                    "process_*"
                } else {
                    name
                }
            })
            .collect()
    };
    assert_eq!(named("# TYPE "), table);
    assert_eq!(named("# HELP "), table);
    let base = |line: &str| {
        let name = line.split(['{', ' ']).next().unwrap_or_default().to_owned();
        let parts = ["_bucket", "_sum", "_count"].into_iter();
        parts.fold(name, |name, part| {
            name.strip_suffix(part).map_or(name.clone(), str::to_owned)
        })
    };
    for line in text
        .lines()
        .filter(|line| !line.starts_with('#') && !line.is_empty())
    {
        let known = line.starts_with("process_") || table.contains(base(line).as_str());
        assert!(known, "{line}");
        let value = line.rsplit(' ').next().unwrap_or_default();
        assert!(
            value == "+Inf" || value.parse::<f64>().is_ok_and(f64::is_finite),
            "{line}"
        );
    }
    assert!(text.contains("ratewright_clock_state{clock=\"house-word\",state=\"locked\"} 1"));
    assert!(text.contains("ratewright_crossing_headroom_samples{crossing=\"web\"} 64"));
}
