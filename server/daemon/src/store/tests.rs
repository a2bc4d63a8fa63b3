//! The store as a daemon sees it across restarts.

use num_rational::Ratio;
use ratewright_control::{
    Act, ActKind, ClockDeclaration, ENGINE_VERSION, Engine, Event, Evidence, Id, Realised, Reason,
    Setting,
};
use ratewright_ratio::{Bounds, Exact, Fraction, best};
use tempfile::TempDir;

use super::{Begin, Group, History, Opened, Opening, Store, StoreError};

fn folder() -> TempDir {
    tempfile::tempdir().unwrap()
}

fn open(folder: &TempDir) -> Opened {
    Store::open(folder.path(), Opening::Continue, 0, 1_000).unwrap()
}

/// A store that has begun, as a daemon's first start leaves it.
fn begun(folder: &TempDir) -> Opened {
    let mut opened = open(folder);
    let Begin::Afresh { epoch, .. } = opened.begin else {
        panic!("a new store begins afresh")
    };
    opened
        .store
        .begin_afresh(&Engine::new(epoch), epoch, 5, &Group::default())
        .unwrap();
    opened
}

fn clock(name: &str) -> Event {
    let rate = Ratio::from_integer(48_000);
    Event::DeclareClock(ClockDeclaration::new(Id::new(name).unwrap(), rate))
}

/// A setting of `desk-to-stage`.
pub(crate) fn setting(number: u64) -> Setting {
    let ratio = Fraction::new(160, 147);
    let target = Exact::new(160, 147);
    Setting {
        crossing: Id::new("desk-to-stage").unwrap(),
        epoch: 1,
        number,
        wanted: ratio,
        realised: Realised::Single(ratio),
        residual: 0.0,
        certificate: best(&target, &Bounds::new(256, 256).unwrap()).certificate,
        decided_ns: 10,
        effect_ns: 20,
        review_ns: 30,
        expiry_ns: 40,
        seconds_to_slip: None,
        reason: Reason::First,
        on_backup: false,
        silent: false,
        evidence: Evidence {
            target: 160.0 / 147.0,
            target_low: 1.0,
            target_high: 1.1,
            source_drift: 0.0,
            source_deviation: 1e-5,
            sink_drift: 0.0,
            sink_deviation: 1e-5,
            phase_error_samples: 0.0,
            phase_deviation_samples: 0.0,
            allowed_low: ratio,
            allowed_high: ratio,
            expected_hold_s: 60.0,
        },
    }
}

fn with_settings(numbers: std::ops::RangeInclusive<u64>) -> Group {
    let why = |number| vec![format!("number {number}"), "because".to_string()];
    let settings = numbers
        .map(|number| (setting(number), why(number)))
        .collect();
    Group {
        events: vec![(7, vec![Event::Tick])],
        settings,
        ..Group::default()
    }
}

fn journal(opened: &Opened) -> Vec<(i64, Event)> {
    match &opened.begin {
        Begin::Continue { journal, .. } => journal.clone(),
        Begin::Afresh { .. } => panic!("a store that has begun goes on"),
    }
}

#[test]
fn two_daemons_cannot_share_a_store() {
    let folder = folder();
    let first = open(&folder);
    let second = Store::open(folder.path(), Opening::Continue, 0, 1_000);
    assert!(matches!(second, Err(StoreError::InUse(_))), "{second:?}");
    drop(first);
    open(&folder);
}

#[test]
fn what_was_committed_is_read_back_in_order() {
    let folder = folder();
    let mut opened = begun(&folder);
    let at_once = vec![clock("desk"), Event::Tick];
    let group = Group {
        events: vec![(10, at_once), (25, vec![clock("stage")])],
        ..Group::default()
    };
    opened.store.commit(&group).unwrap();
    drop(opened);
    let opened = open(&folder);
    let events = [(10, clock("desk")), (10, Event::Tick), (25, clock("stage"))];
    assert_eq!(journal(&opened), events);
    assert_eq!(opened.floor_ns, 25);
}

#[test]
fn a_snapshot_takes_the_place_of_the_journal_which_is_trimmed_in_steps() {
    let folder = folder();
    let mut opened = begun(&folder);
    let ticks = |from: i64, to: i64| Group {
        events: (from..=to).map(|ns| (ns, vec![Event::Tick])).collect(),
        ..Group::default()
    };
    for end in 1..=3_000 {
        opened.store.commit(&ticks(end, end)).unwrap();
    }
    opened.store.commit(&ticks(3_001, 7_000)).unwrap();
    opened.store.write_snapshot(&Engine::new(1), 7_000).unwrap();
    let mut rows = Vec::new();
    for ns in 7_001..=7_004 {
        opened.store.commit(&ticks(ns, ns)).unwrap();
        let count = |row: &rusqlite::Row<'_>| row.get::<_, i64>(0);
        rows.push(
            opened
                .store
                .db
                .query_row("SELECT count(*) FROM journal", [], count)
                .unwrap(),
        );
    }
    // Two thousand short rows, the others, the long one, and nothing more.
    assert_eq!(rows, [1_002, 3, 3, 4]);
    assert_eq!(opened.store.since_snapshot(), 4);
    drop(opened);
    let opened = open(&folder);
    let times: Vec<i64> = journal(&opened).iter().map(|(ns, _)| *ns).collect();
    assert_eq!(times, [7_001, 7_002, 7_003, 7_004]);
}

