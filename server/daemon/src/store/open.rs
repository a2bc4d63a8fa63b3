//! Opening: tables, versions, snapshot and journal.

use std::path::Path;

use prost::Message;
use ratewright_control::{ENGINE_VERSION, Event, HouseNs};
use ratewright_proto::v1;
use rusqlite::{Connection, OptionalExtension};

use super::{
    Begin, History, Opened, Opening, Store, StoreError, database, lock::Lock, write::encode,
};
use crate::{convert, refused::Refused};

/// Version of the tables below.
const TABLES: i64 = 3;

const CREATE: &str = "
    CREATE TABLE snapshot (
        id INTEGER PRIMARY KEY CHECK (id = 1),
        epoch INTEGER NOT NULL,
        engine_version INTEGER NOT NULL,
        seq INTEGER NOT NULL,
        house_ns INTEGER NOT NULL,
        state BLOB NOT NULL
    ) STRICT;
    CREATE TABLE journal (
        seq INTEGER PRIMARY KEY,
        house_ns INTEGER NOT NULL,
        event BLOB NOT NULL
    ) STRICT;
    CREATE TABLE settings (
        crossing TEXT NOT NULL,
        epoch INTEGER NOT NULL,
        number INTEGER NOT NULL,
        setting BLOB NOT NULL,
        explanation TEXT NOT NULL,
        PRIMARY KEY (crossing, epoch, number)
    ) STRICT, WITHOUT ROWID;
    CREATE TABLE declarations (
        kind TEXT NOT NULL CHECK (kind IN ('clock', 'crossing')),
        id TEXT NOT NULL,
        declaration BLOB NOT NULL,
        PRIMARY KEY (kind, id)
    ) STRICT, WITHOUT ROWID;
";

/// What version 2 has more than version 1.
const ACTS: &str = "
    CREATE TABLE acts (
        place INTEGER PRIMARY KEY,
        crossing TEXT NOT NULL,
        act BLOB NOT NULL
    ) STRICT;
    CREATE INDEX acts_of_crossing ON acts (crossing, place);
";

/// What version 3 has otherwise: a row of the journal is a transaction's events, under the number and
/// the house time of the last of them.
const ROWS: &str = "
    ALTER TABLE journal RENAME COLUMN event TO events;
    PRAGMA user_version = 3;
";

/// The row of the snapshot, but for the state.
struct Head {
    epoch: u64,
    engine_version: u32,
    seq: i64,
    house_ns: HouseNs,
}

impl Store {
    /// Opens the store in `folder`, which is made if it is missing. `house_now_ns` is what house
    /// time would be by the system clock; a new epoch is numbered after it. Of each crossing at
    /// least `keep_settings` settings are kept.
    ///
    /// # Errors
    /// See [`StoreError`]. Nothing has been changed then.
    pub(crate) fn open(
        folder: &Path,
        opening: Opening,
        house_now_ns: HouseNs,
        keep_settings: u64,
    ) -> Result<Opened, StoreError> {
        let lock = Lock::take(folder)?;
        let db = Connection::open(database(folder))?;
        db.pragma_update(None, "journal_mode", "WAL")?;
        db.pragma_update(None, "synchronous", "FULL")?;
        create_tables(&db, folder)?;
        let head = read_head(&db)?;
        let journalled = newest_row(&db)?;
        let begin = match &head {
            None => Begin::Afresh {
                // Where a store was lost, followers may have heard of any epoch before.
                epoch: match opening {
                    Opening::Continue => 1,
                    Opening::NewEpoch => new_epoch(0, house_now_ns),
                },
                declarations: Vec::new(),
            },
            Some(head) => {
                let wanted = opening == Opening::NewEpoch;
                let new_epoch = wanted.then(|| new_epoch(head.epoch, house_now_ns));
                begin(&db, folder, head, new_epoch)?
            }
        };
        let snapshot = head.as_ref().map_or(0, |head| head.seq);
        let (newest, house_ns) = journalled.unwrap_or((0, 0));
        let floor_ns = head.map_or(0, |head| head.house_ns).max(house_ns);
        let history = History::open(&database(folder))?;
        let newest = newest.max(snapshot);
        let store = Store {
            db,
            newest,
            keep_settings,
            snapshot,
            _lock: lock,
        };
        Ok(Opened {
            store,
            history,
            floor_ns,
            begin,
        })
    }
}

/// Greater than any before, and than any that a daemon opened from the same backup meanwhile: the
/// seconds of house time cannot come twice.
fn new_epoch(before: u64, house_now_ns: HouseNs) -> u64 {
    let seconds = u64::try_from(house_now_ns / 1_000_000_000).unwrap_or(0);
    seconds.max(before + 1)
}

