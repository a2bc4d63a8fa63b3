//! Latest-wins: the settings that one watcher is to hear of, one at a time.

use std::{collections::BTreeSet, sync::Arc};

use ratewright_control::Setting;
use ratewright_proto::v1;
use tokio::sync::watch;

use crate::{
    board::{Board, Selection},
    convert::names,
    refused::Refused,
};

/// A watcher's place in the changes. All it holds is one number.
#[derive(Debug)]
pub(super) struct Feed {
    board: Arc<Board>,
    selection: Selection,
    seen: u64,
    changes: watch::Receiver<u64>,
}

impl Feed {
    /// Begins with the newest setting of each selected crossing.
    pub(super) fn new(board: Arc<Board>, selection: Selection) -> Self {
        let changes = board.changes();
        Self {
            board,
            selection,
            seen: 0,
            changes,
        }
    }

    /// The next setting to be heard of. If one was replaced meanwhile, it is never seen. May be
    /// dropped while it waits: nothing is lost.
    pub(super) async fn next(&mut self) -> Arc<Setting> {
        loop {
            self.changes.borrow_and_update();
            if let Some((change, setting)) = self.board.next_change(self.seen, &self.selection) {
                self.seen = change;
                return setting;
            }
            // The board, which sends, is held by this feed: the wait cannot fail.
            let _ = self.changes.changed().await;
        }
    }
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