#[test]
fn a_number_is_never_written_twice() {
    let folder = folder();
    let mut opened = begun(&folder);
    opened.store.commit(&with_settings(1..=2)).unwrap();
    let again = opened.store.commit(&with_settings(2..=3));
    assert!(matches!(again, Err(StoreError::Database(_))), "{again:?}");
    drop(opened);
    assert_eq!(
        journal(&open(&folder)).len(),
        1,
        "the refused group has left nothing behind"
    );
}

#[tokio::test]
async fn history_goes_back_page_by_page() {
    let folder = folder();
    let mut opened = begun(&folder);
    opened.store.commit(&with_settings(1..=5)).unwrap();
    let id = || Id::new("desk-to-stage").unwrap();
    let page = |before| {
        let found = opened.history.settings(id(), before, 2);
        async {
            found
                .await
                .unwrap()
                .iter()
                .map(|r| r.setting.number)
                .collect::<Vec<_>>()
        }
    };
    assert_eq!(page(None).await, [5, 4]);
    assert_eq!(page(Some((1, 4))).await, [3, 2]);
    assert_eq!(page(Some((1, 2))).await, [1]);
    let newest = opened.history.setting(id(), None).await.unwrap().unwrap();
    assert_eq!(newest.setting.name, "crossings/desk-to-stage/settings/1-5");
    assert_eq!(newest.explanation, ["number 5", "because"]);
    let third = opened
        .history
        .setting(id(), Some((1, 3)))
        .await
        .unwrap()
        .unwrap();
    assert_eq!(third.setting.number, 3);
    assert_eq!(
        opened.history.setting(id(), Some((2, 3))).await.unwrap(),
        None
    );
}

#[test]
fn another_engine_version_is_refused_and_told_what_to_do() {
    let folder = folder();
    let mut opened = begun(&folder);
    let events = vec![
        (10, vec![clock("desk"), clock("stage")]),
        (12, vec![Event::DeleteClock(Id::new("stage").unwrap())]),
    ];
    opened
        .store
        .commit(&Group {
            events,
            ..Group::default()
        })
        .unwrap();
    let newer = "UPDATE snapshot SET engine_version = engine_version + 1";
    opened.store.db.execute(newer, []).unwrap();
    drop(opened);
    let refused = Store::open(folder.path(), Opening::Continue, 0, 1_000).unwrap_err();
    assert!(
        matches!(refused, StoreError::EngineVersion { found, .. } if found == ENGINE_VERSION + 1)
    );
    assert!(refused.to_string().contains("--new-epoch"), "{refused}");
    let opened = Store::open(folder.path(), Opening::NewEpoch, 0, 1_000).unwrap();
    let Begin::Afresh {
        epoch,
        declarations,
    } = &opened.begin
    else {
        panic!("another engine's state cannot go on")
    };
    assert_eq!(
        (*epoch, declarations.as_slice()),
        (2, [clock("desk")].as_slice())
    );
}

#[test]
fn two_restores_of_one_backup_open_different_epochs() {
    let folder = folder();
    drop(begun(&folder));
    let epoch_at = |house_s: i64| {
        let opened = Store::open(
            folder.path(),
            Opening::NewEpoch,
            house_s * 1_000_000_000,
            1_000,
        );
        match opened.unwrap().begin {
            Begin::Continue {
                new_epoch: Some(epoch),
                ..
            } => epoch,
            other => panic!("the state goes on in a new epoch: {other:?}"),
        }
    };
    assert_eq!((epoch_at(1_000), epoch_at(1_007)), (1_000, 1_007));
}

#[test]
fn an_opened_epoch_is_remembered() {
    let folder = folder();
    let mut opened = begun(&folder);
    let events = vec![(10, vec![Event::OpenEpoch { epoch: 900 }])];
    opened
        .store
        .commit(&Group {
            events,
            ..Group::default()
        })
        .unwrap();
    drop(opened);
    let opened = Store::open(folder.path(), Opening::NewEpoch, 0, 1_000).unwrap();
    assert!(matches!(
        opened.begin,
        Begin::Continue {
            new_epoch: Some(901),
            ..
        }
    ));
}

#[test]
fn tables_of_another_version_are_refused() {
    let folder = folder();
    let opened = begun(&folder);
    opened
        .store
        .db
        .pragma_update(None, "user_version", 9)
        .unwrap();
    drop(opened);
    let refused = Store::open(folder.path(), Opening::NewEpoch, 0, 1_000).unwrap_err();
    assert!(
        matches!(
            refused,
            StoreError::Tables {
                found: 9,
                known: 3,
                ..
            }
        ),
        "{refused}"
    );
}

