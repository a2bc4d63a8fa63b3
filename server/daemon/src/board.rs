//! What the daemon shows: the newest views of clocks, crossings and settings.
//!
//! The scribe writes it, everybody else reads it; a reader never makes the scribe wait longer
//! than a map look-up. A view tells the time it speaks of: what a command named is refreshed
//! before the command is answered, everything else at least once a second, so that the interval
//! of a clock in holdover is never older than that.
//!
//! Watchers are latest-wins: a watcher holds one number, the change it saw last, and asks for
//! what is newer. No queue grows behind a slow one.

use std::{
    collections::{BTreeMap, BTreeSet},
    ops::Bound,
    sync::{Arc, PoisonError, RwLock, RwLockReadGuard},
};

use ratewright_control::{
    ClockDeclaration, ClockEstimate, CrossingDeclaration, CrossingStatus, HouseNs, Id, Setting,
};
use tokio::sync::watch;

use crate::chronicle::{Chronicle, Happening, Point, Span};

/// A clock as of `as_of_ns`.
#[derive(Clone, Debug)]
pub struct ClockView {
    /// What was declared.
    pub declaration: ClockDeclaration,
    /// What the readings say.
    pub estimate: ClockEstimate,
    /// House time this speaks of.
    pub as_of_ns: HouseNs,
}

/// A crossing as of `as_of_ns`.
#[derive(Clone, Debug)]
pub struct CrossingView {
    /// What was declared.
    pub declaration: CrossingDeclaration,
    /// How it fares, with its newest setting.
    pub status: CrossingStatus,
    /// House time this speaks of.
    pub as_of_ns: HouseNs,
}

/// A follower's word that a setting took effect.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Applied {
    /// The crossing.
    pub crossing: Id,
    /// Epoch and number of the setting.
    pub setting: (u64, u64),
    /// House time of the effect.
    pub house_ns: HouseNs,
}

/// News for the board; what is not in it stays as it was.
#[derive(Clone, Debug, Default)]
pub struct News {
    /// Clocks, new or renewed.
    pub clocks: Vec<ClockView>,
    /// Clocks that were deleted.
    pub clocks_gone: Vec<Id>,
    /// Crossings, new or renewed.
    pub crossings: Vec<CrossingView>,
    /// Crossings that were deleted.
    pub crossings_gone: Vec<Id>,
    /// Settings in the order they were made; only the newest of a crossing is kept, and of those
    /// that are silent none: nobody is to hear of them.
    pub settings: Vec<Setting>,
    /// Settings that took effect, as their followers say.
    pub applied: Vec<Applied>,
    /// What else changed.
    pub happenings: Vec<Happening>,
}

/// The board. Share it in an `Arc`.
#[derive(Debug)]
pub struct Board {
    shown: RwLock<Shown>,
    /// Number of the newest change; watchers wait on it.
    changes: watch::Sender<u64>,
}

#[derive(Debug, Default)]
struct Shown {
    clocks: BTreeMap<Id, Arc<ClockView>>,
    crossings: BTreeMap<Id, Arc<CrossingView>>,
    /// Newest setting of each crossing, with the number of the change that brought it.
    newest: BTreeMap<Id, (u64, Arc<Setting>)>,
    /// The same, by number: what came after a change is a range of this map.
    by_change: BTreeMap<u64, Id>,
    last_change: u64,
    /// Settings of each crossing that were shown so far.
    shown_of: BTreeMap<Id, u64>,
    /// Epoch and number of the newest setting of each crossing that its follower applied, since the start.
    applied: BTreeMap<Id, (u64, u64)>,
    chronicle: Chronicle,
}

/// How far a watcher is behind.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Backlog {
    /// Settings of its crossings that were shown so far; of those that are deleted none.
    pub shown: u64,
    /// Of these, the ones that it has not seen and that are still the newest.
    pub waiting: u64,
}

