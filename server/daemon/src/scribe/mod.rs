//! The one thread that owns the engine and the store.
//!
//! Calls reach it as [`Command`]s over a bounded channel. It drains what has arrived into a group,
//! applies the events of each command in order, writes the events and the settings that came out
//! in one transaction, shows the news on the board, and answers: commands that asked for
//! [`Promise::Applied`] before the transaction, all others after it. So nobody hears of a setting
//! that is not on the disk, and a caller sees on the board what its command did.
//!
//! When the store fails, the thread ends: what is in memory then is ahead of the disk, and only a
//! restart brings the two together again.

mod group;
mod news;
mod start;
mod thread;

use ratewright_control::{Engine, Event, HouseNs, Refusal};
use tokio::sync::{mpsc, oneshot};

use crate::refused::Refused;

pub(crate) use start::Declared;
pub use start::RecoverFault;
pub(crate) use thread::{Scribe, Stopped};

/// Commands that may wait; more make their senders wait.
const QUEUE: usize = 256;

/// What an answer must promise.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Promise {
    /// The engine has taken the events.
    Applied,
    /// The events are on the disk.
    Durable,
}

/// What became of a command.
#[derive(Debug)]
pub(crate) struct Done {
    /// Events that were handed in.
    pub(crate) events: usize,
    /// Those that were not taken, by their place, each with why not.
    pub(crate) refused: Vec<(usize, Refusal)>,
    /// House time at which they were applied.
    pub(crate) house_ns: HouseNs,
}

impl Done {
    /// What became of the only event of a command.
    pub(crate) fn sole(self) -> Result<(), Refusal> {
        let refused = self.refused.into_iter().next();
        refused.map_or(Ok(()), |(_, refusal)| Err(refusal))
    }
}

/// Looks at the engine and says which events are to happen, or refuses.
type Decide = Box<dyn FnOnce(&Engine) -> Result<Vec<Event>, Refused> + Send>;

/// Events to be applied together.
pub(crate) struct Command {
    decide: Decide,
    promise: Promise,
    answer: oneshot::Sender<Result<Done, Refused>>,
}

enum Message {
    Command(Command),
    Stop,
}

/// How the rest of the daemon reaches the scribe. Cheap to clone.
#[derive(Clone, Debug)]
pub(crate) struct Desk(mpsc::Sender<Message>);

/// An answer that is on its way.
#[derive(Debug)]
pub(crate) struct Pending(oneshot::Receiver<Result<Done, Refused>>);

impl Desk {
    /// Hands in events; waits only while the queue is full.
    pub(crate) async fn hand_in(&self, events: Vec<Event>, promise: Promise) -> Pending {
        self.send(Box::new(|_| Ok(events)), promise).await
    }

    /// One event that depends on what the engine holds; nothing happens in between. Answers when
    /// it is on the disk.
    pub(crate) async fn decide(
        &self,
        decide: impl FnOnce(&Engine) -> Result<Event, Refused> + Send + 'static,
    ) -> Result<Done, Refused> {
        let decide = Box::new(|engine: &Engine| decide(engine).map(|event| vec![event]));
        self.send(decide, Promise::Durable).await.answer().await
    }

    /// Declares what differs from what the engine holds, all of it or nothing; answers how much that was
    /// when it is on the disk.
    pub(crate) async fn declare(&self, declared: Declared) -> Result<usize, Refused> {
        let decide = Box::new(move |engine: &Engine| start::all_or_none(engine, &declared));
        let done = self.send(decide, Promise::Durable).await.answer().await?;
        Ok(done.events)
    }

    /// Asks the engine something, between two events; the answer must not take long, for
    /// everybody else waits.
    pub(crate) async fn ask<T: Send + 'static>(
        &self,
        question: impl FnOnce(&Engine) -> T + Send + 'static,
    ) -> Result<T, Refused> {
        let (tell, told) = oneshot::channel();
        let decide = Box::new(|engine: &Engine| {
            // A caller that has gone does not need its answer.
            let _ = tell.send(question(engine));
            Ok(Vec::new())
        });
        self.send(decide, Promise::Applied).await.answer().await?;
        told.await.map_err(|_| Refused::Unavailable("stopping"))
    }

    /// A desk with no store behind it: questions are answered by this engine until every clone of
    /// the desk is gone.
    #[cfg(test)]
    pub(crate) fn over(engine: Engine) -> Self {
        let (sender, mut messages) = mpsc::channel(QUEUE);
        std::thread::spawn(move || {
            while let Some(Message::Command(command)) = messages.blocking_recv() {
                let outcome = (command.decide)(&engine).map(|_| Done {
                    events: 0,
                    refused: Vec::new(),
                    house_ns: 0,
                });
                let _ = command.answer.send(outcome);
            }
        });
        Self(sender)
    }

    /// Asks the scribe to stop after what has been handed in before.
    pub(crate) async fn stop(&self) {
        // If the scribe is gone already, that is what was asked for.
        let _ = self.0.send(Message::Stop).await;
    }

    async fn send(&self, decide: Decide, promise: Promise) -> Pending {
        let (answer, pending) = oneshot::channel();
        // If the scribe is gone, the answer is dropped with the message, and `Pending` says so.
        let _ = self
            .0
            .send(Message::Command(Command {
                decide,
                promise,
                answer,
            }))
            .await;
        Pending(pending)
    }
}

impl Pending {
    /// Waits for the answer.
    pub(crate) async fn answer(self) -> Result<Done, Refused> {
        self.0.await.unwrap_or(Err(Refused::Unavailable(
            "stopping: nothing can be written",
        )))
    }
}

impl std::fmt::Debug for Command {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Command")
            .field("promise", &self.promise)
            .finish_non_exhaustive()
    }
}
