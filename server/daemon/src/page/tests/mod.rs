//! The pages over an engine that the sample facility filled.

mod closely;
mod glance;
mod planner;
mod scrape;

use axum::{
    body::{Body, to_bytes},
    http::{HeaderMap, Request},
};
use ratewright_control::{Engine, Event, HouseNs, Id, explain};
use ratewright_rehearsal::{Facility, Occasion, Plan, declare, rehearse, sample};
use tempfile::TempDir;
use tower::ServiceExt;

use super::*;
use crate::{
    board::{ClockView, CrossingView, News},
    chronicle::{Happening, What},
    store::{Group, Opening, Store},
};

const S: HouseNs = 1_000_000_000;

/// The pages with all that they are made from.
struct Rig {
    sources: Sources,
    /// Holds the history.
    _folder: TempDir,
}

impl Rig {
    /// As it stands `age_s` after the sample facility began; house time runs on from there.
    fn sample(age_s: i64) -> Self {
        Self::playing(sample::plan(), age_s)
    }

    /// The same with another plan.
    fn playing(plan: Plan, age_s: i64) -> Self {
        let house = HouseClock::start(0, 0, 1.0);
        let now = house.now();
        let mut facility =
            Facility::new(plan, sample::SEED, now - age_s * S).expect("a sound plan");
        let mut engine = Engine::new(1);
        let (board, mut made) = (Board::new(), Group::default());
        let mut witness = |engine: &Engine, occasion: Occasion<'_>| {
            let effects = occasion.result.as_ref().expect("the facility is sound");
            for setting in &effects.settings {
                let crossing = engine.crossing(&setting.crossing).expect("it is declared");
                made.settings
                    .push((setting.clone(), explain(setting, crossing)));
            }
            let happenings = effects.transitions.iter().map(|transition| Happening {
                at_ns: occasion.now_ns,
                what: What::Transition(transition.clone()),
            });
            board.publish(News {
                settings: effects.settings.clone(),
                happenings: happenings.collect(),
                ..News::default()
            });
        };
        declare(&mut engine, &facility, &mut witness);
        // A look every five seconds, as the board has them, over the last minutes.
        for ago_s in (0..=age_s.min(600)).rev().step_by(5) {
            rehearse(&mut engine, &mut facility, now - ago_s * S, &mut witness);
            board.publish(news(&engine, now - ago_s * S));
        }
        Self::over(engine, board, house, &made)
    }

    /// With nothing but what an engine holds.
    fn of(engine: Engine) -> Self {
        let (board, house) = (Board::new(), HouseClock::start(0, 0, 1.0));
        board.publish(news(&engine, house.now()));
        Self::over(engine, board, house, &Group::default())
    }

    fn over(engine: Engine, board: Board, house: HouseClock, made: &Group) -> Self {
        let folder = tempfile::tempdir().expect("a folder for the test");
        let opened =
            Store::open(folder.path(), Opening::Continue, 0, 1_000).expect("an empty folder");
        let mut store = opened.store;
        store.commit(made).expect("the store is sound");
        let readiness = Readiness::new();
        readiness.enter(Phase::Serving);
        let sources = Sources {
            board: Arc::new(board),
            house,
            readiness,
            desk: Desk::over(engine),
            history: opened.history,
        };
        Self {
            sources,
            _folder: folder,
        }
    }

    async fn answer(&self, path: &str) -> (StatusCode, HeaderMap, String) {
        let request = Request::get(path).body(Body::empty()).expect("a path");
        let answer = router(self.sources.clone()).oneshot(request).await;
        let (head, body) = answer.expect("it never fails").into_parts();
        let body = to_bytes(body, 1 << 23).await.expect("the body is whole");
        let text = String::from_utf8(body.to_vec()).expect("the body is text");
        (head.status, head.headers, text)
    }

    /// The page at a path where there is one.
    async fn page(&self, path: &str) -> String {
        let (status, _, text) = self.answer(path).await;
        assert_eq!(status, StatusCode::OK, "{path}: {text}");
        text
    }
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

/// Where a text stands on a page.
fn place(page: &str, text: &str) -> usize {
    page.find(text)
        .unwrap_or_else(|| panic!("{text:?} is not on the page"))
}

/// The part of a page from an element with this id on.
fn from<'a>(page: &'a str, id: &str) -> &'a str {
    &page[place(page, &format!("id=\"{id}\""))..]
}
