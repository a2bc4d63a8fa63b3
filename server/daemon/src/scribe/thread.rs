//! The loop of the scribe.

use std::{
    sync::Arc,
    time::{Duration, Instant},
};

use ratewright_control::{Engine, Event, HouseNs, Setting};
use tokio::{
    runtime::{self, Runtime},
    sync::{mpsc, oneshot},
    time::timeout,
};

use super::{
    Desk, Message, QUEUE, RecoverFault,
    group::Group,
    news::Touched,
    start::{Declared, recover},
};
use crate::{
    board::{Board, News},
    house::HouseClock,
    metrics,
    store::{Begin, Store, StoreError},
};

/// How often everything on the board is brought up to now.
const REFRESH: Duration = Duration::from_secs(1);
/// A snapshot is due when the journal holds this many events more than the last one …
const SNAPSHOT_EVENTS: i64 = 20_000;
/// … but not sooner after it than this: it costs as much as the engine is large.
const SNAPSHOT_SOONEST: Duration = Duration::from_secs(2);
/// A snapshot of fewer events is due after this.
const SNAPSHOT_LATEST: Duration = Duration::from_secs(60);
/// A tick that leaves another one due at once is not followed sooner than this.
const LEAST_WAIT: Duration = Duration::from_millis(1);

/// What the scribe needs to begin.
#[derive(Debug)]
pub(crate) struct Scribe {
    pub(crate) store: Store,
    pub(crate) begin: Begin,
    pub(crate) declared: Declared,
    pub(crate) house: HouseClock,
    pub(crate) board: Arc<Board>,
}

/// Resolves when the scribe has ended: cleanly, or with the fault of the store.
pub(crate) type Stopped = oneshot::Receiver<Result<(), StoreError>>;

impl Scribe {
    /// Starts the thread. The first receiver tells when the engine is recovered and on the board,
    /// the second when the thread has ended.
    pub(crate) fn start(self) -> (Desk, oneshot::Receiver<Result<(), RecoverFault>>, Stopped) {
        let (sender, messages) = mpsc::channel(QUEUE);
        let (ready, is_ready) = oneshot::channel();
        let (ended, has_ended) = oneshot::channel();
        // The thread's own, so that it can wait with a time limit and outlive the daemon's.
        let runtime = runtime::Builder::new_current_thread().enable_time().build();
        let runtime = runtime.expect("a runtime that only knows the time needs nothing");
        std::thread::Builder::new()
            .name("scribe".into())
            .spawn(move || match self.recover() {
                Ok(room) => {
                    // A daemon that was dropped meanwhile needs no word; nor does it below.
                    let _ = ready.send(Ok(()));
                    let _ = ended.send(room.work(messages, &runtime));
                }
                Err(fault) => drop(ready.send(Err(fault))),
            })
            .expect("the system can start one thread");
        (Desk(sender), is_ready, has_ended)
    }

    fn recover(self) -> Result<Room, RecoverFault> {
        let Self {
            mut store,
            begin,
            declared,
            house,
            board,
        } = self;
        let engine = recover(&mut store, begin, &declared, house.now())?;
        let now = Instant::now();
        let mut room = Room {
            engine,
            store,
            house,
            board,
            refreshed: now,
            snapshot_taken: now,
        };
        room.show_everything();
        Ok(room)
    }
}

/// The engine and the store, with the loop that serves them.
struct Room {
    engine: Engine,
    store: Store,
    house: HouseClock,
    board: Arc<Board>,
    refreshed: Instant,
    snapshot_taken: Instant,
}

impl Room {
    fn work(
        mut self,
        mut messages: mpsc::Receiver<Message>,
        runtime: &Runtime,
    ) -> Result<(), StoreError> {
        loop {
            let wait = self.longest_wait();
            let first = runtime.block_on(async { timeout(wait, messages.recv()).await });
            let goes_on = match first {
                Ok(None | Some(Message::Stop)) => false,
                Ok(Some(message)) => self.serve(Some(message), &mut messages)?,
                Err(_elapsed) => self.serve(None, &mut messages)?,
            };
            if !goes_on {
                break;
            }
            self.keep_house()?;
        }
        self.store.write_snapshot(&self.engine, self.house.now())
    }

