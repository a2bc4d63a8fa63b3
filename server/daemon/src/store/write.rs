//! Writing: groups of events, snapshots, and the trimming of what a snapshot made needless.

use prost::Message;
use ratewright_control::{Act, ENGINE_VERSION, Engine, Event, HouseNs, Setting};
use rusqlite::{OptionalExtension as _, Transaction, params};

use super::{Group, Store, StoreError};
use crate::convert;

/// Rows that one transaction trims at most, and events of the journal, unless the oldest row has more:
/// a large delete would hold up the group that waits behind it.
const TRIM_STEP: i64 = 2_000;
/// Each so many settings of a crossing its oldest ones are trimmed: to find where they begin takes
/// milliseconds.
const LOOK_EVERY: u64 = 100;

impl Store {
    /// Writes a group in one transaction. When this returns, it is on the disk.
    ///
    /// # Errors
    /// [`StoreError::Database`]; nothing of the group is written then.
    pub(crate) fn commit(&mut self, group: &Group) -> Result<(), StoreError> {
        let transaction = self.db.transaction()?;
        let newest = write_group(&transaction, self.newest, group)?;
        trim(&transaction, self.snapshot)?;
        for act in &group.acts {
            trim_acts(&transaction, act, self.keep_settings)?;
        }
        for (setting, _) in &group.settings {
            if setting.number.is_multiple_of(LOOK_EVERY) {
                trim_settings(&transaction, setting, self.keep_settings)?;
            }
        }
        transaction.commit()?;
        self.newest = newest;
        Ok(())
    }

    /// Begins with a fresh engine: the journal is emptied, and the group is its first.
    ///
    /// # Errors
    /// [`StoreError::Database`]; the store is as it was then.
    pub(crate) fn begin_afresh(
        &mut self,
        fresh: &Engine,
        epoch: u64,
        house_ns: HouseNs,
        group: &Group,
    ) -> Result<(), StoreError> {
        let state = encode(fresh)?;
        let transaction = self.db.transaction()?;
        transaction.execute("DELETE FROM journal", [])?;
        transaction.execute(
            "INSERT OR REPLACE INTO snapshot VALUES (1, ?, ?, ?, ?, ?)",
            params![epoch, ENGINE_VERSION, self.newest, house_ns, state],
        )?;
        let newest = write_group(&transaction, self.newest, group)?;
        transaction.commit()?;
        self.snapshot = self.newest;
        self.newest = newest;
        Ok(())
    }

    /// Writes the engine's state as of the newest event. The journal behind it is trimmed with the
    /// commits that follow.
    ///
    /// # Errors
    /// [`StoreError::Database`]; the snapshot before is still there then.
    pub(crate) fn write_snapshot(
        &mut self,
        engine: &Engine,
        house_ns: HouseNs,
    ) -> Result<(), StoreError> {
        let state = encode(engine)?;
        self.db.execute(
            "UPDATE snapshot SET engine_version = ?, seq = ?, house_ns = ?, state = ?",
            params![ENGINE_VERSION, self.newest, house_ns, state],
        )?;
        self.snapshot = self.newest;
        Ok(())
    }

    /// Events in the journal that the snapshot does not hold.
    pub(crate) fn since_snapshot(&self) -> i64 {
        self.newest - self.snapshot
    }

    /// Size of the database and of its log, bytes; 0 if the file system does not say.
    pub(crate) fn bytes(&self) -> u64 {
        let database = self.db.path().unwrap_or_default();
        let size = |path: String| std::fs::metadata(path).map_or(0, |found| found.len());
        size(database.to_owned()) + size(format!("{database}-wal"))
    }
}

pub(super) fn encode<T: serde::Serialize>(value: &T) -> Result<Vec<u8>, StoreError> {
    postcard::to_stdvec(value)
        .map_err(|why| StoreError::Damaged("a value to be written", why.to_string()))
}

