//! Latest-wins: the settings that one watcher is to hear of, one at a time.

use std::{
    collections::{BTreeMap, BTreeSet},
    sync::Arc,
};

use ratewright_control::{Id, Setting};
use ratewright_proto::v1;
use tokio::sync::watch;

use crate::{
    board::{Board, Selection},
    convert::names,
    refused::{Refused, Violation},
};

/// Settings that a watcher has already: epoch and number by crossing.
pub(super) type Known = BTreeMap<Id, (u64, u64)>;

/// A watcher's place in the changes. All it holds is one number, and what it resumes from.
#[derive(Debug)]
pub(super) struct Feed {
    board: Arc<Board>,
    selection: Selection,
    known: Known,
    seen: u64,
    changes: watch::Receiver<u64>,
}

impl Feed {
    /// Begins with the newest setting of each selected crossing, but for those `known`.
    pub(super) fn new(board: Arc<Board>, selection: Selection, known: Known) -> Self {
        let changes = board.changes();
        Self {
            board,
            selection,
            known,
            seen: 0,
            changes,
        }
    }

    /// True if the watcher goes on from settings that it has already.
    pub(super) fn resumes(&self) -> bool {
        !self.known.is_empty()
    }

    /// The next setting to be heard of. If one was replaced meanwhile, it is never seen. May be
    /// dropped while it waits: nothing is lost.
    pub(super) async fn next(&mut self) -> Arc<Setting> {
        loop {
            self.changes.borrow_and_update();
            if let Some((change, setting)) = self.board.next_change(self.seen, &self.selection) {
                self.seen = change;
                // Asked once: whatever comes later for the crossing is another setting.
                let known = self.known.remove(&setting.crossing);
                if known == Some((setting.epoch, setting.number)) {
                    continue;
                }
                return setting;
            }
            // The board, which sends, is held by this feed: the wait cannot fail.
            let _ = self.changes.changed().await;
        }
    }
}

/// The settings that a request says are known already.
pub(super) fn known(sent: &v1::WatchSettingsRequest, field: &str) -> Result<Known, Refused> {
    let mut known = Known::new();
    for (index, name) in sent.newest_known.iter().enumerate() {
        let path = format!("{field}[{index}]");
        let named = names::parse_setting(&path, name)?;
        let Some(number) = named.numbered else {
            let accepted = "crossings/{id}/settings/{epoch}-{number}";
            return Err(Violation::new(path, names::quoted(name), accepted).into());
        };
        if known.insert(named.crossing, number).is_some() {
            let accepted = "at most one setting of each crossing";
            return Err(Violation::new(path, names::quoted(name), accepted).into());
        }
    }
    Ok(known)
}

/// The crossings that a request selects; each must be declared.
pub(super) fn selection(
    board: &Board,
    sent: &v1::WatchSettingsRequest,
    field: &str,
) -> Result<Selection, Refused> {
    if sent.crossings.is_empty() {
        return Ok(Selection::All);
    }
    let mut named = BTreeSet::new();
    for (index, name) in sent.crossings.iter().enumerate() {
        let path = format!("{field}[{index}]");
        let id = names::parse_crossing(&path, name)?;
        if board.crossing(&id).is_none() {
            return Err(Refused::NotFound {
                name: name.clone(),
                field: Some(path),
            });
        }
        named.insert(id);
    }
    Ok(Selection::Named(named))
}