/// Which crossings a watcher wants.
#[derive(Clone, Debug)]
pub enum Selection {
    /// All, those declared later included.
    All,
    /// These.
    Named(BTreeSet<Id>),
}

impl Board {
    /// An empty board.
    pub fn new() -> Self {
        Self {
            shown: RwLock::default(),
            changes: watch::Sender::new(0),
        }
    }

    /// A clock.
    pub fn clock(&self, id: &Id) -> Option<Arc<ClockView>> {
        self.shown().clocks.get(id).cloned()
    }

    /// A crossing.
    pub fn crossing(&self, id: &Id) -> Option<Arc<CrossingView>> {
        self.shown().crossings.get(id).cloned()
    }

    /// At most `limit` clocks in the order of their ids, from the first one after `after`.
    pub fn clocks(&self, after: Option<&Id>, limit: usize) -> Vec<Arc<ClockView>> {
        page(&self.shown().clocks, after, limit)
    }

    /// At most `limit` crossings in the order of their ids, from the first one after `after`.
    pub fn crossings(&self, after: Option<&Id>, limit: usize) -> Vec<Arc<CrossingView>> {
        page(&self.shown().crossings, after, limit)
    }

    /// The newest setting of a crossing that watchers and followers hear of.
    pub fn newest_setting(&self, crossing: &Id) -> Option<Arc<Setting>> {
        self.shown()
            .newest
            .get(crossing)
            .map(|(_, setting)| Arc::clone(setting))
    }

    /// Epoch and number of the newest setting of the crossing that its follower has applied, if one has
    /// reported since the start.
    pub fn applied(&self, crossing: &Id) -> Option<(u64, u64)> {
        self.shown().applied.get(crossing).copied()
    }

    /// The oldest of the changes after change `seen` (0 for all) that is selected and still the
    /// newest of its crossing, with its number to ask with next time.
    pub fn next_change(&self, seen: u64, selection: &Selection) -> Option<(u64, Arc<Setting>)> {
        let shown = self.shown();
        let (change, setting) = match selection {
            Selection::All => {
                let mut later = shown
                    .by_change
                    .range((Bound::Excluded(seen), Bound::Unbounded));
                shown.newest.get(later.next()?.1)?
            }
            Selection::Named(names) => {
                let newest = names.iter().filter_map(|name| shown.newest.get(name));
                newest
                    .filter(|(change, _)| *change > seen)
                    .min_by_key(|(change, _)| *change)?
            }
        };
        Some((*change, Arc::clone(setting)))
    }

    /// How the drift of a clock went over a span up to `now_ns`, oldest first.
    pub fn drift_history(&self, clock: &Id, span: Span, now_ns: HouseNs) -> Vec<Point> {
        let shown = self.shown();
        let trace = shown.chronicle.drift(clock);
        trace.map_or_else(Vec::new, |trace| trace.points(span, now_ns))
    }

    /// How the phase error of a crossing went over a span up to `now_ns`, oldest first.
    pub fn phase_history(&self, crossing: &Id, span: Span, now_ns: HouseNs) -> Vec<Point> {
        let shown = self.shown();
        let trace = shown.chronicle.phase(crossing);
        trace.map_or_else(Vec::new, |trace| trace.points(span, now_ns))
    }

    /// What changed from `since_ns` on and is wanted: the newest `most`, newest first, and how many
    /// there are.
    pub fn happenings(
        &self,
        since_ns: HouseNs,
        most: usize,
        wanted: impl Fn(&Happening) -> bool,
    ) -> (Vec<Happening>, usize) {
        let shown = self.shown();
        let found = || shown.chronicle.since(since_ns).filter(|h| wanted(h));
        (found().take(most).cloned().collect(), found().count())
    }