    fn longest_wait(&self) -> Duration {
        let refresh = REFRESH.saturating_sub(self.refreshed.elapsed());
        match self.engine.next_due() {
            Some(due) => self.house.until(due).max(LEAST_WAIT).min(refresh),
            None => refresh,
        }
    }

    /// Serves one group; false if it was the last.
    fn serve(
        &mut self,
        first: Option<Message>,
        messages: &mut mpsc::Receiver<Message>,
    ) -> Result<bool, StoreError> {
        let mut group = Group::default();
        self.tick_if_due(&mut group);
        let mut next = first;
        let mut goes_on = true;
        while let Some(message) = next {
            let Message::Command(command) = message else {
                goes_on = false;
                break;
            };
            group.take(&mut self.engine, command, self.house.now());
            next = if group.is_full() {
                None
            } else {
                messages.try_recv().ok()
            };
        }
        self.finish(group)?;
        Ok(goes_on)
    }

    fn tick_if_due(&mut self, group: &mut Group) {
        let now = self.house.now();
        if self.engine.next_due().is_some_and(|due| due <= now) {
            for (_, refusal) in group.apply(&mut self.engine, vec![Event::Tick], now) {
                tracing::error!(%refusal, "the engine refused a tick");
            }
        }
    }

    /// Disk, board, answers: in this order.
    fn finish(&mut self, mut group: Group) -> Result<(), StoreError> {
        if !group.written.is_empty() {
            let started = Instant::now();
            self.store.commit(&group.written)?;
            metrics::commit(group.written.len(), started.elapsed());
        }
        let settings: Vec<_> = group
            .written
            .settings
            .drain(..)
            .map(|(setting, _)| setting)
            .collect();
        let touched = std::mem::take(&mut group.touched);
        let news = News {
            happenings: std::mem::take(&mut group.happenings),
            ..touched.news(&self.engine, settings, self.house.now())
        };
        self.count(&news);
        self.board.publish(news);
        group.answer();
        Ok(())
    }

    /// Counts what is about to be heard of.
    fn count(&self, news: &News) {
        for setting in news.settings.iter().filter(|setting| !setting.silent) {
            metrics::setting(setting, self.newest_reading_ns(setting));
        }
        for applied in &news.applied {
            if let Some(setting) = self.board.newest_setting(&applied.crossing)
                && (setting.epoch, setting.number) == applied.setting
            {
                metrics::applied(applied.house_ns - setting.effect_ns);
            }
        }
    }

    /// House time of the newest reading of either clock of a setting's crossing.
    fn newest_reading_ns(&self, setting: &Setting) -> Option<HouseNs> {
        let crossing = self.engine.crossing(&setting.crossing)?;
        let last = |clock| {
            let known = self.engine.estimate(clock, setting.decided_ns)?;
            known.estimate.last_reading_ns
        };
        last(&crossing.source).max(last(&crossing.sink))
    }

    /// What is due by the system's time: the board's refresh and the snapshot.
    fn keep_house(&mut self) -> Result<(), StoreError> {
        if self.refreshed.elapsed() >= REFRESH {
            let news = Touched::all(&self.engine).news(&self.engine, Vec::new(), self.house.now());
            self.board.publish(news);
            metrics::store(self.store.since_snapshot(), self.store.bytes());
            self.refreshed = Instant::now();
        }
        let (events, age) = (self.store.since_snapshot(), self.snapshot_taken.elapsed());
        let many = events >= SNAPSHOT_EVENTS && age >= SNAPSHOT_SOONEST;
        if many || (events > 0 && age >= SNAPSHOT_LATEST) {
            self.store.write_snapshot(&self.engine, self.house.now())?;
            self.snapshot_taken = Instant::now();
            tracing::debug!(events, "snapshot written");
        }
        Ok(())
    }

    /// Shows everything the engine holds, with the newest setting of each crossing.
    fn show_everything(&mut self) {
        let now = self.house.now();
        let crossings = self.engine.crossings();
        let settings = crossings
            .filter_map(|crossing| self.engine.status(&crossing.id, now)?.setting)
            .collect();
        self.board
            .publish(Touched::all(&self.engine).news(&self.engine, settings, now));
    }
}
