//! The line in which readings wait to be sent: bounded, and when it is full the oldest goes first.

use std::collections::VecDeque;
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};

use tokio::sync::Notify;
use tokio::time::Instant;

use crate::Reading;

/// Nobody takes readings out any more.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Shut;

/// Where readings go in; the line has ended when this is dropped.
#[derive(Debug)]
pub(crate) struct Entrance(Arc<Line>);

/// Where they come out.
#[derive(Debug)]
pub(crate) struct Exit(Arc<Line>);

#[derive(Debug)]
struct Line {
    most: usize,
    state: Mutex<State>,
    arrived: Notify,
    left: Notify,
}

#[derive(Debug, Default)]
struct State {
    /// Each with its arrival.
    waiting: VecDeque<(Instant, Reading)>,
    /// Place of the first of them among all that ever came, counted from 0.
    first: u64,
    dropped: u64,
    ended: bool,
    shut: bool,
}

/// What can be seen from the exit.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Seen {
    /// Readings that wait.
    pub(crate) waiting: usize,
    /// When the oldest of them came.
    pub(crate) since: Option<Instant>,
    /// No more will come.
    pub(crate) ended: bool,
}

/// A line for at most `most` readings, at least 1.
pub(crate) fn line(most: usize) -> (Entrance, Exit) {
    let line = Arc::new(Line {
        most: most.max(1),
        state: Mutex::default(),
        arrived: Notify::new(),
        left: Notify::new(),
    });
    (Entrance(Arc::clone(&line)), Exit(line))
}

impl Line {
    fn state(&self) -> MutexGuard<'_, State> {
        // Nothing that could panic is done under the lock.
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

impl State {
    /// Takes a reading in and returns its place.
    fn push(&mut self, reading: Reading) -> u64 {
        self.waiting.push_back((Instant::now(), reading));
        self.first + self.waiting.len() as u64 - 1
    }
}

impl Entrance {
    /// Puts a reading at the end and returns its place; in a full line the oldest gives way.
    pub(crate) fn push(&self, reading: Reading) -> Result<u64, Shut> {
        let mut state = self.0.state();
        if state.shut {
            return Err(Shut);
        }
        if state.waiting.len() == self.0.most {
            state.waiting.pop_front();
            state.first += 1;
            state.dropped += 1;
        }
        let place = state.push(reading);
        drop(state);
        self.0.arrived.notify_one();
        Ok(place)
    }

    /// The same, but waits for room.
    pub(crate) async fn push_when_room(&self, reading: Reading) -> Result<u64, Shut> {
        loop {
            {
                let mut state = self.0.state();
                if state.shut {
                    return Err(Shut);
                }
                if state.waiting.len() < self.0.most {
                    let place = state.push(reading);
                    drop(state);
                    self.0.arrived.notify_one();
                    return Ok(place);
                }
            }
            self.0.left.notified().await;
        }
    }

    /// Readings that gave way so far.
    pub(crate) fn dropped(&self) -> u64 {
        self.0.state().dropped
    }
}

impl Drop for Entrance {
    fn drop(&mut self) {
        self.0.state().ended = true;
        self.0.arrived.notify_one();
    }
}

impl Exit {
    pub(crate) fn look(&self) -> Seen {
        let state = self.0.state();
        Seen {
            waiting: state.waiting.len(),
            since: state.waiting.front().map(|(arrived, _)| *arrived),
            ended: state.ended,
        }
    }

    /// Waits until something has happened at the entrance since the last look. Cancel safe.
    pub(crate) async fn news(&self) {
        self.0.arrived.notified().await;
    }

    /// Takes at most `most` readings out, the oldest first, with the place of the first.
    pub(crate) fn take(&self, most: usize) -> (u64, Vec<Reading>) {
        let mut state = self.0.state();
        let first = state.first;
        let taken = state.waiting.len().min(most);
        state.first += taken as u64;
        let readings = state.waiting.drain(..taken);
        let readings = readings.map(|(_, reading)| reading).collect();
        drop(state);
        self.0.left.notify_one();
        (first, readings)
    }
}

impl Drop for Exit {
    fn drop(&mut self) {
        self.0.state().shut = true;
        self.0.left.notify_one();
    }
}
