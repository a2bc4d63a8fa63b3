//! The embedded store: one folder, one daemon, one writer.
//!
//! | table | holds |
//! | --- | --- |
//! | `snapshot` | the engine as of one journal row, with its epoch and engine version |
//! | `journal` | every event since, with the house time at which it was applied; a row a transaction |
//! | `settings` | the newest settings of each crossing, with their explanations, in the form of the contract |
//! | `acts` | what operators did last to each crossing, in the form of the contract |
//! | `declarations` | clocks and crossings as they stand, in the form of the contract |
//!
//! A restart reads the snapshot and replays the journal: same events, same order, same bytes. The
//! contract's form outlives engine versions, so that a new epoch can begin from the declarations
//! and the history of settings stays readable.
//!
//! Everything is written in transactions of SQLite in WAL mode, synchronous FULL: what
//! [`Store::commit`] has returned from survives a crash of the machine.

mod history;
mod lock;
mod open;
mod write;

use std::path::{Path, PathBuf};

use ratewright_control::{Act, Engine, Event, HouseNs, Setting};
use rusqlite::Connection;

pub(crate) use history::{History, Recorded};

/// The store, as its one writer holds it.
#[derive(Debug)]
pub(crate) struct Store {
    db: Connection,
    /// Number of the newest event of the journal.
    newest: i64,
    /// Settings of a crossing that are kept, at least, and acts on it, at most.
    keep_settings: u64,
    /// The snapshot was taken after this event.
    snapshot: i64,
    /// Held for as long as the store is.
    _lock: lock::Lock,
}

/// What was found in a store.
#[derive(Debug)]
pub(crate) struct Opened {
    pub(crate) store: Store,
    /// For calls that look back.
    pub(crate) history: History,
    /// The last house time that was written down; 0 in a new store.
    pub(crate) floor_ns: HouseNs,
    pub(crate) begin: Begin,
}

/// How the engine begins.
#[derive(Debug)]
pub(crate) enum Begin {
    /// From a snapshot, and the events since.
    Continue {
        /// The engine of the snapshot.
        engine: Box<Engine>,
        /// Events since, each with its house time.
        journal: Vec<(HouseNs, Event)>,
        /// The epoch to open after that, if one is to be opened.
        new_epoch: Option<u64>,
    },
    /// Afresh, from declarations alone: a new store, or one of another engine version.
    Afresh {
        /// Never used before.
        epoch: u64,
        /// To be applied first: clocks, then crossings.
        declarations: Vec<Event>,
    },
}

/// How to open a store.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Opening {
    /// Go on where it was left.
    #[default]
    Continue,
    /// Begin a new epoch, greater than any before. For a store restored from a backup: everything
    /// else goes on. For one written by another engine version: declarations and history stay,
    /// estimates start afresh. For an empty one that takes the place of one that was lost.
    NewEpoch,
}

/// What one transaction writes.
#[derive(Debug, Default)]
pub(crate) struct Group {
    /// Events that the engine has taken, in order: each list with the house time of all that is in it.
    pub(crate) events: Vec<(HouseNs, Vec<Event>)>,
    /// Settings that came out, each with its explanation.
    pub(crate) settings: Vec<(Setting, Vec<String>)>,
    /// What operators did.
    pub(crate) acts: Vec<Act>,
}

impl Group {
    /// Number of its events.
    pub(crate) fn len(&self) -> usize {
        self.events.iter().map(|(_, events)| events.len()).sum()
    }

    pub(crate) fn is_empty(&self) -> bool {
        self.events.is_empty() && self.settings.is_empty() && self.acts.is_empty()
    }
}

/// Why a store could not be opened, read or written.
#[derive(Debug, thiserror::Error)]
pub enum StoreError {
    /// The folder or the lock file cannot be made.
    #[error("the store {} cannot be opened: {source}", .path.display())]
    Folder {
        /// The folder.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// Another daemon has it.
    #[error("the store {} is in use by another daemon: stop that one, or choose another folder", .0.display())]
    InUse(PathBuf),
    /// Its tables are not of this version.
    #[error(
        "the store {} has tables of version {found}, this daemon knows version {known}: run the \
         daemon that wrote it, or choose another folder", .path.display()
    )]
    Tables {
        /// The folder.
        path: PathBuf,
        /// Version found.
        found: i64,
        /// Version known.
        known: i64,
    },
    /// Its engine state was written by another engine version.
    #[error(
        "the store {} holds the state of engine version {found}, this daemon has version {known}: \
         start once with --new-epoch to keep declarations and history and begin estimates and \
         numbering afresh, or run the daemon that wrote it", .path.display()
    )]
    EngineVersion {
        /// The folder.
        path: PathBuf,
        /// Version found.
        found: u32,
        /// Version of this daemon.
        known: u32,
    },
    /// Something in it cannot be read back.
    #[error(
        "{0} in the store cannot be read back ({1}): restore a backup and start with --new-epoch"
    )]
    Damaged(&'static str, String),
    /// SQLite failed.
    #[error("the store failed: {0}")]
    Database(#[from] rusqlite::Error),
}

fn database(folder: &Path) -> PathBuf {
    folder.join("ratewright.sqlite3")
}

#[cfg(test)]
pub(crate) mod tests;