fn create_tables(db: &Connection, folder: &Path) -> Result<(), StoreError> {
    let found: i64 = db.pragma_query_value(None, "user_version", |row| row.get(0))?;
    if !(0..=TABLES).contains(&found) {
        return Err(StoreError::Tables {
            path: folder.to_path_buf(),
            found,
            known: TABLES,
        });
    }
    let transaction = db.unchecked_transaction()?;
    if found < 1 {
        transaction.execute_batch(CREATE)?;
    }
    if found < 2 {
        transaction.execute_batch(ACTS)?;
    }
    if found < 3 {
        make_lists(&transaction)?;
        transaction.execute_batch(ROWS)?;
    }
    Ok(transaction.commit()?)
}

/// Makes each event of a journal that has one in a row a list of one at its house time.
fn make_lists(db: &Connection) -> Result<(), StoreError> {
    let mut rows = db.prepare("SELECT seq, house_ns, event FROM journal")?;
    let rows = rows.query_map([], |row| Ok((row.get(0)?, row.get(1)?, row.get(2)?)))?;
    let mut update = db.prepare("UPDATE journal SET event = ? WHERE seq = ?")?;
    for row in rows.collect::<Result<Vec<_>, _>>()? {
        let (seq, house_ns, event): (i64, HouseNs, Vec<u8>) = row;
        // A list is its length and its items, and a pair the one and the other.
        let mut list = encode(&(1_usize, house_ns, 1_usize))?;
        list.extend(event);
        update.execute((list, seq))?;
    }
    Ok(())
}

fn begin(
    db: &Connection,
    folder: &Path,
    head: &Head,
    new_epoch: Option<u64>,
) -> Result<Begin, StoreError> {
    if head.engine_version == ENGINE_VERSION {
        return read_state(db, head, new_epoch);
    }
    match new_epoch {
        Some(epoch) => Ok(Begin::Afresh {
            epoch,
            declarations: read_declarations(db)?,
        }),
        None => Err(StoreError::EngineVersion {
            path: folder.to_path_buf(),
            found: head.engine_version,
            known: ENGINE_VERSION,
        }),
    }
}

fn read_head(db: &Connection) -> Result<Option<Head>, StoreError> {
    let query = "SELECT epoch, engine_version, seq, house_ns FROM snapshot";
    let head = db.query_row(query, [], |row| {
        Ok(Head {
            epoch: row.get(0)?,
            engine_version: row.get(1)?,
            seq: row.get(2)?,
            house_ns: row.get(3)?,
        })
    });
    Ok(head.optional()?)
}

fn newest_row(db: &Connection) -> Result<Option<(i64, HouseNs)>, StoreError> {
    let query = "SELECT seq, house_ns FROM journal ORDER BY seq DESC LIMIT 1";
    Ok(db
        .query_row(query, [], |row| Ok((row.get(0)?, row.get(1)?)))
        .optional()?)
}

fn read_state(db: &Connection, head: &Head, new_epoch: Option<u64>) -> Result<Begin, StoreError> {
    let state: Vec<u8> = db.query_row("SELECT state FROM snapshot", [], |row| row.get(0))?;
    let engine = postcard::from_bytes(&state)
        .map_err(|why| StoreError::Damaged("the engine's state", why.to_string()))?;
    let mut rows = db.prepare("SELECT events FROM journal WHERE seq > ? ORDER BY seq")?;
    let rows = rows.query_map([head.seq], |row| row.get::<_, Vec<u8>>(0))?;
    let mut journal = Vec::new();
    for row in rows {
        let lists: Vec<(HouseNs, Vec<Event>)> = postcard::from_bytes(&row?)
            .map_err(|why| StoreError::Damaged("a row of the journal", why.to_string()))?;
        for (house_ns, events) in lists {
            journal.extend(events.into_iter().map(|event| (house_ns, event)));
        }
    }
    Ok(Begin::Continue {
        engine: Box::new(engine),
        journal,
        new_epoch,
    })
}

/// Clocks first: a crossing can only be declared between clocks that are.
fn read_declarations(db: &Connection) -> Result<Vec<Event>, StoreError> {
    let mut rows = db.prepare("SELECT kind, declaration FROM declarations ORDER BY kind, id")?;
    let rows = rows.query_map([], |row| Ok((row.get(0)?, row.get(1)?)))?;
    let mut events = Vec::new();
    for row in rows {
        let (kind, declaration): (String, Vec<u8>) = row?;
        events.push(read_declaration(&kind, &declaration)?);
    }
    Ok(events)
}

fn read_declaration(kind: &str, bytes: &[u8]) -> Result<Event, StoreError> {
    let damaged = |why: String| StoreError::Damaged("a declaration", why);
    let refused = |why: Refused| damaged(why.to_string());
    if kind == "clock" {
        let clock = v1::Clock::decode(bytes).map_err(|why| damaged(why.to_string()))?;
        let clock = convert::clock::declaration("clock", Some(clock)).map_err(refused)?;
        return Ok(Event::DeclareClock(clock));
    }
    let crossing = v1::Crossing::decode(bytes).map_err(|why| damaged(why.to_string()))?;
    let crossing = convert::crossing::declaration("crossing", Some(crossing)).map_err(refused)?;
    Ok(Event::DeclareCrossing(crossing))
}
