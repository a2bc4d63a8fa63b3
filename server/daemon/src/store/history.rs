//! Looking back: settings by name and by page, on a connection of its own, so that the writer
//! never waits for a reader.

use std::{
    path::Path,
    sync::{Arc, Mutex, PoisonError},
};

use prost::Message;
use ratewright_control::Id;
use ratewright_proto::v1;
use rusqlite::{Connection, OpenFlags, OptionalExtension, Row, params};

use super::StoreError;

/// The settings that are kept, and the acts of operators. Cheap to clone.
#[derive(Clone, Debug)]
pub(crate) struct History(Arc<Mutex<Connection>>);

/// A setting and why it was chosen, as it was written.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Recorded {
    pub(crate) setting: v1::Setting,
    pub(crate) explanation: Vec<String>,
}

impl History {
    pub(super) fn open(database: &Path) -> Result<Self, StoreError> {
        let flags = OpenFlags::SQLITE_OPEN_READ_ONLY | OpenFlags::SQLITE_OPEN_NO_MUTEX;
        Ok(Self(Arc::new(Mutex::new(Connection::open_with_flags(
            database, flags,
        )?))))
    }

    /// The setting of this number, or the newest one.
    pub(crate) async fn setting(
        &self,
        crossing: Id,
        numbered: Option<(u64, u64)>,
    ) -> Result<Option<Recorded>, StoreError> {
        self.read(move |db| {
            let (newest, sql) = match numbered {
                Some(number) => (number, "AND epoch = ? AND number = ?"),
                None => (
                    (i64::MAX as u64, i64::MAX as u64),
                    "AND (epoch, number) <= (?, ?)",
                ),
            };
            let sql = format!(
                "SELECT setting, explanation FROM settings WHERE crossing = ? {sql}
                 ORDER BY epoch DESC, number DESC LIMIT 1"
            );
            let found = db
                .prepare_cached(&sql)?
                .query_row(params![crossing.to_string(), newest.0, newest.1], columns)
                .optional()?;
            found.map(decode).transpose()
        })
        .await
    }

    /// At most `limit` settings of a crossing, newest first, from the first one before `before`.
    pub(crate) async fn settings(
        &self,
        crossing: Id,
        before: Option<(u64, u64)>,
        limit: usize,
    ) -> Result<Vec<Recorded>, StoreError> {
        self.read(move |db| {
            let before = before.unwrap_or((i64::MAX as u64, i64::MAX as u64));
            let mut query = db.prepare_cached(
                "SELECT setting, explanation FROM settings
                 WHERE crossing = ? AND (epoch, number) < (?, ?)
                 ORDER BY epoch DESC, number DESC LIMIT ?",
            )?;
            let range = params![crossing.to_string(), before.0, before.1, limit as i64];
            query
                .query_map(range, columns)?
                .map(|row| decode(row?))
                .collect()
        })
        .await
    }

    /// At most `limit` acts on a crossing, newest first, from the first one before `before`, each with
    /// its place in that order.
    pub(crate) async fn acts(
        &self,
        crossing: Id,
        before: Option<i64>,
        limit: usize,
    ) -> Result<Vec<(i64, v1::Act)>, StoreError> {
        self.read(move |db| {
            let mut query = db.prepare_cached(
                "SELECT place, act FROM acts WHERE crossing = ? AND place < ?
                 ORDER BY place DESC LIMIT ?",
            )?;
            let before = before.unwrap_or(i64::MAX);
            query
                .query_map(params![crossing.to_string(), before, limit as i64], |row| {
                    Ok((row.get(0)?, row.get::<_, Vec<u8>>(1)?))
                })?
                .map(|row| {
                    let (place, act) = row?;
                    let act = v1::Act::decode(act.as_slice())
                        .map_err(|why| StoreError::Damaged("an act", why.to_string()))?;
                    Ok((place, act))
                })
                .collect()
        })
        .await
    }

    async fn read<T: Send + 'static>(
        &self,
        query: impl FnOnce(&Connection) -> Result<T, StoreError> + Send + 'static,
    ) -> Result<T, StoreError> {
        let db = Arc::clone(&self.0);
        let query = move || query(&db.lock().unwrap_or_else(PoisonError::into_inner));
        tokio::task::spawn_blocking(query)
            .await
            .unwrap_or_else(|stopped| Err(StoreError::Damaged("the history", stopped.to_string())))
    }
}

fn columns(row: &Row<'_>) -> rusqlite::Result<(Vec<u8>, String)> {
    Ok((row.get(0)?, row.get(1)?))
}

fn decode((setting, explanation): (Vec<u8>, String)) -> Result<Recorded, StoreError> {
    let setting = v1::Setting::decode(setting.as_slice())
        .map_err(|why| StoreError::Damaged("a setting", why.to_string()))?;
    Ok(Recorded {
        setting,
        explanation: explanation.lines().map(Into::into).collect(),
    })
}