    /// How far a watcher is behind that has seen change `seen` (0 for none).
    pub fn backlog(&self, seen: u64, selection: &Selection) -> Backlog {
        let shown = self.shown();
        match selection {
            Selection::All if seen == 0 => Backlog {
                shown: shown.last_change,
                waiting: shown.by_change.len() as u64,
            },
            Selection::All => Backlog {
                shown: shown.last_change,
                waiting: shown.by_change.range(seen + 1..).count() as u64,
            },
            Selection::Named(names) => {
                let is_new = |name: &&Id| {
                    let newest = shown.newest.get(*name);
                    newest.is_some_and(|(change, _)| *change > seen)
                };
                Backlog {
                    shown: names.iter().filter_map(|it| shown.shown_of.get(it)).sum(),
                    waiting: names.iter().filter(is_new).count() as u64,
                }
            }
        }
    }

    /// Wakes when settings changed; the value is the number of the newest change.
    pub fn changes(&self) -> watch::Receiver<u64> {
        self.changes.subscribe()
    }

    /// Shows news. Whatever was shown of the same names is replaced.
    pub fn publish(&self, news: News) {
        let mut shown = self.shown.write().unwrap_or_else(PoisonError::into_inner);
        for id in news.clocks_gone {
            shown.clocks.remove(&id);
            shown.chronicle.forget_clock(&id);
        }
        for id in news.crossings_gone {
            shown.forget_crossing(&id);
        }
        for happening in news.happenings {
            shown.chronicle.note(happening);
        }
        for view in news.clocks {
            shown.chronicle.note_clock(&view);
            shown
                .clocks
                .insert(view.declaration.id.clone(), Arc::new(view));
        }
        for view in news.crossings {
            shown.chronicle.note_crossing(&view);
            shown
                .crossings
                .insert(view.declaration.id.clone(), Arc::new(view));
        }
        let any_setting = !news.settings.is_empty();
        for setting in news.settings {
            shown.show_setting(setting);
        }
        for Applied {
            crossing, setting, ..
        } in news.applied
        {
            let newest = shown.applied.entry(crossing).or_insert(setting);
            *newest = setting.max(*newest);
        }
        let last_change = shown.last_change;
        drop(shown);
        if any_setting {
            self.changes.send_replace(last_change);
        }
    }

    fn shown(&self) -> RwLockReadGuard<'_, Shown> {
        // A panic while writing leaves whole views behind: each is inserted in one step.
        self.shown.read().unwrap_or_else(PoisonError::into_inner)
    }
}

impl Default for Board {
    fn default() -> Self {
        Self::new()
    }
}

impl Shown {
    fn show_setting(&mut self, setting: Setting) {
        self.chronicle.note_setting(&setting);
        if setting.silent {
            self.withdraw(&setting.crossing);
            return;
        }
        self.last_change += 1;
        let change = self.last_change;
        let crossing = setting.crossing.clone();
        *self.shown_of.entry(crossing.clone()).or_default() += 1;
        let before = self
            .newest
            .insert(crossing.clone(), (change, Arc::new(setting)));
        if let Some((old_change, _)) = before {
            self.by_change.remove(&old_change);
        }
        self.by_change.insert(change, crossing);
    }

    fn forget_crossing(&mut self, id: &Id) {
        self.crossings.remove(id);
        self.applied.remove(id);
        self.chronicle.forget_crossing(id);
        self.shown_of.remove(id);
        self.withdraw(id);
    }

    /// There is no setting of the crossing to be heard of any more.
    fn withdraw(&mut self, crossing: &Id) {
        if let Some((change, _)) = self.newest.remove(crossing) {
            self.by_change.remove(&change);
        }
    }
}

fn page<V>(map: &BTreeMap<Id, Arc<V>>, after: Option<&Id>, limit: usize) -> Vec<Arc<V>> {
    let start = after.map_or(Bound::Unbounded, Bound::Excluded);
    map.range::<Id, _>((start, Bound::Unbounded))
        .take(limit)
        .map(|(_, view)| Arc::clone(view))
        .collect()
}