/// Gives the number of the newest event, which was `newest` before.
fn write_group(to: &Transaction<'_>, newest: i64, group: &Group) -> Result<i64, StoreError> {
    let newest = newest + group.len() as i64;
    if let Some((house_ns, _)) = group.events.last() {
        to.prepare_cached("INSERT INTO journal VALUES (?, ?, ?)")?
            .execute(params![newest, house_ns, encode(&group.events)?])?;
    }
    for event in group.events.iter().flat_map(|(_, events)| events) {
        if let Event::OpenEpoch { epoch } = event {
            to.execute("UPDATE snapshot SET epoch = ?", [epoch])?;
        }
        write_declaration(to, event)?;
    }
    // A plain insert: a number that was there already is an error, never overwritten.
    let mut settings = to.prepare_cached("INSERT INTO settings VALUES (?, ?, ?, ?, ?)")?;
    for (setting, explanation) in &group.settings {
        let wire = convert::setting::setting_to_wire(setting).encode_to_vec();
        let crossing = setting.crossing.to_string();
        let row = params![
            crossing,
            setting.epoch,
            setting.number,
            wire,
            explanation.join("\n")
        ];
        settings.execute(row)?;
    }
    let mut acts = to.prepare_cached("INSERT INTO acts (crossing, act) VALUES (?, ?)")?;
    for act in &group.acts {
        let wire = convert::hand::act_to_wire(act).encode_to_vec();
        acts.execute(params![act.crossing.to_string(), wire])?;
    }
    Ok(newest)
}

fn write_declaration(to: &Transaction<'_>, event: &Event) -> Result<(), StoreError> {
    let (kind, id, declaration) = match event {
        Event::DeclareClock(clock) => {
            let wire = convert::clock::declaration_to_wire(clock).encode_to_vec();
            ("clock", &clock.id, Some(wire))
        }
        Event::DeclareCrossing(crossing) => {
            let wire = convert::crossing::declaration_to_wire(crossing).encode_to_vec();
            ("crossing", &crossing.id, Some(wire))
        }
        Event::DeleteClock(id) => ("clock", id, None),
        Event::DeleteCrossing(id) => ("crossing", id, None),
        _ => return Ok(()),
    };
    let id = id.to_string();
    match declaration {
        Some(wire) => to
            .prepare_cached("INSERT OR REPLACE INTO declarations VALUES (?, ?, ?)")?
            .execute(params![kind, id, wire])?,
        None => to
            .prepare_cached("DELETE FROM declarations WHERE kind = ? AND id = ?")?
            .execute(params![kind, id])?,
    };
    Ok(())
}

/// Drops the oldest rows that the snapshot holds, which ends with one.
fn trim(to: &Transaction<'_>, snapshot: i64) -> Result<(), StoreError> {
    let oldest: Option<i64> = to
        .prepare_cached("SELECT min(seq) FROM journal")?
        .query_row([], |row| row.get(0))?;
    if let Some(oldest) = oldest.filter(|&oldest| oldest <= snapshot) {
        to.prepare_cached("DELETE FROM journal WHERE seq <= ?")?
            .execute([snapshot.min(oldest + TRIM_STEP - 1)])?;
    }
    Ok(())
}

/// Drops acts on the crossing that are older than its `keep` newest.
fn trim_acts(to: &Transaction<'_>, newest: &Act, keep: u64) -> Result<(), StoreError> {
    to.prepare_cached(
        "DELETE FROM acts WHERE crossing = ?1 AND place <= (
             SELECT place FROM acts WHERE crossing = ?1
             ORDER BY place DESC LIMIT 1 OFFSET ?2)",
    )?
    .execute(params![newest.crossing.to_string(), keep])?;
    Ok(())
}

/// Drops settings of the crossing that are older than its `keep` newest, the oldest first.
fn trim_settings(to: &Transaction<'_>, newest: &Setting, keep: u64) -> Result<(), StoreError> {
    let crossing = newest.crossing.to_string();
    let oldest_kept = to
        .prepare_cached(
            "SELECT epoch, number FROM settings WHERE crossing = ?
             ORDER BY epoch DESC, number DESC LIMIT 1 OFFSET ?",
        )?
        .query_row(params![crossing, keep - 1], |row| {
            Ok((row.get::<_, u64>(0)?, row.get::<_, u64>(1)?))
        })
        .optional()?;
    let Some((epoch, number)) = oldest_kept else {
        return Ok(());
    };
    to.prepare_cached(
        "DELETE FROM settings WHERE crossing = ?1 AND (epoch, number) IN (
             SELECT epoch, number FROM settings
             WHERE crossing = ?1 AND (epoch, number) < (?2, ?3)
             ORDER BY epoch, number LIMIT ?4)",
    )?
    .execute(params![crossing, epoch, number, TRIM_STEP])?;
    Ok(())
}
