//! Latest-wins: the settings that one watcher is to hear of, one at a time.

use std::{
    collections::{BTreeMap, BTreeSet},
    sync::Arc,
};

use ratewright_control::{Id, Setting};
use ratewright_proto::v1;
use tokio::sync::watch;

use crate::{
    board::{Backlog, Board, Selection},
    convert::names,
    metrics,
    refused::{Refused, Violation},
};

/// Settings that a watcher has already: epoch and number by crossing.
pub(super) type Known = BTreeMap<Id, (u64, u64)>;

/// A watcher's place in the changes. All it holds are a few numbers, and what it resumes from.
#[derive(Debug)]
pub(super) struct Feed {
    board: Arc<Board>,
    selection: Selection,
    known: Known,
    seen: u64,
    /// Settings of the selection that need no more thought, and those sent since that was so.
    settled: u64,
    sent: u64,
    changes: watch::Receiver<u64>,
}

impl Feed {
    /// Begins with the newest setting of each selected crossing, but for those `known`.
    pub(super) fn new(board: Arc<Board>, selection: Selection, known: Known) -> Self {
        let changes = board.changes();
        let Backlog { shown, waiting } = board.backlog(0, &selection);
        Self {
            board,
            selection,
            known,
            seen: 0,
            settled: shown - waiting,
            sent: 0,
            changes,
        }
    }

    /// True if a crossing is of the selection.
    pub(super) fn selects(&self, crossing: &Id) -> bool {
        match &self.selection {
            Selection::All => true,
            Selection::Named(named) => named.contains(crossing),
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
                self.sent += 1;
                // Asked once: whatever comes later for the crossing is another setting.
                let known = self.known.remove(&setting.crossing);
                if known == Some((setting.epoch, setting.number)) {
                    continue;
                }
                return setting;
            }
            if self.sent > 0 {
                metrics::superseded(self.superseded());
            }
            // The board, which sends, is held by this feed: the wait cannot fail.
            let _ = self.changes.changed().await;
        }
    }

    /// Settings that were neither sent nor wait to be, since this was asked last.
    fn superseded(&mut self) -> u64 {
        let Backlog { shown, waiting } = self.board.backlog(self.seen, &self.selection);
        let settled = shown - waiting;
        // With a crossing that was deleted its settings are no longer counted.
        let superseded = settled.saturating_sub(self.settled + self.sent);
        (self.settled, self.sent) = (settled, 0);
        superseded
    }
}

impl Drop for Feed {
    fn drop(&mut self) {
        metrics::superseded(self.superseded());
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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::{board::News, store::tests::setting};

    fn publish(board: &Board, crossing: &str, number: u64) {
        let setting = Setting {
            crossing: Id::new(crossing).unwrap(),
            ..setting(number)
        };
        board.publish(News {
            settings: vec![setting],
            ..News::default()
        });
    }

    async fn heard(feed: &mut Feed) -> (String, u64) {
        let setting = feed.next().await;
        (setting.crossing.to_string(), setting.number)
    }

    #[tokio::test]
    async fn what_a_slow_watcher_never_gets_is_counted_once() {
        let named = Selection::Named(BTreeSet::from([Id::new("a").unwrap()]));
        for selection in [Selection::All, named] {
            let board = Arc::new(Board::new());
            publish(&board, "a", 1);
            publish(&board, "a", 2);
            let mut feed = Feed::new(Arc::clone(&board), selection.clone(), Known::new());
            assert_eq!(feed.superseded(), 0, "made before it came");
            assert_eq!(heard(&mut feed).await, ("a".into(), 2));
            assert_eq!(feed.superseded(), 0);

            for number in 3..=7 {
                publish(&board, "a", number);
            }
            assert_eq!(feed.superseded(), 4, "the last one waits");
            publish(&board, "a", 8);
            assert_eq!(heard(&mut feed).await, ("a".into(), 8));
            assert_eq!(feed.superseded(), 1);
            assert_eq!(feed.superseded(), 0);

            publish(&board, "b", 1);
            publish(&board, "b", 2);
            let others = match selection {
                Selection::All => 1,
                Selection::Named(_) => 0,
            };
            assert_eq!(feed.superseded(), others);
        }
    }

    #[tokio::test]
    async fn a_setting_that_the_watcher_has_already_is_not_missed() {
        let board = Arc::new(Board::new());
        publish(&board, "a", 1);
        let known = Known::from([(Id::new("a").unwrap(), (1, 1))]);
        let mut feed = Feed::new(Arc::clone(&board), Selection::All, known);
        publish(&board, "b", 5);
        assert_eq!(heard(&mut feed).await, ("b".into(), 5));
        assert_eq!(feed.superseded(), 0);
    }
}