#[tokio::test]
async fn a_crossing_keeps_its_newest_settings_and_loses_older_ones_in_steps() {
    let folder = folder();
    drop(begun(&folder));
    let opened = Store::open(folder.path(), Opening::Continue, 0, 150).unwrap();
    let (mut store, history) = (opened.store, opened.history);
    let id = || Id::new("desk-to-stage").unwrap();
    let kept = async |history: &History| -> Vec<u64> {
        let found = history.settings(id(), None, usize::MAX >> 1).await.unwrap();
        found.iter().map(|r| r.setting.number).collect()
    };
    store.commit(&with_settings(1..=250)).unwrap();
    let newest = |kept: std::ops::RangeInclusive<u64>| kept.rev().collect::<Vec<_>>();
    assert_eq!(kept(&history).await, newest(101..=250));
    store.commit(&with_settings(251..=299)).unwrap();
    assert_eq!(kept(&history).await, newest(101..=299), "nobody looked");
    let other = Setting {
        crossing: Id::new("another").unwrap(),
        ..setting(300)
    };
    let group = Group {
        settings: vec![(other, Vec::new())],
        ..Group::default()
    };
    store.commit(&group).unwrap();
    assert_eq!(kept(&history).await, newest(101..=299), "by its own count");
    store.commit(&with_settings(300..=300)).unwrap();
    assert_eq!(kept(&history).await, newest(151..=300));
}

fn act(nr: i64) -> Act {
    Act {
        crossing: Id::new("desk-to-stage").unwrap(),
        by: "Ada".into(),
        note: format!("act {nr}"),
        at_ns: nr,
        what: ActKind::Pinned,
    }
}

fn with_acts(numbers: std::ops::RangeInclusive<i64>) -> Group {
    Group {
        acts: numbers.map(act).collect(),
        ..Group::default()
    }
}

#[tokio::test]
async fn acts_go_back_page_by_page() {
    let folder = folder();
    let mut opened = begun(&folder);
    opened.store.commit(&with_acts(1..=2)).unwrap();
    let other = Act {
        crossing: Id::new("another").unwrap(),
        ..act(9)
    };
    let group = Group {
        acts: vec![other],
        ..Group::default()
    };
    opened.store.commit(&group).unwrap();
    opened.store.commit(&with_acts(3..=3)).unwrap();
    let page = async |before, limit| {
        let id = Id::new("desk-to-stage").unwrap();
        let found = opened.history.acts(id, before, limit).await.unwrap();
        let times: Vec<i64> = found.iter().map(|(_, act)| act.at_ns).collect();
        (times, found.last().map(|(place, _)| *place))
    };
    let (first, last) = page(None, 2).await;
    assert_eq!(first, [3, 2]);
    assert_eq!(page(last, 2).await.0, [1]);
}

#[tokio::test]
async fn a_crossing_keeps_its_newest_acts() {
    let folder = folder();
    drop(begun(&folder));
    let opened = Store::open(folder.path(), Opening::Continue, 0, 3).unwrap();
    let (mut store, history) = (opened.store, opened.history);
    let other = Act {
        crossing: Id::new("another").unwrap(),
        ..act(0)
    };
    let of_another = Group {
        acts: vec![other],
        ..Group::default()
    };
    for group in [
        of_another,
        with_acts(1..=2),
        with_acts(3..=5),
        with_acts(6..=6),
    ] {
        store.commit(&group).unwrap();
    }
    let kept = async |crossing| {
        let found = history
            .acts(Id::new(crossing).unwrap(), None, 9)
            .await
            .unwrap();
        found.iter().map(|(_, act)| act.at_ns).collect::<Vec<_>>()
    };
    assert_eq!(kept("desk-to-stage").await, [6, 5, 4]);
    assert_eq!(kept("another").await, [0]);
}

/// A store of the first daemons has no acts yet, and those before these had a row an event.
#[test]
fn older_tables_are_brought_to_these() {
    let has_no_acts = "DROP TABLE acts; PRAGMA user_version = 1;";
    for (version, back) in [(1, has_no_acts), (2, "PRAGMA user_version = 2;")] {
        let folder = folder();
        let mut opened = begun(&folder);
        opened.store.commit(&with_settings(1..=3)).unwrap();
        let events = [clock("desk"), Event::Tick];
        for event in &events {
            let row = (
                opened.store.newest + 1,
                9,
                super::write::encode(event).unwrap(),
            );
            opened.store.newest += 1;
            let insert = "INSERT INTO journal VALUES (?, ?, ?)";
            opened.store.db.execute(insert, row).unwrap();
        }
        let of_before =
            "DELETE FROM journal WHERE seq = 1; ALTER TABLE journal RENAME COLUMN events TO event;";
        opened.store.db.execute_batch(of_before).unwrap();
        opened.store.db.execute_batch(back).unwrap();
        drop(opened);
        let mut opened = open(&folder);
        let found = journal(&opened);
        assert_eq!(
            found,
            events.map(|event| (9, event)),
            "of version {version}"
        );
        opened.store.commit(&with_acts(1..=1)).unwrap();
        drop(opened);
        assert_eq!(journal(&open(&folder)), found);
    }
}
